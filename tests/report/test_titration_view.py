"""Words about one titration: digits that the uncertainty allows, title, findings."""

import sys
from dataclasses import replace
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parent.parent))

from invented_titrations import WATERS, assessed

from aquabuf.assess.titration.findings import finding_facts
from aquabuf.report.titration_view import finding_lines, number, one_titration, title_line


@pytest.fixture(scope="module")
def result(tmp_path_factory):
    """All invented waters, assessed once."""
    return assessed(tmp_path_factory.mktemp("waters"), WATERS)


def of(result, water):
    """Number of a water."""
    return list(result.solved.curves.names).index(water)


@pytest.mark.parametrize(("value", "u", "said"), [
    (48.93, 1.32, "48.9"), (3400.7, 19.2, "3,401"), (-20.87, 1.07, "−20.9"), (2299.84, 0.96, "2,299.84"), (0.0034, 0.0046, "0.0034"),
    (199712.0, 2310.0, "199,700"), (102.0, 102.0, "100"), (2998.6, float("nan"), "2,999"), (48.93, float("nan"), "48.9"),
    (5.0, 0.0, "5.0"), (float("nan"), 1.0, "none")])
def test_number_has_the_digits_of_its_uncertainty(value, u, said):
    """Two digits of the uncertainty set the last one of the value; a true minus; a comma per thousand."""
    assert number(value, u) == said


@pytest.mark.parametrize(("water", "start", "end"), [
    ("Dilute lake", "Dilute lake: ANC ", " µeq/L, Gran line"),
    ("Hard water", "Hard water: alkalinity 3,4", " µeq/L, fit of the whole curve"),
    ("Sea water", "Sea water: alkalinity or ANC 2,", " µmol/kg, fit of the whole curve"),
    ("Swept sea water", "Swept sea water: alkalinity or ANC 2,", " µmol/kg, acid in excess after CO2 was swept out"),
    ("Acid lake", "Acid lake: ANC −", " µeq/L, Gran line"),
    ("Three points", "Three points: no result by any method for dilute", " or acid water"),
    ("Wrong strength", "Wrong strength: no result; the strength of the titrant is in doubt", "in doubt")])
def test_title(result, water, start, end):
    """Sample, what it is, value with uncertainty and unit, method; or that there is none, and why."""
    title = title_line(result, of(result, water))
    assert title.startswith(start)
    assert title.endswith(end)
    assert ("±" in title) == ("no result" not in title)


def test_title_gives_the_recommended_value(result):
    """The figure of the table, as one may read it aloud."""
    i = of(result, "Hard water")
    value, u = result.choice.value[i] * 1e6, result.choice.u[i] * 1e6
    assert f" {value:,.0f} ± {1.645 * u:.0f} µeq/L" in title_line(result, i)
    assert round(value) == round(result.results["recommended_ueq_l"].iloc[result.at[i]])


@pytest.mark.parametrize("water", list(WATERS))
def test_findings_are_named_with_their_remedy(result, water):
    """At most three of the table of findings, in its order, one per line; how many more there are."""
    i = of(result, water)
    table = result.findings[result.findings["sample_id"] == water]
    lines = finding_lines(result, i)
    if table.empty:
        assert lines == ["no findings"]
        return
    assert len(lines) == min(len(table), 3)
    for line, name in zip(lines, table["finding"], strict=False):
        assert line.startswith(name)
        assert finding_facts()[name]["remedy"][:40] in line
        assert len(line) <= 165
    assert lines[-1].endswith(f"(and {len(table) - 3} more)") == (len(table) > 3)


def test_fourth_finding_is_counted(result):
    """One more than there is room for is not left out silently."""
    i = of(result, "Swapped")
    here = 2 * tuple(f for f in result.found if f.here[i])
    for count, end in ((3, ""), (4, "(and 1 more)"), (5, "(and 2 more)")):
        last = finding_lines(replace(result, found=here[:count]), i)[-1]
        assert last.startswith(here[2].name)
        assert last.partition("  (")[1:] == (("  (", end[1:]) if end else ("", ""))


def test_finding_names_its_rows(result):
    """Both of two swapped readings, by their line in the file of points."""
    i = of(result, "Swapped")
    first = int(result.solved.curves.row[i, 20])
    line = next(text for text in finding_lines(result, i) if text.startswith("points swapped"))
    assert line.startswith(f"points swapped (rows {first} and {first + 1}): ")


@pytest.mark.parametrize(("water", "unit", "decimals"), [("Hard water", "mL", 3), ("Sea water", "g", 4)])
def test_volumes_have_the_decimals_of_the_burette(result, water, unit, decimals):
    """A burette read to 0.005 mL, a balance to 0.5 mg."""
    one = one_titration(result, of(result, water))
    assert (one.unit, one.decimals) == (unit, decimals)


def test_what_a_result_rests_on(result):
    """The fit where there is one, else the Gran line, else every reading."""
    assert one_titration(result, of(result, "Hard water")).used_by == "in the fit"
    acid = one_titration(result, of(result, "Acid lake"))
    assert (acid.used_by, int(acid.used.sum())) == ("on the Gran line", int(result.solved.gran.points[of(result, "Acid lake")]))
    few = one_titration(result, of(result, "Three points"))
    assert (few.used_by, few.used.tolist()) == ("read", [True] * 3)
