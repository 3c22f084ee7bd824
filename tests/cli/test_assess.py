"""`aquabuf assess`: done is 0, readings that cannot be assessed are 1, with a message that names the remedy."""

import csv
import json
import os
from pathlib import Path

import pytest

QUICK = ("--draws", "0", "--no-figure")
HEADER = "sample_id,temperature_c,ph,alkalinity_meq_l\n"


def record(folder="o"):
    """The run record."""
    return json.loads((Path(folder) / "run.json").read_text(encoding="utf-8"))


def test_done(call, table):
    """Summary to standard output, nothing to standard error, exit code 0."""
    done = call("assess", table(), "--out", "deep/o", *QUICK)
    assert (done.exit_code, done.stderr) == (0, "")
    assert done.stdout.startswith("t.csv: 2 samples assessed, 1 with a warning, 0 rows refused.")
    with open("deep/o/results.csv", encoding="utf-8", newline="") as stream:
        assert [r["sample_id"] for r in csv.DictReader(stream)] == ["a", "b"]


def test_notice_of_a_long_run_goes_to_standard_error(call, table, monkeypatch):
    """Standard output stays the summary."""
    monkeypatch.setattr("aquabuf.report.run.ALL_CHECKS_UP_TO", 1)
    done = call("assess", table(), "--out", "o", "--draws", "100", "--no-figure")
    assert "--draws 0 leaves the intervals out" in done.stderr
    assert done.stdout.startswith("t.csv: 2 samples")


def test_options_reach_the_run(call, table):
    """Each option stands in the record, and in the columns."""
    done = call("assess", table(), "--out", "o", "--exchange", "open", "--air-co2-ppm", "410", "--thresholds", "5.3, 6.0,5.3", "--base-thresholds",
                "10", "--draws", "100", "--seed", "9", "--marine-constants", "lueker", "--no-figure")
    assert done.exit_code == 0, done.stderr
    assert record()["options"] == {"exchange": "open", "air_co2_ppm": 410.0, "draws": 100, "seed": 9, "acid_thresholds": [5.3, 6.0],
                                   "base_thresholds": [10.0], "carbonic": "lueker"}
    header = Path("o/results.csv").read_text(encoding="utf-8").split("\n")[0].split(",")
    tolerance = [c for c in header if c.startswith(("acid_to", "base_to")) and not c.endswith(("_low", "_high"))]
    assert tolerance == ["acid_to_ph_5_3_meq_l", "acid_to_ph_6_0_meq_l", "acid_to_ph_5_3_open_meq_l", "acid_to_ph_6_0_open_meq_l",
                         "base_to_ph_10_0_meq_l", "base_to_ph_10_0_open_meq_l"]


def test_zero_is_a_choice_of_its_own(call, table):
    """--draws 0 and --seed 0 are not the defaults: no intervals, and the seed as given."""
    call("assess", table(), "--out", "o", "--draws", "0", "--seed", "0", "--no-figure")
    assert (record()["options"]["draws"], record()["options"]["seed"]) == (0, 0)
    assert "_low" not in Path("o/results.csv").read_text(encoding="utf-8").split("\n")[0]


def test_defaults_of_the_command_are_those_of_the_options(call, table):
    """No second set of defaults."""
    from dataclasses import asdict

    from aquabuf.assess.options import Options

    call("assess", table(), "--out", "o", "--no-figure")
    assert record()["options"] == json.loads(json.dumps(asdict(Options())))


def test_figure_by_default(call, table):
    """Both formats; not with --no-figure."""
    call("assess", table(), "--out", "with", "--draws", "0")
    call("assess", table(), "--out", "without", *QUICK)
    assert [Path(f, f"samples.{kind}").exists() for f in ("with", "without") for kind in ("png", "svg")] == [True, True, False, False]


def test_map_and_limits(call, table):
    """Someone else's headers and the user's own rules."""
    table("Station;Probe;Alk\nx;7,1;100\n", "theirs.csv")
    table('[columns]\n"Station" = "sample_id"\n"Probe" = "ph"\n"Alk" = "alkalinity (mg/L as CaCO3)"\n[values]\ntemperature_c = 12.0\n', "m.toml")
    table('only_mine = true\n[limits."house rule"]\nquantity = "ph"\noperator = "<"\nlimit = 7.2\nwords = "below our pH"\nsource = "plant manual"\n', "l.toml")
    done = call("assess", "theirs.csv", "--out", "o", "--map", "m.toml", "--limits", "l.toml", *QUICK)
    assert done.exit_code == 0, done.stderr
    assert "1 x house rule: below our pH [ph < 7.2" in " ".join(done.stdout.split())
    assert set(record()["sha256"]) == {"readings", "map", "limits"}


CANNOT = [
    ("missing file", None, (), "cannot be read: no such file or directory"),
    ("empty file", "", (), "t.csv"), ("only blank lines", "\n\n\n", (), "t.csv"), ("only remarks", "# nothing\n", (), "t.csv"),
    ("header only", HEADER, (), "the table has a header but no rows. Add at least one row"),
    ("no sample_id", "temperature_c,ph,alkalinity_meq_l\n10,7,1\n", (), "sample_id"),
    ("unknown header", "sample_id,temperature_c,ph,foo\na,10,7,1\n", (), "foo"),
    ("header without unit", "sample_id,temperature_c,ph,alkalinity\na,10,7,1\n", (), "alkalinity"),
    ("column twice", "sample_id,temperature_c,ph,ph\na,10,7,7\n", (), "ph"),
    ("no map", HEADER + "a,10,7,1\n", ("--map", "none.toml"), "none.toml"),
    ("no limits", HEADER + "a,10,7,1\n", ("--limits", "none.toml"), "the limits file none.toml cannot be read: No such file"),
    ("readings as map", HEADER + "a,10,7,1\n", ("--map", "t.csv"), "t.csv"),
    ("readings as limits", HEADER + "a,10,7,1\n", ("--limits", "t.csv"), "t.csv is not valid TOML"),
    ("no row accepted", HEADER + "a,,7,1\n", (), "no row of t.csv can be assessed; 1 were refused, mostly for temperature_c: every sample needs"),
]


@pytest.mark.parametrize(("content", "words", "message"), [c[1:] for c in CANNOT], ids=[c[0] for c in CANNOT])
def test_what_cannot_be_assessed(call, table, content, words, message):
    """Exit code 1, nothing on standard output, one message on standard error."""
    if content is not None:
        table(content)
    done = call("assess", "t.csv", "--out", "o", *words, *QUICK)
    assert (done.exit_code, done.stdout) == (1, "")
    assert done.stderr.startswith("Error: ")
    assert message in done.stderr
    assert not Path("o/results.csv").exists()


def test_rejected_rows_are_written_even_if_none_is_accepted(call, table):
    """So that the user can see why."""
    call("assess", table(HEADER + "a,,7,1\nb,10,x,1\n"), "--out", "o", *QUICK)
    with open("o/rejected.csv", encoding="utf-8", newline="") as stream:
        lines = [(r["row"], r["sample_id"], r["column"], r["value"]) for r in csv.DictReader(stream)]
    assert lines == [("2", "a", "temperature_c", "missing"), ("3", "b", "ph", "x")]


@pytest.mark.parametrize("option", ["readings", "--map", "--limits", "--out"])
def test_a_folder_where_a_file_should_be_and_the_other_way_round(call, table, option):
    """Named in the message."""
    Path("folder").mkdir()
    name = table()
    words = {"readings": ("folder", "--out", "o"), "--out": (name, "--out", name)}.get(option, (name, "--out", "o", option, "folder"))
    done = call("assess", *words, *QUICK)
    assert (done.exit_code, done.stdout) == (1, "")
    assert ("t.csv" if option == "--out" else "folder") in done.stderr


def test_a_file_that_may_not_be_read(call, table, monkeypatch):
    """As the system says it (raised here by hand: the tests may run as a user who may read anything)."""
    name = table()
    original = Path.open

    def refuse(self, *a, **k):
        if self.name == name:
            raise PermissionError(13, "Permission denied")
        return original(self, *a, **k)

    monkeypatch.setattr(Path, "open", refuse)
    done = call("assess", name, "--out", "o", *QUICK)
    assert done.exit_code == 1
    assert "t.csv cannot be read: permission denied. Check the path and its permissions." in done.stderr


@pytest.mark.skipif(hasattr(os, "geteuid") and os.geteuid() == 0, reason="the superuser may read anything")
def test_a_file_without_permission(call, table):
    """The same with a file that is truly closed."""
    name = table()
    Path(name).chmod(0)
    assert "permission denied" in call("assess", name, "--out", "o", *QUICK).stderr


def test_an_earlier_result_is_kept(call, table):
    """Refused without --force, replaced with it."""
    name = table()
    call("assess", name, "--out", "o", *QUICK)
    before = Path("o/results.csv").read_bytes()
    done = call("assess", name, "--out", "o", "--thresholds", "5", *QUICK)
    assert done.exit_code == 1
    assert "o/results.csv exists already and is not overwritten" in done.stderr
    assert "--force" in done.stderr
    assert Path("o/results.csv").read_bytes() == before
    assert call("assess", name, "--out", "o", "--thresholds", "5", "--force", *QUICK).exit_code == 0
    assert Path("o/results.csv").read_bytes() != before


@pytest.mark.parametrize(("name", "text"), [
    ("--map", '[columns]\n"ph" = "nosuch"\n'), ("--map", "[columns\n"), ("--map", 'speed = 3\n'), ("--limits", "[limits\n"),
    ("--limits", '[limits."x"]\nquantity = "ph"\n'), ("--limits", "speed = 3\n")])
def test_broken_settings(call, table, name, text):
    """The file is named; nothing is written."""
    table(text, "broken.toml")
    done = call("assess", table(), "--out", "o", name, "broken.toml", *QUICK)
    assert (done.exit_code, done.stdout) == (1, "")
    assert "broken.toml" in done.stderr
    assert not Path("o").exists()


def test_a_table_in_another_encoding_and_delimiter(call, table):
    """What spreadsheets write: byte order mark, semicolons, decimal commas, line ends of Windows."""
    text = "sample_id;temperature_c;ph;alkalinity_meq_l\r\na;10,5;7,6;2,0\r\n"
    done = call("assess", table(b"\xef\xbb\xbf" + text.encode()), "--out", "o", *QUICK)
    assert done.exit_code == 0, done.stderr
    with open("o/results.csv", encoding="utf-8", newline="") as stream:
        row = next(csv.DictReader(stream))
    assert (row["temperature_c"], row["ph"], row["alkalinity_meq_l"]) == ("10.5", "7.6", "2.0")
