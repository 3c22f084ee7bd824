"""Starter files: every kind can be read and assessed as it is; the limits file repeats the shipped limits."""

import json
import tomllib

import pandas as pd
import pytest
from numpy.testing import assert_allclose

from aquabuf.assess.lake.event_file import read_event
from aquabuf.assess.lake.options import LakeOptions
from aquabuf.assess.lake.schemes import read_scheme
from aquabuf.assess.limits import shipped_limits
from aquabuf.assess.limits_file import read_limits
from aquabuf.assess.options import Options
from aquabuf.assess.sample.columns import limit_quantities
from aquabuf.assess.tank.job_file import read_stream
from aquabuf.assess.tank.waste import chemistry
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.errors import FileError, InputError
from aquabuf.readings.result import join_readings
from aquabuf.readings.source import open_any
from aquabuf.readings.template import template_kinds
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.report.lake_run import LakeFiles, assess_survey
from aquabuf.report.starters import COMMANDS, FILES, TITRATION_KINDS, starter, starter_kinds, write_starter
from aquabuf.report.titration_run import titrate_file

TABLES = [kind for kind in template_kinds() if kind != "map"]
QUANTITIES = limit_quantities(Options())


@pytest.mark.parametrize("kind", TABLES)
def test_starter_table_can_be_assessed(run, kind):
    """Both invented rows come out, none is refused."""
    words, _ = run(starter(kind))
    assert words.startswith("waters.csv: 2 samples assessed")
    assert "0 rows refused" in words


def test_unknown_kind_names_those_there_are():
    """The user learns what to ask for."""
    with pytest.raises(InputError, match=r"no starter file is named 'pond'. Use one of: lake, stream, .*map, limits"):
        starter("pond")


def test_a_slip_is_told_the_nearest_kind():
    """One letter too many."""
    with pytest.raises(InputError, match=r"no starter file is named 'tankk'. Did you mean 'tank'\? Use one of: lake, stream"):
        starter("tankk")


@pytest.mark.parametrize(("command", "kind"), [("assess", "stream"), ("dose", "plan")])
def test_starter_of_a_command_is_that_of_its_kind(command, kind):
    """One text under two names, but for the first line."""
    assert starter(command).split("\n", 1)[1] == starter(kind)


def test_written_starter_is_the_printed_one(tmp_path):
    """Whole, with plain line ends, and never over a file that is there."""
    path = tmp_path / "mine.csv"
    write_starter("titration", path)
    assert path.read_bytes() == starter("titration").encode()
    with pytest.raises(FileError, match=r"mine.csv exists already and is not overwritten. Choose another name with --out, or replace it"):
        write_starter("assess", path)
    assert path.read_bytes() == starter("titration").encode()
    write_starter("assess", path, force=True)
    assert path.read_bytes() == starter("assess").encode()
    with pytest.raises(FileError, match=r"mine.csv cannot be written: no such file or directory. Choose another name"):
        write_starter("assess", tmp_path / "none" / "mine.csv")
    with pytest.raises(InputError, match="no starter file is named 'pond'"):
        write_starter("pond", tmp_path / "pond")
    assert not (tmp_path / "pond").exists()


def test_limits_starter_changes_nothing_as_it_is(tmp_path):
    """Everything is a remark until the user takes the # away."""
    path = tmp_path / "limits.toml"
    path.write_text(starter("limits"), encoding="utf-8")
    assert read_limits(path, QUANTITIES) == shipped_limits()


def test_limits_starter_holds_every_number():
    """Limit, floor, group, waters and words of each shipped limit stand behind its #."""
    text = "\n".join(line.removeprefix("#") for line in starter("limits").splitlines() if not line.startswith("# "))
    found = tomllib.loads(text)["limits"]
    assert list(found) == [x.name for x in shipped_limits()]
    for x in shipped_limits():
        entry = found[x.name]
        assert (entry["limit"], entry.get("lower", float("-inf")), entry["group"]) == (x.limit, x.lower, x.group)
        assert (tuple(entry["kinds"]), tuple(entry["regimes"]), entry["words"]) == (x.kinds, x.regimes, x.words)


def test_limits_starter_repeats_the_shipped_limits(tmp_path):
    """With every # of an entry taken away, the same limits come out."""
    text = "\n".join(line.removeprefix("#") for line in starter("limits").splitlines() if not line.startswith("# "))
    path = tmp_path / "limits.toml"
    path.write_text(text, encoding="utf-8")
    assert read_limits(path, QUANTITIES) == shipped_limits()


def test_starter_titrations_can_be_assessed(table, tmp_path):
    """Both invented titrations come out without a warning: dilute by the Gran line, ordinary by the fit."""
    files = TitrationFiles(*(table(starter(kind), f"{kind}.csv") for kind in TITRATION_KINDS))
    words = titrate_file(files, tmp_path / "out", TitrationOptions(), figures=0)
    assert words.startswith("titration_points.csv: 2 titrations, 2 with a result (0 of them with a warning), 0 without, 0 refused.")
    assert [line.split()[-1] for line in words.splitlines() if line.startswith("  P")] == ["gran", "fit"]


def test_starter_titrations_say_what_each_column_is():
    """Each column of a starter stands in the remarks above it, with its unit where it has one."""
    for kind in TITRATION_KINDS:
        lines = starter(kind).splitlines()
        remarks = " ".join(line for line in lines if line.startswith("#"))
        header = next(line for line in lines if not line.startswith("#"))
        assert all(name in remarks for name in header.split(",")), kind


def test_one_table_of_titrations_says_what_the_two_say(table, tmp_path):
    """Points and samples in one table or in two: the same results; every column has its remark."""
    two = TitrationFiles(*(table(starter(kind), f"{kind}.csv") for kind in TITRATION_KINDS))
    titrate_file(two, tmp_path / "two", TitrationOptions(), figures=0)
    titrate_file(TitrationFiles(table(starter("titration"), "t.csv")), tmp_path / "one", TitrationOptions(), figures=0)
    found = [pd.read_csv(tmp_path / name / "alkalinity.csv").drop(columns="row") for name in ("one", "two")]
    pd.testing.assert_frame_equal(*found)
    assert len(found[0]) == 2
    lines = starter("titration").splitlines()
    remarks = " ".join(line for line in lines if line.startswith("#"))
    assert all(name in remarks for name in next(line for line in lines if not line.startswith("#")).split(","))
    assert max(map(len, lines)) <= 200


# ------------------------------------------------------------------ lakes

LAKE_STARTERS = ("scheme", "event")


@pytest.fixture
def lake_starters(table):
    """The starter table of lakes, a starter scheme and starter event water, as files."""
    return table(starter("lake"), "lakes.csv"), table(starter("scheme"), "s.toml"), table(starter("event"), "e.toml")


def test_every_starter_file_is_offered():
    """Each file of its own is among the kinds, once, and each command has one."""
    assert set(COMMANDS) <= set(starter_kinds())
    assert [kind for kind in starter_kinds() if kind in FILES] == list(FILES)
    assert set(LAKE_STARTERS) < set(FILES)


def test_starter_lakes_bring_every_answer(lake_starters, tmp_path):
    """Neither lake is refused, lacks a reading, or fails a check; hydrology and deposition lead to every answer."""
    words = assess_survey(LakeFiles(survey=lake_starters[0]), tmp_path / "out", LakeOptions(), figure=False)
    assert words.startswith("lakes.csv: 2 lakes assessed")
    assert "0 rows refused" in words
    found = pd.read_csv(tmp_path / "out" / "results.csv", keep_default_na=False)
    for column in ("left_out", "missing_ions", "failed_checks"):
        assert found[column].tolist() == ["", ""], column
    assert found["status"].tolist() == ["ok", "ok"]
    assert found["anc_used_from"].tolist() == ["Gran ANC", "Gran ANC"]
    for column in ("exceedance_meq_m2_yr", "episode_anc_ueq_l", "co2_flux_mmol_m2_d", "years_to_anc_limit", "lake_volume_m3"):
        assert (found[column] != "").all(), column
    groups = pd.read_csv(tmp_path / "out" / "groups.csv")
    assert (groups["weighted"][0], groups["lakes_stood_for"][0]) == ("yes", 20.5)  # 12.5 and 8 lakes


def test_starter_scheme_and_event_serve_a_run(lake_starters, tmp_path):
    """Both are read as they are, and the run says that it rests on them."""
    lakes, scheme, event = lake_starters
    options = LakeOptions(schemes=("survey_bands", str(scheme)), draws=0)
    assess_survey(LakeFiles(survey=lakes, event=event), tmp_path / "out", options, figure=False)
    record = json.loads((tmp_path / "out" / "run.json").read_text(encoding="utf-8"))
    assert [s["name"] for s in record["schemes"]] == ["survey_bands", read_scheme(scheme).name]
    assert record["event"][0].startswith(read_event(event).name)
    shares = pd.read_csv(tmp_path / "out" / "episodes.csv")["event_fraction"].unique()
    assert_allclose(shares, read_event(event).fractions)


# ------------------------------------------------------------------ wastes


def test_starter_stream_is_read_as_it_is(table):
    """Two invented wastes, one in batches; base of the rinse by hand (98.079 g/mol, two equivalents); its pH agrees."""
    job = read_stream(table(starter("tank"), "stream.toml"))
    assert [a.waste.name for a in job.arrivals] == ["rinse", "spent cleaner"]
    assert [a.batch is None for a in job.arrivals] == [True, False]
    chem = chemistry(job.wastes)
    assert_allclose(chem.base_eq_l[0], -2 * 0.40 / 98.079, rtol=1e-4)
    assert_allclose(chem.base_eq_l[1], 4 / 39.997 + 2 * 1.5 / 105.988, rtol=1e-4)
    assert abs(chem.ph[0] - job.wastes[0].ph) < 0.3
    assert (job.notes, [w for w in chem.warnings if "imply" in w]) == ((), [])


def test_remarks_of_the_starter_stream_are_true(table):
    """What stands behind a # can be used: an own acid, stages, a profile; the titration and the profile need their tables."""
    text = starter("tank")
    for words in ("[acids.additive]", "pk = [3.9, 9.1]", "molar_mass = 210", "[layout]", "stages = 2", "set_points = [4.5, 7.5]"):
        assert f"# {words}" in text
        text = text.replace(f"# {words}", words)
    job = read_stream(table(text.replace("calcium =", 'additive = "21 mg/L", calcium ='), "stream.toml"))
    assert (job.wishes.stages, job.wishes.set_points) == (2, (4.5, 7.5))
    assert_allclose(job.wastes[0].total("additive"), 1e-4)
    table("time (h),flow (m3/h),strength rinse\n0,4,1\n1,6,2\n", "flows.csv")
    uncommented = text.replace("# [profile]", "[profile]").replace('# file = "flows.csv"', 'file = "flows.csv"')
    assert read_stream(table(uncommented, "stream.toml")).profile is not None


# ------------------------------------------------------------------ long tables

LONG = """Station,Day,Parameter,Result,Unit,Fraction,Qualifier,Detection limit,Kind
Raven Tarn,10/9/2024,Water temperature,10.8,°C,,,,sample
Raven Tarn,10/9/2024,pH,6.1,,,,,sample
Raven Tarn,10/9/2024,Gran ANC,31,µeq/L,,,,sample
Raven Tarn,10/9/2024,Nitrate-N,,mg/L,,below detection,0.02,sample
Raven Tarn,10/9/2024,Calcium,1.90,mg/L,Total,,,sample
Raven Tarn,10/9/2024,Calcium,1.80,mg/L,Dissolved,,,sample
Raven Tarn,10/9/2024,Calcium,0.05,mg/L,Dissolved,,,field blank
Raven Tarn,10/9/2024,Color,40,,,,,sample
Raven Tarn,10/9/2024,pH,,,,bottle broke,,replicate 2
"""


def test_starter_long_map_reads_a_long_table(table):
    """Its remarks are true: which fraction, whose mass, half the limit, blanks left out, words that go along."""
    readings = join_readings(open_any(table(LONG, "long.csv"), table(starter("long_map"), "map.toml")))
    assert readings.rejected.empty
    row = readings.frame.iloc[0]
    assert (len(readings.frame), row["sample_id"], row["water_kind"], row["anc_method"]) == (1, "Raven Tarn_10/9/2024", "lake", "gran")
    assert row["date_parsed"] == pd.Timestamp(2024, 9, 10)
    found = row[["temperature_c", "ph", "anc_eq_l", "calcium_mol_l", "nitrate_mol_l"]].astype(float)
    assert_allclose(found, [10.8, 6.1, 31e-6, 1.80e-3 / 40.078, 0.01e-3 / 14.007], rtol=1e-12)  # molar masses: IUPAC
