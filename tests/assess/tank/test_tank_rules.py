"""The table of rules of thumb: complete, and read as it stands."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf.assess.tank.rules import HP_W, at_least_zero, positive, power_w_m3, rule, rules_in, stands, words_for
from aquabuf.errors import InputError
from aquabuf.tables import read_table

ROWS = read_table("tank_rules")
MARKS = {"printed", "recalled", "derived", "practice"}


@pytest.mark.parametrize("row", ROWS, ids=lambda r: f"{r['group']}:{r['key']}")
def test_every_row_says_where_it_comes_from(row):
    """Every row says where it comes from."""
    assert row["mark"] in MARKS
    assert row["source"]
    assert row["words"]
    columns = ("low", "high") if row["unit"] == "tanks" else ("low", "value", "high")  # inlets: range is pH, value tanks
    figures = [float(row[c]) for c in columns if row[c]]
    assert figures == sorted(figures)


def test_no_rule_is_listed_twice():
    """No rule is listed twice."""
    keys = [r["key"] for r in ROWS if r["unit"]]
    assert len(keys) == len(set(keys))


def test_recalled_rules_say_so():
    """Recalled rules say so."""
    assert rule("usual days").told_by.endswith("(recalled)")
    assert "recalled" not in rule("dead time").told_by


def test_a_horsepower_is_550_foot_pounds_a_second():
    """Foot 0.3048 m, pound 0.45359237 kg, standard gravity 9.80665 m/s2 (definitions)."""
    assert_allclose(HP_W, 550 * 0.3048 * 0.45359237 * 9.80665, rtol=1e-12)


@pytest.mark.parametrize(("key", "low", "high"), [
    ("neutralization power", 39.4, 78.8), ("trade power", 40, 80), ("blending power", 39, 98), ("reaction power", 98, 295)])
def test_power_in_metric(key, low, high):
    """Conversions in the facts, rounded to the figures shown there: 200 to 400 hp/Mgal is 39.4 to 78.8 W/m3."""
    assert_allclose(power_w_m3(rule(key)), (low, high), rtol=0.012)


def test_printed_power_to_a_tenth_of_a_percent():
    """Check case 10 of the facts."""
    assert_allclose(power_w_m3(rule("neutralization power")), (39.4, 78.8), rtol=1e-3)


@pytest.mark.parametrize(("value", "kept"), [(0.05, True), (0.05 + 1e-14, True), (0.0501, False), (0.0, True), (np.nan, False)])
def test_a_value_against_a_rule(value, kept):
    """A value against a rule."""
    found = stands("dead time", "dead time over residence time", value)
    assert found.kept is kept
    assert ("keeps" if kept else "breaks") in found.words
    assert found.source in found.words


def test_ranges_in_words():
    """Ranges in words."""
    assert rule("dead time").range_words == "at most 0.05"
    assert rule("usual turnover").range_words == "1.5 to 2 1/min"
    assert rule("valve", "device").range_words == "at least 50"
    assert rule("mild turnover").range_words == "1 1/min"
    assert rule("two ranges").range_words == ""


def test_rules_in_words_by_product():
    """Rules in words by product."""
    keys = [r.key for r in words_for("materials", ["caustic potash"])]
    assert keys == ["caustic soda;caustic potash", "any"]


def test_refusals():
    """Each message tells the rule, the value and the remedy."""
    with pytest.raises(InputError, match="a tank rule must be named by one row of the table; found 0 named 'none'"):
        rule("none")
    with pytest.raises(InputError, match=r"found 2 named 'strong acid'|found 3 named 'any'"):
        rule("any", "cautions")
    with pytest.raises(InputError, match=r"size must be above 0; found 0\. Look"):
        positive(0.0, "size", "Look.")
    with pytest.raises(InputError, match=r"size must be 0 or more; found -1\. Look"):
        at_least_zero(-1.0, "size", "Look.")
    with pytest.raises(InputError, match="size must be 0 or more; found inf"):
        at_least_zero(np.inf, "size", "Look.")


def test_groups_keep_the_order_of_the_table():
    """Groups keep the order of the table."""
    assert [r.key for r in rules_in("inlets")] == ["one tank", "two tanks", "three tanks"]
