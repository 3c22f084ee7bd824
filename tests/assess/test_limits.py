"""Limits: each shipped one at its boundary, bands, kinds and regimes, and the user's own file with its messages."""

import operator

import numpy as np
import pytest
from sample_tables import assessed, results

from aquabuf.assess.limits import Limit, shipped_limits, verdicts
from aquabuf.assess.limits_file import read_limits
from aquabuf.assess.options import Options
from aquabuf.assess.sample.columns import limit_quantities
from aquabuf.errors import FileError, InputError
from aquabuf.readings.schema import quantities
from aquabuf.tables import read_table

SHIPPED = {limit.name: limit for limit in shipped_limits()}
QUANTITIES = limit_quantities(Options())
NATURAL, PLANT = ("lake", "stream", "estuary", ""), ("raw_water", "groundwater")
EVERY_KIND = ("", "lake", "stream", "raw_water", "treated_water", "estuary", "sea", "wastewater", "groundwater")
UP, DOWN = np.inf, -np.inf

# name: quantity, boundary, direction of the warned side, whether the boundary is warned, kinds, regimes.
# Driscoll et al. 2003 (0 and 50 µeq/L) and the EPA survey band (200 µeq/L, recalled) are published; the rest is practice.
EXPECTED = {
    "acidic": ("alkalinity_meq_l", 0.0, DOWN, True, NATURAL, "fresh"),
    "below pH 6": ("ph", 6.0, DOWN, False, NATURAL, "fresh"),
    "may turn acid": ("alkalinity_meq_l", 0.05, DOWN, False, NATURAL, "fresh"),
    "sensitive to acid": ("alkalinity_meq_l", 0.2, DOWN, False, NATURAL, "fresh"),
    "little for coagulants": ("alkalinity_mg_l_caco3", 30.0, DOWN, False, PLANT, "fresh"),
    "soft for the mains": ("alkalinity_mg_l_caco3", 40.0, DOWN, False, ("treated_water",), "fresh"),
    "short for nitrification": ("alkalinity_mg_l_caco3", 50.0, DOWN, False, ("wastewater",), "fresh"),
    "weak for salt water": ("buffer_closed_meq_l_ph", 0.2, DOWN, False, EVERY_KIND, "brackish marine"),
    "pH moves easily": ("ph_drop_test_acid", 1.0, UP, False, (*NATURAL, *PLANT, "wastewater"), "fresh"),
    "pH moves in the mains": ("ph_drop_test_acid", 0.3, UP, False, ("treated_water",), "fresh"),
    "pair nearly used up": ("carrier_acid_left_meq_l", 0.05, DOWN, False, EVERY_KIND, "fresh"),
    "little acid to pH 6": ("acid_to_ph_6_0_meq_l", 0.05, DOWN, False, NATURAL, "fresh"),
    "little acid for the plant": ("acid_to_ph_6_0_meq_l", 0.2, DOWN, False, PLANT, "fresh"),
}


def warned(limits, figures, kind="", regime="fresh"):
    """Names of the limits that warn about one sample."""
    found = verdicts(tuple(limits), {k: np.array([v]) for k, v in figures.items()}, np.array([kind]), np.array([regime]))
    return [name for name, hit in found.items() if hit[0]]


def test_every_shipped_limit_is_expected_here():
    """A new limit needs a row above."""
    assert list(EXPECTED) == list(SHIPPED)


@pytest.mark.parametrize("name", EXPECTED)
def test_limit_just_beyond_and_at_its_boundary(name):
    """Warned a millionth beyond, not a millionth before; the boundary itself, within rounding, as its operator says."""
    quantity, boundary, side, at, kinds, regimes = EXPECTED[name]
    limit, kind, regime = SHIPPED[name], kinds[0], regimes.split()[0]
    step, rounding = np.copysign(1e-6, side), 1e-12 * boundary
    for value, expected in ((boundary + step, True), (boundary - step, False), (boundary, at), (boundary + rounding, at),
                            (boundary - rounding, at), (np.nan, False)):
        assert (warned([limit], {quantity: value}, kind, regime) == [name]) == expected, value


@pytest.mark.parametrize("name", EXPECTED)
def test_limit_is_for_its_kinds_and_regimes_only(name):
    """Any other kind of water or regime is never warned."""
    quantity, boundary, side, _, kinds, regimes = EXPECTED[name]
    beyond = {quantity: boundary + np.copysign(0.01, side)}  # above the floors of zero
    for kind in EVERY_KIND:
        for regime in ("fresh", "brackish", "marine"):
            expected = kind in kinds and regime in regimes.split()
            assert (warned([SHIPPED[name]], beyond, kind, regime) == [name]) == expected, (kind, regime)


@pytest.mark.parametrize("name", SHIPPED)
def test_limit_tells_words_source_and_next_step(name):
    """A verdict shows its rule: words, source and what to do; the quantity is a result in the same unit."""
    limit = SHIPPED[name]
    assert len(limit.words) > 10
    assert len(limit.source) > 10
    assert len(limit.next_step) > 10
    assert QUANTITIES[limit.quantity] == limit.unit
    unit = "" if limit.unit == "-" else f" {limit.unit}"
    assert limit.rule().startswith(f"{limit.quantity} {limit.operator} {limit.limit:g}{unit}")


def test_limits_name_kinds_that_readings_can_state():
    """A misspelled kind would never warn."""
    allowed = {word for _, word in quantities()["water_kind"].choices} | {"any", "unstated"}
    assert {kind for limit in SHIPPED.values() for kind in limit.kinds} - allowed == set()
    assert {r for limit in SHIPPED.values() for r in limit.regimes} - {"any", "fresh", "brackish", "marine"} == set()


def test_recalled_sources_say_so():
    """A limit from memory is marked in every verdict."""
    recalled = {row["name"] for row in read_table("limits") if row["mark"] == "recalled"}
    assert recalled == {name for name, limit in SHIPPED.items() if limit.source.endswith("(recalled)")}
    assert "sensitive to acid" in recalled


@pytest.mark.parametrize("name", ["pair nearly used up", "little acid to pH 6"])
def test_floor_of_a_limit(name):
    """What is used up already (below zero) is not nearly used up; zero itself is."""
    limit = SHIPPED[name]
    assert [warned([limit], {limit.quantity: v}) != [] for v in (-1e-9, 0.0, 0.049)] == [False, True, True]
    assert limit.rule() == f"{limit.quantity} < 0.05 meq/L (and at least 0)"


def test_floors_are_the_shipped_ones():
    """No other limit has one."""
    assert {name for name, x in SHIPPED.items() if x.lower > -np.inf} == {"pair nearly used up", "little acid to pH 6"}


@pytest.mark.parametrize(("alkalinity", "band"), [
    (-0.01, "acidic"), (0.0, "acidic"), (0.0001, "may turn acid"), (0.0499, "may turn acid"), (0.05, "sensitive to acid"),
    (0.1999, "sensitive to acid"), (0.2, None)])
def test_of_a_group_only_the_first_met_counts(alkalinity, band):
    """Bands are listed worst first: a sample is in one of them."""
    found = warned([x for x in SHIPPED.values() if x.group == "band"], {"alkalinity_meq_l": alkalinity})
    assert found == ([band] if band else [])


def test_groups_do_not_see_each_other():
    """The band does not hide the tolerance."""
    assert warned(SHIPPED.values(), {"alkalinity_meq_l": 0.04, "acid_to_ph_6_0_meq_l": 0.03}) == ["may turn acid", "little acid to pH 6"]


def test_a_limit_without_its_figure_is_silent():
    """Figures that were not computed warn about nothing."""
    assert warned([SHIPPED["acidic"]], {"ph": 4.0}) == []


def test_samples_warn_end_to_end():
    """Alkalinity of 0, 0.03, 0.1 and 0.5 meq/L with carbon: the bands, and words joined by semicolons in limit order."""
    water = {"temperature_c": 10.0, "ph": 6.6}
    table = results(*(water | {"sample_id": f"{a}", "alkalinity_eq_l": a * 1e-3} for a in (0.03, 0.1, 0.5)))
    assert table["warnings"].tolist() == [
        "may turn acid; pH moves easily; pair nearly used up; little acid to pH 6" if a == 0.03 else words
        for a, words in ((0.03, ""), (0.1, table.loc["0.1", "warnings"]), (0.5, ""))]
    assert table.loc["0.1", "warnings"].startswith("sensitive to acid")


def test_verdict_shows_its_rule():
    """One line per broken limit with quantity, value, operator, limit, unit, next step and source."""
    found = assessed({"temperature_c": 10.0, "ph": 6.6, "alkalinity_eq_l": 3e-5}, draws=100)
    line = found.verdicts.set_index("warning").loc["may turn acid"]
    assert (line["quantity"], line["operator"], line["limit"], line["unit"]) == ("alkalinity_meq_l", "<", 0.05, "meq/L")
    assert line["value"] == pytest.approx(0.03)
    assert line["low"] < line["value"] < line["high"]
    assert 0.5 < line["probability"] <= 1.0
    assert line["source"].startswith("Driscoll et al. 2003")
    assert line["next_step"] == "sample through a melt or a storm"


def test_no_limits_at_all():
    """An empty list of limits warns about nothing and keeps its columns."""
    found = assessed({"temperature_c": 10.0, "ph": 6.6, "alkalinity_eq_l": 3e-5}, limits=())
    assert found.results["warnings"].tolist() == [""]
    assert len(found.verdicts) == 0
    assert "probability" in found.verdicts.columns


# ------------------------------------------------------------------ the user's own file


EVERY_FIGURE = {"ph_total": 8.0, "alkalinity_eq_l": 2e-3, "temperature_c": 15.0, "salinity": 20.0, "calcium_mol_l": 5e-3, "depth_m": 3.0}


@pytest.mark.parametrize("quantity", QUANTITIES)
def test_every_quantity_that_a_limit_may_name_is_judged(quantity):
    """A limit that is accepted and then never looked at would be a silent hole: one that all numbers meet warns."""
    limit = Limit(name="x", group="x", quantity=quantity, operator=">", limit=-1e9, lower=-np.inf, unit="", kinds=("any",),
                  regimes=("any",), words="", next_step="", source="")
    found = assessed(EVERY_FIGURE, limits=(limit,), draws=100)
    assert np.isfinite(found.results[quantity][0])
    assert found.results["warnings"].tolist() == ["x"]

OWN = '[limits."{name}"]\nquantity = "alkalinity_meq_l"\noperator = "<"\nlimit = 0.3\nwords = "below our own limit"\nsource = "permit 12"\n'


@pytest.fixture
def limits_of(tmp_path):
    """Limits read from the text of a file."""
    def read(text):
        path = tmp_path / "own.toml"
        path.write_text(text, encoding="utf-8")
        return read_limits(path, QUANTITIES)
    return read


def test_no_file_gives_the_shipped_limits():
    """The default."""
    assert read_limits(None, QUANTITIES) == shipped_limits()


def test_own_limit_is_added_and_leads_its_group(limits_of):
    """New limits come first, with defaults for what was left out."""
    found = limits_of(OWN.format(name="permit") + 'group = "band"\n')
    assert [x.name for x in found] == ["permit", *SHIPPED]
    assert (found[0].kinds, found[0].regimes, found[0].unit, found[0].lower, found[0].next_step) == (("any",), ("any",), "meq/L", -np.inf, "")
    assert warned(found, {"alkalinity_meq_l": 0.1}) == ["permit"]


def test_own_limit_is_a_group_of_its_own(limits_of):
    """Unless it names a group it stands beside the shipped ones."""
    found = limits_of(OWN.format(name="permit"))
    assert warned(found, {"alkalinity_meq_l": 0.1}) == ["permit", "sensitive to acid"]


def test_own_limit_replaces_the_shipped_one_in_place(limits_of):
    """Same name, same place, the user's rule."""
    found = limits_of(OWN.format(name="sensitive to acid") + 'kinds = ["lake"]\nregimes = ["fresh"]\nlower = 0.1\nnext_step = "ask"\n')
    assert [x.name for x in found] == list(SHIPPED)
    mine = next(x for x in found if x.name == "sensitive to acid")
    assert (mine.limit, mine.lower, mine.kinds, mine.regimes, mine.next_step, mine.source) == (0.3, 0.1, ("lake",), ("fresh",), "ask", "permit 12")


def test_limits_can_be_removed(limits_of):
    """By name; the others stay in order."""
    assert [x.name for x in limits_of('remove = ["acidic", "may turn acid"]')] == [n for n in SHIPPED if n not in ("acidic", "may turn acid")]


def test_only_mine(limits_of):
    """All shipped ones go."""
    assert [x.name for x in limits_of("only_mine = true\n" + OWN.format(name="permit"))] == ["permit"]
    assert [x.name for x in limits_of("only_mine = false\n")] == list(SHIPPED)


def entry(**changes):
    """Text of one own limit with some keys changed; None leaves a key out."""
    keys = {"quantity": '"ph"', "operator": '"<"', "limit": "6", "words": '"w"', "source": '"s"'} | changes
    return '[limits."x"]\n' + "\n".join(f"{k} = {v}" for k, v in keys.items() if v is not None)


MESSAGES = [
    ("limit = 3", r"own.toml: keys must be limits, remove or only_mine; found 'limit'. Put each limit under \[limits"),
    ('remove = ["nitrate"]', r"remove names a limit that is not there: 'nitrate'; there are acidic, .*Correct the name"),
    ('only_mine = true\nremove = ["acidic"]', r"not there: 'acidic'; there are none"),
    ("[limits", r"own.toml is not valid TOML: .*Correct that line"),
    ("[limits]\nx = 3", r"limit 'x' must be a table; found 3. Write \[limits.\"x\"\]"),
    (entry(colour='"red"'), r"limit 'x' has an unknown key 'colour'; keys are group, kinds, .*Correct it"),
    *((entry(**{k: None}), rf"limit 'x' must have {k}; it is missing. Add it") for k in ("quantity", "operator", "limit", "words", "source")),
    (entry(quantity='"alk"'), r"quantity must be a figure of results.csv; found 'alk'. Choose from .*ph, "),
    (entry(quantity='"carrier"'), r"quantity must be a figure of results.csv; found 'carrier'"),
    (entry(operator='"=="'), r"operator must be one of <, <=, >, >=; found '=='"),
    (entry(quantity='"alkalinity_meq_l"', unit='"mg/L"'), r"alkalinity_meq_l is in meq/L; found unit 'mg/L'. Convert the limit"),
    (entry(limit='"6"'), r"limit must be a number; found '6'. Write it without quotes"),
    (entry(limit="true"), r"limit must be a number; found True"),
    (entry(lower='"low"'), r"lower must be a number; found 'low'"),
    (entry(kinds='"lake"'), r"kinds must be a list of words; found 'lake'. Write kinds = \[\"any\"\]"),
    (entry(regimes="[1]"), r"regimes must be a list of words; found \[1\]"),
]


@pytest.mark.parametrize(("text", "message"), MESSAGES, ids=[f"{i}" for i in range(len(MESSAGES))])
def test_limits_file_messages(limits_of, text, message):
    """Each mistake in a limits file names file, key, value and remedy."""
    with pytest.raises(InputError, match=message):
        limits_of(text)


WRONG_TYPES = [
    "remove = 5", 'remove = "acidic"', "limits = 5", 'only_mine = "no"', entry(quantity='["ph"]'), entry(operator='["<"]'),
    entry(words="7"), entry(source="7"), entry(next_step="7"), entry(group="[1]"), entry(limit="nan"), entry(kinds='["laek"]'),
    entry(regimes='["frsh"]')]


@pytest.mark.parametrize("text", WRONG_TYPES)
def test_limits_file_values_of_the_wrong_type(limits_of, text):
    """A value of the wrong type, a number that is none, a kind or regime that does not exist: a message that names it."""
    with pytest.raises(InputError, match=r"own\.toml") as error:
        limits_of(text)
    assert "'a'; there are" not in str(error.value)  # a word taken letter by letter


def test_limits_file_that_is_not_there(tmp_path):
    """File errors say what and why."""
    with pytest.raises(FileError, match=r"the limits file none.toml cannot be read: No such file or directory. Check the path"):
        read_limits(tmp_path / "none.toml", QUANTITIES)
    with pytest.raises(FileError, match=r"cannot be read: Is a directory"):
        read_limits(tmp_path, QUANTITIES)
    (tmp_path / "latin.toml").write_bytes("# µ".encode("latin-1"))
    with pytest.raises(FileError, match=r"latin.toml cannot be read: not UTF-8 text"):
        read_limits(tmp_path / "latin.toml", QUANTITIES)


@pytest.mark.parametrize(("sign", "compare"), [("<", operator.lt), ("<=", operator.le), (">", operator.gt), (">=", operator.ge)])
def test_operators_mean_what_they_say(sign, compare):
    """Around the limit, each sign as in arithmetic."""
    limit = Limit(name="x", group="x", quantity="ph", operator=sign, limit=7.0, lower=-np.inf, unit="-", kinds=("any",),
                  regimes=("any",), words="", next_step="", source="")
    assert limit.met(np.array([6.9, 7.0, 7.1])).tolist() == [compare(v, 7.0) for v in (6.9, 7.0, 7.1)]
