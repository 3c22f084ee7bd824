"""Options of a lake assessment: what is accepted at its very ends, each refusal, what the words stand for."""

import re

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf.assess.lake.options import ALWAYS_THRESHOLDS, GROUPS, LakeOptions, own_organic_model, rules_of
from aquabuf.chem.gases import AIR_CO2_PPM, AIR_CO2_YEAR
from aquabuf.chem.organic import organic_models
from aquabuf.chem.transfer import transfer_relations
from aquabuf.engine.conditions import CARBONIC_SETS
from aquabuf.errors import FileError, InputError

ENDS = {  # field: lowest and highest accepted, and the words of a refusal
    "air_co2_ppm": (1.0, 1e6,
                    f"air CO2 must be from 1 to 1e+06; found {{}}. Outdoor air had about {AIR_CO2_PPM:g} ppm in "
                              f"{AIR_CO2_YEAR}."),
    "event_fraction": (0.0, 1.0, "the share of event water must be from 0 to 1; found {}. Give 40 % as 0.4."),
    "lime_anc_ueq_l": (-1000.0, 10_000.0,
                       "the liming target must be from -1000 to 10000; found {}. Give it in µeq/L, such "
                                          "as 100."),
    "lime_ph": (4.0, 9.0, "the liming target pH must be from 4 to 9; found {}. Planning takes 6.0 to 6.5."),
}
OWN = "SITES:PK,PK,PK (µeq of acid sites per mg of carbon, and three pK)"


def refused(words, **options):
    """The options are refused with exactly these words."""
    with pytest.raises(InputError, match=f"^{re.escape(words)}$"):
        LakeOptions(**options)


# ------------------------------------------------------------------ numbers


@pytest.mark.parametrize("name", ENDS)
def test_ends_of_a_range(name):
    """The ends are accepted as they are; beyond them, and no number at all, is refused."""
    low, high, words = ENDS[name]
    assert [getattr(LakeOptions(**{name: end}), name) for end in (low, high)] == [low, high]
    step = 1e-3 * (high - low)
    for value in (low - step, high + step, float("nan"), float("inf")):
        refused(words.format(f"{value:g}"), **{name: value})


@pytest.mark.parametrize(("name", "low", "high", "subject", "remedy"), [
    ("thresholds", 2.0, 12.0, "a pH threshold", "Correct the list."),
    ("deposition_changes", -100.0, 1000.0, "a change of deposition", "Give percent, such as -30."),
])
def test_ends_of_each_number_of_a_list(name, low, high, subject, remedy):
    """One bad number in a list is found."""
    assert {low, high} <= set(getattr(LakeOptions(**{name: (low, high)}), name))
    for value in (low - 0.1, high + 0.1, float("nan")):
        refused(f"{subject} must be from {low:g} to {high:g}; found {value:g}. {remedy}", **{name: (low, value)})


@pytest.mark.parametrize("draws", [0, 100, 100_000])
def test_draws_accepted(draws):
    """None, or enough to tell a 5 % quantile."""
    assert LakeOptions(draws=draws).draws == draws


@pytest.mark.parametrize("draws", [-1, 1, 99, 100_001])
def test_draws_refused(draws):
    """Too few or too many."""
    refused(f"draws must be 0 or from 100 to 100000; found {draws}. Use 1000, or 0 for no intervals.", draws=draws)


def test_seed():
    """Any whole number that is not negative."""
    assert LakeOptions(seed=0).seed == 0
    refused("seed must be 0 or more; found -3. Any whole number does.", seed=-3)


def test_thresholds_always_hold_the_three_of_the_results():
    """They come first, each once, and figures beyond 0.001 pH do not make a second column."""
    assert LakeOptions().thresholds == ALWAYS_THRESHOLDS == (6.0, 5.5, 5.0)
    assert LakeOptions(thresholds=()).thresholds == ALWAYS_THRESHOLDS
    assert LakeOptions(thresholds=(5.25, 5.5, 6.0000001, 7.0, 5.25)).thresholds == (6.0, 5.5, 5.0, 5.25, 7.0)


@pytest.mark.parametrize("day", ["", "2026-05-01", "2024-02-29"])
def test_days_of_liming(day):
    """Year, month and day, or none."""
    assert LakeOptions(lime_date=day).lime_date == day


@pytest.mark.parametrize("day", [
    "2025-02-29", "1 May 2026", "2026-5-1", "05/01/2026",
    "20260501", "2026-W18-5",
])
def test_what_is_no_day_of_liming(day):
    """Another form, or no day of the calendar."""
    refused(f"the day of liming must be written as 2026-05-01; found {day!r}. Correct it.", lime_date=day)


# ------------------------------------------------------------------ words


@pytest.mark.parametrize(("name", "subject", "allowed"), [
    ("group", "the group", GROUPS), ("carbonic", "the carbonic set", CARBONIC_SETS),
    ("wind_relation", "the wind relation", tuple(transfer_relations())),
])
def test_words_of_a_list(name, subject, allowed):
    """Each listed word is accepted, any other is told the list."""
    for word in allowed:
        assert getattr(LakeOptions(**{name: word}), name) == word
    refused(f"{subject} must be one of {', '.join(allowed)}; found 'lakes'. Correct it.", **{name: "lakes"})


def test_a_scheme_is_needed():
    """Without one there is no class."""
    refused("a scheme is needed for the class; found none. Leave the option out for survey_bands.", schemes=())


def test_defaults_stand_for_what_the_help_says():
    """Survey bands, limestone, limit 20 µeq/L, no file of event water."""
    rules = rules_of(LakeOptions())
    assert [s.name for s in rules.schemes] == ["survey_bands"]
    assert (rules.organic.name, rules.lime.name, rules.limit.name, rules.event) == ("hruska_b", "limestone", "20", None)
    assert rules.critical.label == "concentration today norway"
    assert_allclose(rules.critical.anc_limit_eq_l, 20e-6, rtol=1e-12)


def test_schemes_keep_their_order_and_come_once():
    """The first gives the class."""
    rules = rules_of(LakeOptions(schemes=("norway_20", "survey_bands", "norway_20")))
    assert [s.name for s in rules.schemes] == ["norway_20", "survey_bands"]


@pytest.mark.parametrize(("text", "limit"), [("scotland_39", 39e-6), ("-5", -5e-6), ("variable", None)])
def test_the_anc_limit_reaches_the_critical_load(text, limit):
    """One limit for both; words of the variant do not touch it."""
    rules = rules_of(LakeOptions(anc_limit=text, critical_load="flux original sweden"))
    assert rules.critical.label == "flux original sweden"
    found = rules.critical.anc_limit_eq_l
    assert found is None if limit is None else found == pytest.approx(limit, rel=1e-12)
    assert rules.limit.is_variable == (limit is None)


@pytest.mark.parametrize(("options", "words"), [
    ({"anc_limit": "high"}, "the ANC limit must be a number of µeq/L .* found 'high'"),
    ({"critical_load": "fluxx"}, "the words of a critical load must be among .* found 'fluxx'"),
    ({"schemes": ("survey_band",)}, "a scheme must be one of .* found 'survey_band'. Did you mean survey_bands?"),
    ({"lime": "chalk"}, r"^the liming product must be one of limestone, .*soda ash; found 'chalk'\. Correct it\.$"),
])
def test_names_that_are_none(options, words):
    """Each is refused by the rule it belongs to."""
    with pytest.raises(InputError, match=words):  # at once, before any file is read
        LakeOptions(**options)


def test_event_file(tmp_path):
    """Read where one is given; a missing one is told."""
    path = tmp_path / "melt.toml"
    path.write_text('[event]\nname = "melt"\nfraction = 0.3\n[water]\ntemperature_c = 1.0\nph = 5.0\n',
                    encoding="utf-8")
    event = rules_of(LakeOptions(), path).event
    assert (event.name, event.fractions) == ("melt", (0.3,))
    with pytest.raises(FileError, match=r"^the file of event water none\.toml cannot be read"):
        rules_of(LakeOptions(), tmp_path / "none.toml")


# ------------------------------------------------------------------ organic acids


@pytest.mark.parametrize("name", organic_models())
def test_shipped_organic_models(name):
    """By name."""
    assert rules_of(LakeOptions(organic=name)).organic is organic_models()[name]


@pytest.mark.parametrize(("text", "hint"), [("hruska_c", " Did you mean 'hruska_b'?"), ("humic", "")])
def test_unknown_organic_model(text, hint):
    """All names, the form of one's own, and the nearest name if there is one near."""
    words = f"the organic acid model must be one of {', '.join(organic_models())}, or {OWN}; found {text!r}.{hint}"
    with pytest.raises(InputError, match=f"^{re.escape(words)}$"):
        rules_of(LakeOptions(organic=text))


def test_organic_model_of_ones_own():
    """Mass action of a triprotic acid: half of the first site at the first pK, all three far above the last. [eq/mg]"""
    model = rules_of(LakeOptions(organic="9:3,7,11")).organic
    assert (model.name, model.pk) == ("own", (3.0, 7.0, 11.0))
    at = np.array([3.0, 5.0, 7.0, 14.0])
    h = 10.0**-at
    w = np.stack([np.ones(4), 1e-3 / h, 1e-10 / h**2, 1e-21 / h**3])
    by_hand = 3e-6 * (w[1] + 2 * w[2] + 3 * w[3]) / w.sum(axis=0)
    assert_allclose(by_hand[[0, 3]], [1.5e-6, 9e-6], rtol=2e-3)
    assert_allclose(model.anion_eq_l(np.ones(4), at), by_hand, rtol=1e-9)


@pytest.mark.parametrize("text", ["50:-2,4,14", "0.001:3,3,3"])
def test_ends_of_an_own_model(text):
    """Densities up to 50 µeq/mg and pK from -2 to 14, the ends included; equal pK are in order."""
    assert own_organic_model(text).sites_eq_mg == pytest.approx(float(text.split(":")[0]) * 1e-6)


@pytest.mark.parametrize("text", [
    "10.2:3.04,4.51", "10.2:3,4,5,6", "10:3,5,4", "0:3,4,5", "50.1:3,4,5", "-1:3,4,5", "10:5,4,3", "10:-2.1,4,5",
    "10:3,4,14.1",
    "ten:3,4,5", "10:3;4;5", ":3,4,5", "10:", "nan:3,4,5", "10:nan,4,5", "10:3,4,nan",
    "10:3,nan,5",
])
def test_own_model_refused(text):
    """Three pK, rising and believable, and a density above none."""
    words = (f"an organic acid model of your own must read {OWN}, pK rising; found {text!r}. Write for example "
             "10.2:3.04,4.51,6.46.")
    with pytest.raises(InputError, match=f"^{re.escape(words)}$"):
        own_organic_model(text)
