"""Critical loads: lakes worked out apart, closed forms, the root, mass balances, flags, rows, and what five lakes did."""

import os
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from critical_lakes import (
    BASE_CATIONS,
    LAKES,
    VARIABLE,
    Fixed,
    bracketed_original,
    charges_of,
    choice_of,
    of_lake,
)
from numpy.testing import assert_allclose, assert_array_equal
from published_rows import MARKS, read_rows
from scipy.stats import theilslopes

from aquabuf.assess.lake import critical
from aquabuf.assess.lake.critical import (
    FLAGS,
    CriticalLoadChoice,
    after_deposition_change,
    concentration_scale,
    critical_load,
    critical_load_eq_m2_yr,
    exceedance_eq_m2_yr,
    f_factor,
    original_base_cations,
    original_base_cations_iterated,
    parse_choice,
    variable_anc_limit,
)
from aquabuf.errors import InputError

ROWS = read_rows("critical_loads")
LAKE_ROWS = [row for row in ROWS if row["subject"] in LAKES]
TO_HOUSE = {"ueq_l": 1e-6, "meq_m2_yr": 1e-3}
S = 4e-4
ALL_CHOICES = ["", "original", "flux", "flux original"]


# ------------------------------------------------------------------ lakes worked out apart


@pytest.mark.parametrize("row", LAKE_ROWS, ids=lambda r: f"{r['subject']} {r['choice']} {r['limit_ueq_l']} {r['quantity']}")
def test_lake_worked_out_apart(row):
    """Each figure to the digits it was printed with."""
    unit = next((u for u in TO_HOUSE if row["quantity"].endswith(u)), "")
    found = getattr(of_lake(row["subject"], choice_of(row)), row["quantity"].removesuffix(f"_{unit}"))
    assert_allclose(found / TO_HOUSE.get(unit, 1.0), float(row["expected"]), rtol=0, atol=float(row["atol"]))


def test_every_published_row_names_mark_and_source():
    """A check value without a source is none."""
    assert [row for row in ROWS if row["mark"] not in MARKS or len(row["source"]) < 5] == []


# ------------------------------------------------------------------ F and the original base cations


def test_f_at_the_angles_that_everyone_knows():
    """sin 30, 45, 90 degrees at a third, a half and all of S; 1 beyond, 0 below zero."""
    parts = np.array([-2.0, 0.0, 1 / 3, 0.5, 1.0, 7.0, np.nan])
    assert_allclose(f_factor(parts * S, S), [0.0, 0.0, 0.5, np.sqrt(0.5), 1.0, 1.0, np.nan], rtol=1e-14)


def test_flux_and_concentration_agree_at_one_meter_of_runoff():
    """400 meq/m2/yr in 1 m/yr is 400 µeq/L; in half a meter S is 800 µeq/L, and without runoff there is none."""
    flux = concentration_scale(CriticalLoadChoice(form="flux"), [1.0, 0.5, 0.0, -1.0, np.nan])
    assert_allclose(flux, [4e-4, 8e-4, np.nan, np.nan, np.nan], rtol=1e-14)
    assert_allclose(concentration_scale(CriticalLoadChoice(), [1.0, 0.5, 0.0]), [4e-4, 4e-4, np.nan], rtol=1e-14)


def test_original_base_cations_at_known_angles():
    """BC0 = S/3 has F = 1/2, so BC = S/3 + acid/2 leads back to it; beyond S all acid is answered; without acid nothing."""
    acid = np.array([1e-4, -3e-5, 2e-3])
    assert_allclose(original_base_cations_iterated(S / 3 + acid / 2, acid, S), S / 3, rtol=1e-12)
    assert_allclose(original_base_cations_iterated(1e-3, [1e-4, -1e-4], S), [9e-4, 1.1e-3], rtol=1e-14)
    assert_allclose(original_base_cations_iterated([5e-5, 3e-4, 2e-3], 0.0, S), [5e-5, 3e-4, 2e-3], rtol=1e-12)
    assert_allclose(original_base_cations([S / 3, 2 * S], 1e-4, S), [S / 3 - 5e-5, 2 * S - 1e-4], rtol=1e-14)


@pytest.mark.parametrize(("low", "high"), [(-7, -3), (-9, -1)], ids=["waters", "far beyond waters"])
@pytest.mark.parametrize("sign", [1.0, -1.0], ids=["acid added", "acid taken away"])
def test_original_base_cations_against_bracketed_roots(low, high, sign):
    """Base cations and acid over decades, S from 10 µeq/L to 0.01 eq/L; to 1e-9 of S."""
    rng = np.random.default_rng(5)
    bc, acid = (10.0 ** rng.uniform(low, high, 3000) for _ in range(2))
    scale = 10.0 ** rng.uniform(-5, -2, 3000)
    found = original_base_cations_iterated(bc, sign * acid, scale)
    expected = [bracketed_original(*row) for row in zip(bc, sign * acid, scale, strict=True)]
    assert_allclose((found - expected) / scale, 0.0, rtol=0, atol=1e-9)


def test_a_number_is_solved_like_a_row():
    """A plain number that needs the further steps: few base cations, much acid taken away."""
    assert_allclose(original_base_cations_iterated(1e-6, -2.6e-4, S), bracketed_original(1e-6, -2.6e-4, S), rtol=1e-9)


@pytest.mark.parametrize("sign", [1.0, -1.0], ids=["acid added", "acid taken away"])
def test_the_root_is_the_only_one(sign):
    """On a fine line from nothing to beyond both together, the balance changes its sign once, at the root."""
    rng = np.random.default_rng(6)
    bc, acid = (10.0 ** rng.uniform(-6, -3, (300, 1)) for _ in range(2))
    root = original_base_cations_iterated(bc, sign * acid, S)
    line = np.linspace(0.0, 1.0, 4001)[1:] * 1.937 * (bc + acid)  # a step that does not meet the root itself
    off = line + np.sin(np.pi / 2 * np.minimum(line / S, 1.0)) * sign * acid - bc
    assert_array_equal(np.count_nonzero(np.diff(np.sign(off), axis=1), axis=1) <= 1, True)
    far = np.abs(line - root) > 1e-3 * (bc + acid)
    assert_array_equal((off > 0.0)[far], (line > root)[far])


def test_no_base_cations_are_left_alone():
    """At or below zero F is 0, so there is nothing to give back; nan stays nan."""
    bc, acid = [0.0, -3e-5, np.nan, 1e-4, -3e-5], [1e-4, 1e-4, 1e-4, np.nan, np.nan]
    assert_array_equal(original_base_cations_iterated(bc, acid, S), [0.0, -3e-5, np.nan, np.nan, np.nan])


# ------------------------------------------------------------------ balances


@pytest.mark.parametrize("words", ALL_CHOICES)
@pytest.mark.parametrize("limit", [Fixed(20e-6), VARIABLE], ids=["20", "variable"])
def test_the_critical_load_leaves_the_water_at_its_limit(words, limit):
    """Base cations as before acid deposition less the acid of the load in the runoff: the ANC limit, by charge."""
    for name, (_, runoff, _) in LAKES.items():
        r = of_lake(name, parse_choice(words, limit))
        acid_eq_l = r.load / (1000.0 * runoff)
        assert_allclose(r.bc_original - acid_eq_l, r.anc_limit, rtol=1e-12)


@pytest.mark.parametrize("words", ALL_CHOICES)
def test_acid_is_answered_by_base_cations_or_by_anc(words):
    """Added acid = base cations given + ANC lost, and F is the share of the first."""
    r = of_lake("hawk pond", parse_choice(words))
    nitrate = 9.775e-6
    added = r.so4_star + nitrate - r.so4_background
    given, lost = r.bc_today_star - r.bc_original, (r.bc_original - r.so4_background) - (
        r.bc_today_star - r.so4_star - nitrate)
    assert_allclose(given + lost, added, rtol=1e-12)
    assert_allclose(given / added, r.f, rtol=1e-10)


def test_variable_limit_rises_evenly_to_50_at_200():
    """As printed: linear in the load, 0 to 50 µeq/L at 200 meq/m2/yr; there it stays, and it never goes below 0."""
    bc0, runoff = np.array([[-5e-5, 0.0, 3e-5, 1e-4, 2.5e-4, 9e-4]]), np.array([[0.1], [0.8], [1.0], [2.0]])
    limit = variable_anc_limit(bc0, runoff)
    load = critical_load_eq_m2_yr(bc0, limit, runoff)
    assert_allclose(limit, 50e-6 * np.clip(load / 0.2, 0.0, 1.0), rtol=1e-12, atol=0)
    assert_allclose([limit[2, 4], load[2, 4]], [50e-6, 0.2], rtol=1e-12)


def test_exceedance_by_hand():
    """50 of sulfur, 10 µeq/L of nitrate in 0.5 m (5), load 40: 15 above, in meq/m2/yr."""
    assert_allclose(exceedance_eq_m2_yr(0.050, 10e-6, 0.5, 0.040), 0.015, rtol=1e-12)


# ------------------------------------------------------------------ deposition with sea salt in


@pytest.mark.parametrize("tracer", ["chloride", "sodium"])
def test_sea_salt_in_the_deposition_changes_nothing(tracer):
    """Total deposition is the non-marine part and what the tracer in the runoff, at steady state, brought along."""
    lake = charges_of(calcium=120.0, sodium=200.0, chloride=200.0, sulfate=120.0, nitrate=5.0)
    choice, per_tracer = CriticalLoadChoice(tracer=tracer), {"chloride": 0.103, "sodium": 0.1197}[tracer]
    total = 0.040 + per_tracer * 200e-6 * 1000.0 * 0.9
    a = critical_load(lake, 0.9, choice, sulfur_deposition_eq_m2_yr=0.040)
    b = critical_load(lake, 0.9, choice, sulfur_deposition_eq_m2_yr=total, sulfur_is="total")
    assert_allclose(b.exceedance, a.exceedance, rtol=1e-9)


def test_chloride_deposition_tells_the_sea_salt_of_sulfur():
    """0.103 of the chloride that falls, whatever runs off; with sea salt left in nothing is taken off."""
    lake = charges_of(calcium=120.0, sodium=20.0, chloride=200.0, sulfate=120.0)
    kept, off = (critical_load(lake, 0.9, CriticalLoadChoice(tracer=tracer), sulfur_deposition_eq_m2_yr=0.05,
                               sulfur_is="total", chloride_deposition_eq_m2_yr=0.1) for tracer in ("none", "sodium"))
    assert_allclose([off.exceedance + off.load, kept.exceedance + kept.load], [0.05 - 0.0103, 0.05], rtol=1e-12)


def test_without_deposition_there_is_a_load_and_no_exceedance():
    """The load needs the water only."""
    found = critical_load(charges_of(calcium=120.0, sulfate=50.0), 0.9, CriticalLoadChoice())
    assert np.isfinite(found.load)
    assert np.isnan(found.exceedance)


# ------------------------------------------------------------------ flags


FLAGGED = {  # name: a lake and choice that has it, and the same with a small change that has it not
    "background_above_today": ({"calcium": 100.0, "sulfate": 30.9}, {"calcium": 100.0, "sulfate": 31.1}, ""),
    "sulfate_negative": ({"sulfate": 10.2, "chloride": 100.0, "sodium": 85.9}, {"sulfate": 10.4, "chloride": 100.0, "sodium": 85.9}, ""),
    "base_cations_negative": ({"calcium": 110.9, "chloride": 100.0}, {"calcium": 111.1, "chloride": 100.0}, ""),
    "f_capped": ({"calcium": 400.1}, {"calcium": 399.0}, ""),
    "limit_out_of_reach": ({"calcium": 19.0, "sulfate": 18.0}, {"calcium": 21.0, "sulfate": 18.0}, ""),
    "limit_capped": ({"calcium": 260.0, "sulfate": 56.6}, {"calcium": 240.0, "sulfate": 53.4}, "variable"),
}


@pytest.mark.parametrize("name", FLAGS)
def test_flag_on_either_side_of_its_line(name):
    """Each flag has a lake just beyond its line and one just before it; a lake without readings has none."""
    beyond, before, limit = FLAGGED[name]
    lakes = charges_of(**{ion: [beyond.get(ion, 0.0), before.get(ion, 0.0), np.nan] for ion in charges_of()})
    found = critical_load(lakes, 1.0, parse_choice("", VARIABLE if limit else None))
    assert_array_equal(found.flags[name], [True, False, False])
    assert list(found.flags) == list(FLAGS)


def test_background_above_today_is_kept_or_capped():
    """BC* 100, SO4* 20: background 31. Kept, 11 of acid were taken away: BC0 = 100 + 11 F; capped, BC0 stays."""
    lake, f = charges_of(calcium=100.0, sulfate=20.0), np.sin(np.pi / 8)
    kept, capped = (critical_load(lake, 1.0, parse_choice(words)) for words in ("kept", "capped"))
    assert_allclose([kept.bc_original, capped.bc_original], [100e-6 + 11e-6 * f, 100e-6], rtol=1e-12)
    assert bool(kept.flags["background_above_today"]) is bool(capped.flags["background_above_today"]) is True
    assert_allclose(capped.so4_background, 20e-6, rtol=1e-12)


# ------------------------------------------------------------------ rows and messages


@pytest.mark.parametrize("words", ALL_CHOICES)
def test_rows_do_not_see_each_other(words):
    """Lakes by draws equal single calls; one missing reading empties its own place alone."""
    rng = np.random.default_rng(2)
    charges = {ion: value * rng.lognormal(0.0, 1.0, (4, 5)) for ion, value in charges_of(**LAKES["hawk pond"][0]).items()}
    charges["nitrate"][1, 2] = np.nan
    runoff, choice = np.array([[0.3], [0.7], [1.4], [0.0]]), parse_choice(words, VARIABLE)
    found = critical_load(charges, runoff, choice, sulfur_deposition_eq_m2_yr=np.full((4, 1), 0.04))
    for i, j in np.ndindex(4, 5):
        one = critical_load({ion: v[i, j] for ion, v in charges.items()}, runoff[i, 0], choice,
                            sulfur_deposition_eq_m2_yr=0.04)
        for name in ("f", "bc_original", "anc_limit", "load", "exceedance"):
            assert_allclose(getattr(found, name)[i, j], getattr(one, name), rtol=1e-13)
    empty = np.isnan(found.load)
    assert_array_equal(empty, [[False] * 5, [False, False, True, False, False], [False] * 5, [True] * 5])


def test_missing_ion_is_refused():
    """A zero is never filled in."""
    with pytest.raises(InputError, match=r"needs the charge of calcium, .*, nitrate; found no nitrate. Add it"):
        critical_load({ion: np.array([1e-5]) for ion in (*BASE_CATIONS, "sulfate", "chloride")}, 1.0, CriticalLoadChoice())


def test_unknown_kind_of_deposition_is_refused():
    """The message lists the kinds."""
    with pytest.raises(InputError, match=r"must be nonmarine or total; found 'wet'. Correct it"):
        critical_load(charges_of(), 1.0, CriticalLoadChoice(), sulfur_is="wet")


# ------------------------------------------------------------------ after a change of deposition


def changed(change, words="", **lake):
    """Answer for one lake whose ANC is 30 µeq/L."""
    of = critical_load(charges_of(**lake), 1.0, parse_choice(words))
    return after_deposition_change(of, 30e-6, [change])[0]


@pytest.mark.parametrize("words", ALL_CHOICES)
@pytest.mark.parametrize("change", [-0.3, -0.1, 0.1])
def test_change_follows_the_exact_integral_of_f(change, words):
    """dBC/dSO4 = F(BC) has tan(a/2) growing as exp(pi SO4/2S), a = pi/2 BC/S; the mean slope is good to second order."""
    after = changed(change, words, calcium=120.0, sulfate=130.0)
    rise = change * (130e-6 - (15e-6 + 0.16 * 120e-6))
    half = np.arctan(np.tan(np.pi / 4 * 120e-6 / S) * np.exp(np.pi / 2 * rise / S))
    exact = (4 * S / np.pi * half - 120e-6) - rise
    assert_allclose(after.anc_change, exact, rtol=0.002)
    assert_allclose(after.anc - 30e-6, after.anc_change, rtol=1e-9)


def test_soil_that_gives_nothing_and_soil_that_gives_all():
    """Without base cations ANC moves as sulfate does; beyond S it does not move."""
    nothing = changed(-0.5, sulfate=115.0)
    everything = changed(-0.5, calcium=900.0, sulfate=300.0)
    assert_allclose([nothing.anc_change, everything.anc_change], [50e-6, 0.0], rtol=1e-9, atol=1e-18)


def test_no_change_and_nothing_to_change():
    """No change gives none, nor does a lake whose sulfate is all background."""
    assert changed(0.0, calcium=120.0, sulfate=130.0).anc_change == 0.0
    assert changed(-0.5, calcium=120.0, sulfate=20.0).anc_change == 0.0


def test_more_deposition_less_anc():
    """ANC falls all the way as deposition rises."""
    of = of_lake("hawk pond")
    anc = [after.anc for after in after_deposition_change(of, -21.7e-6, np.linspace(-1.0, 2.0, 31))]
    assert np.all(np.diff(np.squeeze(anc)) < 0.0)


def test_more_than_all_deposition_cannot_go():
    """The message names the unit."""
    with pytest.raises(InputError, match=r"must be -1 or more; found -50. Give -50 % as -0.5"):
        after_deposition_change(of_lake("hawk pond"), 0.0, [-50.0])


# ------------------------------------------------------------------ what lakes did


FOLDER = os.environ.get("AQUABUF_OPEN_DATA", "")
RATIOS = {"Ca_ueq_L": 0.037, "Mg_ueq_L": 0.196, "Na_ueq_L": 0.859, "K_ueq_L": 0.018}


def observed_lakes(folder):
    """Per Adirondack lake: observed F over the years, first base cations and sulfate with nitrate in eq/L, runoff.

    Woods Lake is left out: it was limed, and the survey does not give its runoff.
    """
    series = pd.read_csv(Path(folder) / "ltm_adirondack_1982_2020.csv")
    survey = pd.read_csv(Path(folder) / "nsws_lakes_1984.csv").set_index("lake_id")
    ions = [*RATIOS, "Cl_ueq_L", "SO4_ueq_L", "NO3_ueq_L"]
    series[ions] = series[ions].apply(pd.to_numeric, errors="coerce")
    for lake, rows in series[series.site_id.isin(survey.index)].groupby("site_id"):
        by_year = rows.groupby(rows.date.str[:4].astype(int))[ions]
        mean = by_year.mean()[by_year.size() >= 8].dropna()
        bc = sum(mean[ion] - ratio * mean.Cl_ueq_L for ion, ratio in RATIOS.items())
        acid = mean.SO4_ueq_L - 0.103 * mean.Cl_ueq_L + mean.NO3_ueq_L
        slopes = [theilslopes(v, mean.index)[0] for v in (bc, acid)]
        yield slopes[0] / slopes[1], 1e-6 * bc[:3].mean(), 1e-6 * acid[:3].mean(), survey.runoff_m_yr[lake]


@pytest.mark.open_data
@pytest.mark.skipif(not FOLDER, reason="AQUABUF_OPEN_DATA names no folder")
def test_five_lakes_in_recovery_answer_as_the_default_form_says():
    """Their mean F over three decades lies nearer to the concentration form than to the flux form."""
    observed, bc, acid, runoff = (np.array(v) for v in zip(*observed_lakes(FOLDER), strict=True))
    assert observed.size == 5
    distance = {}
    for words in ALL_CHOICES:
        found = critical_load(charges_of(calcium=bc * 1e6, sulfate=acid * 1e6), runoff, parse_choice(words))
        distance[words] = np.sqrt(np.mean((found.f - observed) ** 2))
    assert max(distance[""], distance["original"]) < min(distance["flux"], distance["flux original"])
    assert distance[""] < 0.2


def test_flags_of_the_module_are_all_tested():
    """A new flag needs two lakes above."""
    assert set(FLAGGED) == set(critical.FLAGS)
