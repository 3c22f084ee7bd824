"""Schemes: the shipped table, what a scheme must be, and the user's own file with its messages."""

import math
from dataclasses import replace
from pathlib import Path

import pytest

import aquabuf
from aquabuf.assess.lake.schemes import (
    QUANTITIES,
    Scheme,
    SensitivityClass,
    find_scheme,
    read_scheme,
    shipped_schemes,
)
from aquabuf.errors import FileError, InputError
from aquabuf.tables import read_table

SHIPPED = shipped_schemes()
STARTER = Path(aquabuf.__file__).parent / "data" / "starter_scheme.toml"

# Which quantity each scheme was made for. Printed: alkalinity and pH of the Swedish tables, ANC less a third of organic
# acids of the trout limits. US surveys titrated by Gran. Charge balance elsewhere, as critical loads use it (our reading).
MADE_FOR = {
    "survey_bands": "anc_gran", "aquatic_status": "anc_gran", "sweden_alkalinity": "alkalinity", "sweden_ph": "ph",
    "norway_20": "anc_charge", "uk_0": "anc_charge", "scotland_39": "anc_charge", "trout_1995": "anc_charge",
    "trout_1986_organic": "anc_organic_corrected", "trout_1995_organic": "anc_organic_corrected"}


def one_class(name="worst", upper=1e-5, **changes):
    """A class to build schemes of."""
    keys = {"upper_belongs": True, "at_risk": True, "words": "w", "next_step": "n", "mark": "own", "source": "s"}
    return SensitivityClass(name=name, upper=upper, **(keys | changes))


def a_scheme(*classes, **changes):
    """A scheme of those classes and a best one."""
    keys = {"name": "own", "quantity": "anc_gran", "stand_ins": (), "words": "", "mark": "own", "source": "s"}
    return Scheme(classes=(*classes, one_class("best", math.inf, at_risk=False)), **(keys | changes))


# ------------------------------------------------------------------ the shipped table


def test_every_shipped_scheme_is_expected_here():
    """A new scheme needs its quantity above."""
    assert {name: scheme.quantity for name, scheme in SHIPPED.items()} == MADE_FOR


@pytest.mark.parametrize("row", read_table("lake_schemes"), ids=lambda r: f"{r['scheme']} {r['name']}")
def test_cells_of_the_table(row):
    """Each row says how it is known and from where; yes and no are spelled so; only the best class has no limit."""
    assert row["mark"] in {"printed", "recalled", "derived", "practice"}
    assert len(row["source"]) > 20
    assert len(row["words"]) > 8
    if row["kind"] == "scheme":
        assert {row[k] for k in ("name", "upper", "upper_belongs", "at_risk", "next_step")} == {""}
        assert row["unit"] in ({"-"} if row["quantity"] == "ph" else {"µeq/L", "meq/L"})
    else:
        assert row["kind"] == "class"
        assert {row[k] for k in ("quantity", "unit", "stand_ins")} == {""}
        assert row["at_risk"] in {"yes", "no"}
        assert row["upper_belongs"] in ({"yes", "no"} if row["upper"] else {""})
        assert len(row["next_step"]) > 10


def test_recalled_sources_say_so():
    """What is known from memory is marked wherever its source is shown."""
    recalled = {(r["scheme"], r["name"]) for r in read_table("lake_schemes") if r["mark"] == "recalled"}
    assert recalled == {(s.name, part.name if part is not s else "") for s in SHIPPED.values() for part in (s, *s.classes)
                        if part.source.endswith("(recalled)")}
    assert ("survey_bands", "sensitive") in recalled


@pytest.mark.parametrize("scheme", SHIPPED.values(), ids=lambda s: s.name)
def test_what_may_stand_in(scheme):
    """Nothing stands in for pH or for an ANC corrected for organic acids; elsewhere titrations go before ions."""
    alone = scheme.quantity in ("ph", "anc_organic_corrected")
    of_ions = [] if scheme.quantity == "anc_charge" else ["anc_gran_of_ions", "anc_charge"]
    others = [name for name in ("anc_gran", "alkalinity", *of_ions) if name != scheme.quantity]
    assert list(scheme.stand_ins) == ([] if alone else others)


@pytest.mark.parametrize(("name", "limits"), [
    ("survey_bands", [0, 50e-6, 200e-6]), ("aquatic_status", [0, 20e-6, 50e-6, 100e-6]),
    ("sweden_alkalinity", [0.02e-3, 0.05e-3, 0.10e-3, 0.20e-3]), ("sweden_ph", [5.6, 6.2, 6.5, 6.8]),
    ("norway_20", [20e-6]), ("uk_0", [0]), ("scotland_39", [39e-6]), ("trout_1995", [67e-6]),
    ("trout_1986_organic", [8e-6]), ("trout_1995_organic", [48e-6])])
def test_limits_are_in_house_units(name, limits):
    """The published limits in eq/L; sources in the table, rows of tests/published/lake_classes.csv."""
    assert [c.upper for c in SHIPPED[name].classes] == pytest.approx([*limits, math.inf], rel=1e-12, abs=0)


@pytest.mark.parametrize(("name", "at_risk"), [
    # by our reading: up to 50 µeq/L (0.05 meq/L, the Swedish limit of liming support; pH 6.2 in the table beside it)
    ("survey_bands", 2), ("aquatic_status", 3), ("sweden_alkalinity", 2), ("sweden_ph", 2), ("norway_20", 1), ("uk_0", 1),
    ("scotland_39", 1), ("trout_1995", 1), ("trout_1986_organic", 1), ("trout_1995_organic", 1)])
def test_classes_at_risk(name, at_risk):
    """The worst so many classes of each scheme are at risk."""
    assert [c.at_risk for c in SHIPPED[name].classes] == [k < at_risk for k in range(len(SHIPPED[name].classes))]


@pytest.mark.parametrize(("name", "index", "definition", "rule"), [
    ("survey_bands", 0, "", "Gran ANC <= 0 µeq/L"), ("survey_bands", 1, "", "Gran ANC > 0 and <= 50 µeq/L"),
    ("survey_bands", 3, "alkalinity", "alkalinity > 200 µeq/L"), ("aquatic_status", 1, "", "Gran ANC >= 0 and <= 20 µeq/L"),
    ("norway_20", 0, "", "charge balance < 20 µeq/L"), ("norway_20", 1, "anc_gran", "Gran ANC >= 20 µeq/L"),
    ("sweden_alkalinity", 1, "", "alkalinity > 20 and <= 50 µeq/L"), ("sweden_ph", 2, "", "pH > 6.2 and <= 6.5")])
def test_rule_in_one_line(name, index, definition, rule):
    """Quantity, signs, limits and unit of results; what stands in is named in the rule."""
    assert SHIPPED[name].rule(index, definition) == rule


def test_shipped_schemes_cannot_be_spoiled():
    """Who changes the dictionary changes their own copy."""
    mine = shipped_schemes()
    mine.clear()
    assert list(shipped_schemes()) == list(MADE_FOR)


# ------------------------------------------------------------------ what a scheme must be


WORST, NEXT = one_class(), one_class("next", 2e-5)
REFUSED = [
    (lambda: one_class(words=" "), r"class 'worst': words must be text; it is empty. Write it"),
    (lambda: one_class(name=""), r"class '': name must be text; it is empty"),
    (lambda: one_class(next_step=""), r"class 'worst': next_step must be text; it is empty"),
    (lambda: one_class(source=""), r"class 'worst': source must be text; it is empty"),
    (lambda: one_class(upper=math.nan), r"class 'worst': upper must be a number; found nan. Give the limit"),
    (lambda: a_scheme(), r"scheme 'own': classes must be two or more; found 1. Add the missing class"),
    (lambda: a_scheme(WORST, name=" "), r"name must be text that does not end in .toml; found ' '. Rename it"),
    (lambda: a_scheme(WORST, name="a.TOML"), r"name must be text that does not end in .toml; found 'a.TOML'"),
    (lambda: a_scheme(WORST, source=""), r"scheme 'own': source must be text; found none. Say where the limits come from"),
    (lambda: a_scheme(WORST, quantity="anc"), r"must be from anc_gran, .*, ph; found 'anc'. Correct it"),
    (lambda: a_scheme(WORST, stand_ins=("gran",)), r"quantity and stand_ins must be from anc_gran, .*; found 'gran'"),
    (lambda: a_scheme(WORST, stand_ins=("anc_gran",)), r"stand_ins must differ from the quantity and each other; found 'anc_gran'"),
    (lambda: a_scheme(WORST, stand_ins=("alkalinity",) * 2), r"stand_ins must differ .*; found 'alkalinity'. Drop it"),
    (lambda: a_scheme(WORST, stand_ins=("ph",)), r"stand_ins must be in the unit of anc_gran; found 'ph'. Drop it"),
    (lambda: a_scheme(WORST, replace(NEXT, name="worst")), r"classes must differ in name; found 'worst' twice. Rename one"),
    (lambda: a_scheme(NEXT, WORST), r"upper must rise from class to class; found 10 after 20 µeq/L. Order the classes"),
    (lambda: a_scheme(WORST, replace(NEXT, upper=1e-5)), r"upper must rise from class to class; found 10 after 10 µeq/L"),
    (lambda: a_scheme(WORST, replace(NEXT, upper=1e-5 * (1 + 1e-9))), r"upper must rise from class to class"),
    (lambda: a_scheme(WORST, one_class("b", math.inf)), r"upper of 'b' must be from -10000 to 100000 µeq/L; found inf"),
    (lambda: a_scheme(one_class(upper=50.0)), r"upper of 'worst' must be from -10000 to 100000 µeq/L; found 5e\+07. Correct the limit or its unit"),
    (lambda: a_scheme(one_class(upper=50.0), quantity="ph"), r"upper of 'worst' must be from 3 to 11 -; found 50"),
    (lambda: a_scheme(replace(WORST, at_risk=False), NEXT), r"at_risk must run from the worst class without a gap; found 'next' at risk and the worse 'worst' not"),
]


@pytest.mark.parametrize(("build", "message"), REFUSED, ids=[f"{i}" for i in range(len(REFUSED))])
def test_what_a_scheme_must_be(build, message):
    """Each rule names the scheme or class, the value found and the remedy."""
    with pytest.raises(InputError, match=message):
        build()


def test_the_last_class_has_no_limit():
    """A table whose order is upside down is refused."""
    with pytest.raises(InputError, match=r"the last class is the best and must have no upper limit; found 20. Order the classes"):
        replace(a_scheme(WORST), classes=(WORST, NEXT))


# ------------------------------------------------------------------ by name or by file


def test_find_by_name_and_by_file():
    """A shipped name, or a path whose ending says that it is one."""
    assert find_scheme("norway_20") == SHIPPED["norway_20"]
    assert find_scheme(str(STARTER)) == read_scheme(STARTER)
    with pytest.raises(FileError, match=r"NONE.TOML"):
        find_scheme("NONE.TOML")


@pytest.mark.parametrize(("text", "message"), [
    ("SURVEY_BAND", r"a scheme must be one of survey_bands, .*, trout_1995_organic, or a file ending in .toml; found 'SURVEY_BAND'. Did you mean survey_bands\?"),
    ("zzz", r"one of survey_bands, .*; found 'zzz'. Choose one\."), ("", r"found ''. Choose one")])
def test_unknown_scheme(text, message):
    """The message lists the names and the nearest."""
    with pytest.raises(InputError, match=message):
        find_scheme(text)


def test_scheme_file_that_cannot_be_read(tmp_path):
    """File errors say what and why."""
    with pytest.raises(FileError, match=r"the scheme file none.toml cannot be read: No such file or directory. Check the path"):
        find_scheme(str(tmp_path / "none.toml"))
    with pytest.raises(FileError, match=r"cannot be read: Is a directory"):
        read_scheme(tmp_path)
    (tmp_path / "latin.toml").write_bytes("# µ".encode("latin-1"))
    with pytest.raises(FileError, match=r"latin.toml cannot be read: not UTF-8 text"):
        read_scheme(tmp_path / "latin.toml")


# ------------------------------------------------------------------ the user's own file


def test_starter_is_a_scheme_as_it_is():
    """The starter file shows every key, and reads back as what it says."""
    found = read_scheme(STARTER)
    assert (found.name, found.quantity, found.stand_ins, found.mark) == ("mill_valley", "anc_gran", ("alkalinity",), "own")
    assert [c.name for c in found.classes] == ["acid", "fragile", "safe"]
    assert [c.upper for c in found.classes] == pytest.approx([10e-6, 75e-6, math.inf], rel=1e-12)
    assert [c.upper_belongs for c in found.classes[:2]] == [True, False]
    assert [c.at_risk for c in found.classes] == [True, True, False]
    assert [c.source == found.source for c in found.classes] == [True, False, True]
    assert "invented" in found.source
    text = STARTER.read_text(encoding="utf-8")
    assert all(name in text for name in QUANTITIES)


TOP = {"name": '"mine"', "quantity": '"alkalinity"', "unit": '"mg/L as CaCO3"', "source": '"permit 12"'}
CLASS = {"name": '"low"', "upper": "5.0", "upper_belongs": "false", "at_risk": "true", "words": '"w"', "next_step": '"n"'}
BEST = {"name": '"high"', "at_risk": "false", "words": '"w"', "next_step": '"n"'}


def text_of(top=None, low=None, best=None):
    """Text of a scheme file with some keys changed; None leaves a key out."""
    def lines(keys, changes):
        return "\n".join(f"{k} = {v}" for k, v in (keys | (changes or {})).items() if v is not None)
    return f"{lines(TOP, top)}\n[[classes]]\n{lines(CLASS, low)}\n[[classes]]\n{lines(BEST, best)}\n"


@pytest.fixture
def scheme_of(tmp_path):
    """A scheme read from the text of a file."""
    def read(text):
        path = tmp_path / "own.toml"
        path.write_text(text, encoding="utf-8")
        return read_scheme(path)
    return read


def test_defaults_of_what_is_left_out(scheme_of):
    """No stand-ins, no words of the scheme; the source of each class is that of the scheme."""
    found = scheme_of(text_of())
    assert (found.stand_ins, found.words, {c.source for c in found.classes}) == ((), "", {"permit 12"})


@pytest.mark.parametrize(("unit", "limit", "eq_l"), [
    ("mg/L as CaCO3", "5", 5e-3 / 50.043), ("µeq/L", "40", 40e-6), ("ueq/L", "40.0", 40e-6), ("meq/L", "0.04", 40e-6),
    ("µeq/L", "-5", -5e-6), ("mmol/L", "1", 1e-3)])
def test_limits_in_the_units_of_the_trade(scheme_of, unit, limit, eq_l):
    """Definition of each unit; CaCO3 is 50.043 g per equivalent."""
    found = scheme_of(text_of({"unit": f'"{unit}"'}, {"upper": limit}))
    assert found.classes[0].upper == pytest.approx(eq_l, rel=2e-5)


def test_a_scheme_on_ph(scheme_of):
    """pH has no unit."""
    found = scheme_of(text_of({"quantity": '"ph"', "unit": '"-"'}, {"upper": "6.0"}))
    assert (found.classes[0].upper, found.rule(0)) == (6.0, "pH < 6")


def test_byte_order_mark(tmp_path):
    """Some editors put one in front."""
    path = tmp_path / "own.toml"
    path.write_text(text_of(), encoding="utf-8-sig")
    assert read_scheme(path).name == "mine"


MESSAGES = [
    ("name = ", r"own.toml is not valid TOML: .*Correct that line"),
    *((text_of({k: None}), rf"own.toml must have {k}; it is missing. Add it") for k in TOP),
    (text_of({"classes_": "1"}), r"own.toml has an unknown key 'classes_'; keys are name, quantity, unit, source, classes, stand_ins, words"),
    (text_of().replace("[[classes]]", "[other]", 1).replace("[[classes]]", "[another]"), r"unknown key 'other'"),
    ("\n".join(f"{k} = {v}" for k, v in TOP.items()), r"own.toml must have classes; it is missing"),
    *((text_of({k: "7"}), rf"own.toml: {k} must be text; found 7. Put it in quotes") for k in TOP),
    (text_of({"words": "7"}), r"own.toml: words must be text; found 7"),
    (text_of({"stand_ins": '"anc_gran"'}), r"own.toml: stand_ins must be a list; found 'anc_gran'. Put it in brackets"),
    (text_of({"stand_ins": "[1]"}), r"own.toml: stand_ins must be a list of words; found \[1\]. Put each in quotes"),
    (text_of({"stand_ins": '["gran"]'}), r"own.toml: scheme 'mine': quantity and stand_ins must be from .*; found 'gran'"),
    (text_of({"name": '"uk_0"'}), r"own.toml: name must differ from the shipped schemes; found 'uk_0'. Rename it"),
    (text_of({"name": '""'}), r"own.toml: scheme '': name must be text that does not end in .toml; found ''"),
    (text_of({"source": '""'}), r"own.toml: class 1: class 'low': source must be text; it is empty"),
    (text_of({"quantity": '"pH"'}), r"own.toml: quantity must be from anc_gran, .*, ph; found 'pH'. Correct it"),
    (text_of({"unit": '"mg"'}), r"own.toml: unit must be one of mmol/L, .*µeq/L.*mg/L as CaCO3.*; found 'mg'. Correct it"),
    (text_of({"unit": '"µeq/kg"'}), r"own.toml: unit must be one of .*; found 'µeq/kg'"),
    (text_of({"unit": '"mg/L"'}), r"own.toml: unit: mg/L needs a basis .*'mg/L as CaCO3'"),
    (text_of({"quantity": '"ph"', "unit": '"meq/L"'}), r"own.toml: unit must be one of -; found 'meq/L'"),
    ("classes = [1, 2]\n" + "\n".join(f"{k} = {v}" for k, v in TOP.items()), r"own.toml: classes must be tables; found \[1, 2\]. Write \[\[classes\]\]"),
    ("classes = 3\n" + "\n".join(f"{k} = {v}" for k, v in TOP.items()), r"own.toml: classes must be a list; found 3"),
    ("classes = []\n" + "\n".join(f"{k} = {v}" for k, v in TOP.items()), r"own.toml: scheme 'mine': classes must be two or more; found 0"),
    *((text_of(low={k: None}), rf"own.toml: class 1 must have {k}; it is missing. Add it") for k in CLASS),
    *((text_of(best={k: None}), rf"own.toml: class 2 must have {k}; it is missing") for k in BEST),
    (text_of(low={"colour": '"red"'}), r"own.toml: class 1 has an unknown key 'colour'; keys are name, at_risk, words, next_step, upper, upper_belongs, source"),
    *((text_of(low={k: "7"}), rf"own.toml: class 1: {k} must be text; found 7") for k in ("name", "words", "next_step", "source")),
    *((text_of(low={k: '"yes"'}), rf"own.toml: class 1: {k} must be true or false; found 'yes'. Write it without quotes") for k in ("at_risk", "upper_belongs")),
    *((text_of(low={"upper": v}), rf"own.toml: class 1: upper must be a number; found {f}") for v, f in (('"5"', "'5'"), ("true", "True"), ("nan", "nan"), ("inf", "inf"))),
    (text_of(low={"words": '""'}), r"own.toml: class 1: class 'low': words must be text; it is empty"),
    (text_of(low={"name": '"high"'}), r"own.toml: scheme 'mine': classes must differ in name; found 'high' twice"),
    (text_of({"unit": '"eq/L"'}, {"upper": "50"}), r"own.toml: scheme 'mine': upper of 'low' must be from -10000 to 100000 µeq/L; found 5e\+07"),
    (text_of({"unit": '"meq/L"'}, {"upper": "500"}), r"own.toml: scheme 'mine': upper of 'low' must be from -10000 to 100000 µeq/L; found 500000. Correct the limit or its unit"),
    *((text_of(best={k: v}), rf"own.toml: class 2 is the last and so the best: it must have no {k}; found {f}. Order the classes") for k, v, f in (("upper", "9", "9"), ("upper_belongs", "true", "True"))),
]


@pytest.mark.parametrize(("text", "message"), MESSAGES, ids=[f"{i}" for i in range(len(MESSAGES))])
def test_scheme_file_messages(scheme_of, text, message):
    """Each mistake names file, class, key, value and remedy."""
    with pytest.raises(InputError, match=message):
        scheme_of(text)
