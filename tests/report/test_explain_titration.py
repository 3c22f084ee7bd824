"""A titration of a run explained: its numbers are those of alkalinity.csv, and what the interval comes from adds up."""

import csv
from pathlib import Path

import numpy as np
import pytest
from titration_tables import FACTS, HARD, HEADER, POINTS, SAMPLES, SOFT, facts

from aquabuf.assess.titration.chain_results import column_label
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.assess.titration.tables import column_facts
from aquabuf.errors import FileError, InputError
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.report.explain import WIDTH, chain_text
from aquabuf.report.explain_run import chains_of_run, explain
from aquabuf.report.titration_run import titrate_file

DATA = Path(__file__).parents[2] / "field_data"
TO_90_PERCENT = 1.645  # of a normal distribution
RIVER = TitrationFiles(DATA / "titration_points.csv", DATA / "titration_samples.csv")
SEA = TitrationFiles(DATA / "sea_titration_points.csv", DATA / "sea_titration_samples.csv")


def written(folder, name="alkalinity.csv"):
    """Rows of a table of the run."""
    with (folder / name).open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def part_of(chain, title):
    """Steps of one part, by label."""
    return {step.label: step for part in chain.parts if part.title == title for step in part.steps}


def assert_same_numbers(chain, row, options):
    """Every number of the line stands in the chain, with as many decimals as its column has, and its uncertainty."""
    steps, count = {}, 0
    for step in chain.steps():
        steps.setdefault(step.label, []).append(step)
    keys = {key: (name, fact) for name, key, fact in column_facts(options) if row.get(name)}
    for key, (name, fact) in keys.items():
        if not fact["digits"]:
            continue
        text = f"{float(row[name]):.{fact['digits']}f}"
        if "_u_" in key:
            owner = key.replace("_u_", "_")
            label, wanted = column_label(owner, keys[owner][1])[0], f"standard uncertainty {text}"
            assert any(wanted in step.words for step in steps[label]), name
        else:
            label = column_label(key, fact)[0]
            assert any(step.value.split(" ")[0] == text for step in steps[label]), name
        count += 1
    assert count > 8


@pytest.mark.parametrize(("files", "options"), [
    (RIVER, {}), (RIVER, {"conversion": "henriksen_1982", "weak_acid": True, "end_points": (8.3, 5.0)}), (SEA, {}),
    (RIVER, {"conversion": "charge_balance"}),
], ids=["river", "converted", "sea", "charge"])
def test_every_demo_titration_has_the_numbers_of_its_results(tmp_path, files, options):
    """All titrations of the demo files, those without a result and those refused too."""
    chosen = TitrationOptions(**options)
    titrate_file(files, tmp_path / "out", chosen, figures=0)
    rows = written(tmp_path / "out")
    assert len(rows) > 2
    for row in rows:
        chain, = chains_of_run(tmp_path / "out", row["sample_id"], given=files.points)
        assert (chain.sample_id, str(chain.row), chain.refused) == (row["sample_id"], row["row"], row["status"] == "refused")
        if not chain.refused:
            assert_same_numbers(chain, row, chosen)
        assert all(len(line) <= WIDTH for line in chain_text(chain).splitlines())


def test_findings_and_refusals_are_those_of_their_tables(tmp_path):
    """Each finding with its limit, remedy and source; each refusal with rule and remedy."""
    titrate_file(RIVER, tmp_path / "out", TitrationOptions(), figures=0)
    found, refused = written(tmp_path / "out", "findings.csv"), written(tmp_path / "out", "rejected.csv")
    assert len(found) > 5
    assert len(refused) > 4
    for row in found:
        step = part_of(*chains_of_run(tmp_path / "out", row["sample_id"], given=RIVER.points), "Findings")[row["finding"]]
        assert step.source == row["source"]
        assert f"to do: {row['remedy']}" in step.words
        assert row["limit"] in step.words
        assert not row["value"] or float(step.value) == pytest.approx(float(row["value"]), rel=1e-5)
    for row in refused:
        text = " ".join(explain(tmp_path / "out", row["sample_id"], given=RIVER.points).split())
        assert f"row {row['row']}: {row['rule']}; to do: {row['remedy']}" in text


def test_the_parts_of_the_interval_add_up(tmp_path):
    """Squares of the parts make the square of the standard uncertainty; smaller ones than half a percent are not told."""
    for files in (RIVER, SEA):
        titrate_file(files, tmp_path / files.points.stem, TitrationOptions(), figures=0)
        for row in written(tmp_path / files.points.stem):
            u = row.get("recommended_u_ueq_l") or row.get("recommended_u_umol_kg")
            if not u:
                continue
            chain, = chains_of_run(tmp_path / files.points.stem, row["sample_id"], given=files.points)
            parts = part_of(chain, "What the interval comes from").values()
            sizes = [float(step.words.split()[2]) for step in parts]
            assert np.sqrt(np.sum(np.square(sizes))) == pytest.approx(float(u), rel=0.03), row["sample_id"]
            if not any("potential" in step.value for step in part_of(chain, "Readings as entered").values()):
                assert not any("electrode" in step.label for step in parts), row["sample_id"]
            assert sum(float(step.value.split()[0]) for step in parts) == pytest.approx(100.0, abs=4.0)


def test_the_strength_in_the_interval(table, tmp_path):
    """A strength known to 5 % only gives 5 % of the result, beside which all else is small: by hand."""
    points = table(f"{HEADER}\n{HARD}", "points.csv")
    samples = table(f"{FACTS},titrant_strength_u_eq_l\n{facts('hard', strength='0.05').strip()},0.0025\n", "samples.csv")
    titrate_file(TitrationFiles(points, samples), tmp_path / "out", TitrationOptions(), figures=0)
    row, = written(tmp_path / "out")
    parts = part_of(*chains_of_run(tmp_path / "out", "hard"), "What the interval comes from")
    first = next(iter(parts.values()))
    assert first.label == "strength of the titrant"
    assert float(first.words.split()[2]) == pytest.approx(0.05 * float(row["recommended_ueq_l"]), rel=0.02)
    assert float(first.value.split()[0]) > 95.0


def test_readings_stand_as_entered(table, tmp_path):
    """The text of the cells, with the row each one stands in, and the recommended method marked."""
    points = table(f"{HEADER}\n{SOFT}".replace(",ph", ",pH"), "points.csv")
    samples = table(f"{FACTS}\n{facts('soft', filtered='no', conductivity='15')}", "samples.csv")
    titrate_file(TitrationFiles(points, samples), tmp_path / "out", TitrationOptions(), figures=0)
    chain, = chains_of_run(tmp_path / "out", "soft")
    lines = points.read_text(encoding="utf-8").splitlines()
    entered = part_of(chain, "Readings as entered")
    assert len(entered) == len(lines) - 1
    for number, line in enumerate(lines[1:], start=2):
        _, added, read = line.split(",")
        assert entered[f"row {number}"].value == f"{added} mL: pH {read}"
    sample = part_of(chain, "Sample and titrant as entered")
    assert (sample["sample volume"].value, sample["sample volume"].unit) == ("100", "mL")
    row, = written(tmp_path / "out")
    used = [label for label, step in part_of(chain, "Method").items() if step.sign == "used"]
    assert (row["recommended_method"], used) == ("gran", ["Gran line"])
    on_line = [step for step in entered.values() if "on the Gran line" in step.words]
    assert len(on_line) == int(row["gran_points"])
    assert on_line[0].value.endswith(f"pH {float(row['gran_ph_first']):.3f}")
    value, u = float(row["recommended_ueq_l"]), float(row["recommended_u_ueq_l"])
    low, high = (float(x) for x in chain.verdict.split("interval ")[1].split(")")[0].split(" to "))
    assert (low, high) == pytest.approx((value - TO_90_PERCENT * u, value + TO_90_PERCENT * u), abs=0.02)


def test_names_rows_and_files(table, tmp_path):
    """Near names for one that is not known; a row of another name; changed points; a changed result."""
    points = table(f"{POINTS}", "points.csv")
    samples = table(SAMPLES, "samples.csv")
    titrate_file(TitrationFiles(points, samples), tmp_path / "out", TitrationOptions(), figures=0)
    with pytest.raises(InputError, match=r"no row of points\.csv has the sample_id 'sofd'\. The nearest names are 'soft'"):
        explain(tmp_path / "out", "sofd")
    with pytest.raises(InputError, match=r"'soft' stands in row 2 of points\.csv; found row 9\."):
        explain(tmp_path / "out", "soft", row=9)
    assert explain(tmp_path / "out", "soft", row=2) == explain(tmp_path / "out", "soft")
    assert explain(tmp_path / "out", "broken").startswith("broken (points.csv, row 52): refused")
    results = tmp_path / "out" / "alkalinity.csv"
    text = results.read_text(encoding="utf-8")
    results.write_text(text.replace(",acid,", ",base,", 1), encoding="utf-8")
    with pytest.raises(FileError, match=r"alkalinity\.csv in out has titrated_with = 'base' for 'soft'; worked out again it is 'acid'\."):
        explain(tmp_path / "out", "soft")
    points.write_text(f"{HEADER}\n{HARD}", encoding="utf-8")
    with pytest.raises(FileError, match=r"points\.csv, the points of this run, has changed since: .*\(--input names the readings\)"):
        explain(tmp_path / "out", "soft")


def test_a_sample_without_points(table, tmp_path):
    """It is in the file of samples alone: the reason stands with its row."""
    titrate_file(TitrationFiles(table(f"{HEADER}\n{SOFT}", "points.csv"), table(f"{FACTS}\n{facts('soft')}{facts('lost')}", "samples.csv")),
                 tmp_path / "out", TitrationOptions(), figures=0)
    text = " ".join(explain(tmp_path / "out", "lost").split())
    assert "samples.csv, row 3: no points of this sample are in points.csv" in text
