"""Acid episodes against a second working-out with scipy, the engine's own mixing, closed forms and conservation."""

import numpy as np
import pytest
from carbonate_by_hand import BareWater
from numpy.testing import assert_allclose, assert_array_equal
from scipy.optimize import brentq

from aquabuf import Water
from aquabuf import mix as mix_waters
from aquabuf.assess.lake.episode import (
    CHANGES,
    DEPOSITION,
    OTHER_CATIONS,
    WEAK_CHANGES,
    anc_changes,
    at_air,
    balance_of,
    completed,
    crossing_words,
    deposition_words,
    event_from_deposition,
    event_share,
    fraction_at_anc,
    fraction_at_ph,
    ion_anc,
    mix,
    solved,
    weak_changes,
)
from aquabuf.chem.organic import organic_models
from aquabuf.engine.conditions import conditions

STRENGTH = 2e-4
HAND = BareWater(10.0, STRENGTH)
CONDITIONS = conditions(np.full((1, 1), 10.0), 0.0, STRENGTH)
HRUSKA = organic_models()["hruska"]
AIR = np.full((1, 1), 2.0e-5)  # CO2 in the water at equilibrium with air, mol/L
SALT = {"sodium": 0.859, "magnesium": 0.196, "calcium": 0.037, "potassium": 0.018, "sulfate": 0.103}  # ICP Waters
CATIONS, ANIONS = ("calcium", "magnesium", "sodium", "potassium", "ammonium"), ("sulfate", "nitrate", "chloride")


def water(ions, *, anc=None, doc=0.0, aluminum=0.0, dic=40.0):
    """A water from charges in µeq/L, DOC in mg/L, aluminum and carbon in µmol/L; ANC of the ions if none is given."""
    charge = dict(zip((*CATIONS, *ANIONS), ions, strict=True))
    whole = sum(charge[i] for i in CATIONS) - sum(charge[i] for i in ANIONS) if anc is None else anc
    found = {f"{ion}_eq_l": value * 1e-6 for ion, value in charge.items()}
    found |= {"doc_mg_l": doc, "aluminum_mol_l": aluminum * 1e-6, "anc_eq_l": whole * 1e-6, "dic_mol_l": dic * 1e-6}
    return {name: np.full((1, 1), value) for name, value in found.items()}


#                 Ca  Mg  Na  K  NH4 SO4 NO3 Cl
LAKE = water([90, 30, 45, 6, 1, 60, 4, 30], doc=4.0, aluminum=1.0, dic=110.0)  # ANC 78
MELT = water([14, 5, 11, 4, 6, 30, 21, 12], doc=6.0, aluminum=3.0, dic=40.0)   # ANC -23
CLEAR_LAKE, CLEAR_MELT = ({**w, "doc_mg_l": np.zeros((1, 1)), "aluminum_mol_l": np.zeros((1, 1))} for w in (LAKE, MELT))


def hand_anc(ph, doc, aluminum, dic=None, co2=None):
    """Charge-balance ANC at a pH from printed constants only: Hruska's triprotic acid, hydroxides of aluminum."""
    h = 10.0**-ph
    pk = (3.04, 4.51, 6.46)
    w = np.cumprod([1.0, *(10.0**-p / h for p in pk)])
    organic = 10.2e-6 * doc * (w @ np.arange(4)) / w.sum() / 3.0
    b = np.array([1.0, *(10.0**log / h**n for n, log in enumerate((-5.00, -10.1, -16.9, -22.7), start=1))])
    charge = (b @ np.array([3.0, 2.0, 1.0, 0.0, -1.0])) / b.sum()
    carbonate = HAND.alkalinity(ph, dic) if co2 is None else HAND.alkalinity_at_co2(ph, co2)
    return carbonate + organic - aluminum * charge


def hand_ph(w, **carbon):
    """pH of a water by bisection of `hand_anc`."""
    anc, doc, aluminum = (float(np.squeeze(w[n])) for n in ("anc_eq_l", "doc_mg_l", "aluminum_mol_l"))
    carbon = carbon or {"dic": float(np.squeeze(w["dic_mol_l"]))}
    return brentq(lambda ph: hand_anc(ph, doc, aluminum, **carbon) - anc, 2.0, 11.0, xtol=1e-12)


# ---------------------------------------------------------------- mixing


def test_two_component_mixing_of_anc():
    """80 and -20 µeq/L with 40 % event water give 40 (two-component mixing, worked by hand)."""
    found = mix(water([80, 0, 0, 0, 0, 0, 0, 0]), water([0, 0, 0, 0, 0, 20, 0, 0]), 0.4)
    assert_allclose(found["anc_eq_l"], 40e-6, rtol=1e-12)


def test_everything_dissolved_is_conserved():
    """One liter of each part: what is in the mixture is what was in the parts; its ions still tell its ANC."""
    f = np.linspace(0.0, 1.0, 7)
    found = mix(LAKE, MELT, f)
    assert set(found) == set(LAKE)
    for name in LAKE:
        assert_allclose(found[name], LAKE[name] * (1.0 - f) + MELT[name] * f, rtol=0, atol=1e-18)
    assert_allclose(ion_anc(found), found["anc_eq_l"], rtol=0, atol=1e-17)


def test_no_event_water_and_nothing_else():
    """At the ends the mixture is the lake, and the event water."""
    for f, whole in ((0.0, LAKE), (1.0, MELT)):
        found = mix(LAKE, MELT, f)
        for name, value in whole.items():
            assert_array_equal(found[name], value)


def test_a_fraction_that_is_none_gives_nan_in_its_row_only():
    """Below 0, above 1 or missing."""
    found = mix(LAKE, MELT, [[-0.1], [0.5], [1.1], [np.nan]])
    assert_array_equal(np.isnan(found["anc_eq_l"][:, 0]), [True, False, True, True])
    assert_array_equal(np.isnan(anc_changes(LAKE, MELT, [0.5, 2.0])["rest"]), [[False, True]])


def test_what_only_one_water_holds():
    """A quantity of one water is left out; base cations that are not told apart count as none in the other."""
    rain = {k: v for k, v in MELT.items() if k != "dic_mol_l"} | {OTHER_CATIONS: np.full((1, 1), 8e-6)}
    found = mix(LAKE, rain, 0.25)
    assert "dic_mol_l" not in found
    assert_allclose(found[OTHER_CATIONS], 2e-6, rtol=1e-12)
    assert_allclose(mix(rain, LAKE, 0.25)[OTHER_CATIONS], 6e-6, rtol=1e-12)
    assert_allclose(ion_anc(rain), MELT["anc_eq_l"] + 8e-6, rtol=1e-12)


@pytest.mark.parametrize("f", [0.0, 0.3, 0.7, 1.0])
def test_clear_water_mixes_as_the_engine_mixes_it(f):
    """Without organic acids and aluminum the carbonate engine of the package gives the same pH, closed and open."""
    parts = [Water.from_alkalinity_dic(alkalinity_eq_l=w["anc_eq_l"], dic_mol_l=w["dic_mol_l"], t_c=10.0,
                                       ionic_strength_mol_l=STRENGTH) for w in (CLEAR_LAKE, CLEAR_MELT)]
    whole = mix_waters(parts, [1.0 - f, f])
    found = solved(mix(CLEAR_LAKE, CLEAR_MELT, f), CONDITIONS, HRUSKA, AIR)
    assert_allclose(found.ph_closed, whole.ph, rtol=0, atol=1e-6)
    assert_allclose(found.ph_open, whole.at_pco2(AIR / CONDITIONS.k0).ph, rtol=0, atol=1e-6)


@pytest.mark.parametrize("f", [0.0, 0.4, 0.8, 1.0])
def test_ph_of_the_mixture_by_a_second_working_out(f):
    """Organic acids and aluminum included; printed constants and bisection."""
    w = mix(LAKE, MELT, f)
    found = solved(w, CONDITIONS, HRUSKA, AIR)
    assert_allclose(found.ph_closed, hand_ph(w), rtol=0, atol=2e-4)
    assert_allclose(found.ph_open, hand_ph(w, co2=float(AIR[0, 0])), rtol=0, atol=2e-4)


def test_organic_acids_lower_ph_but_not_charge_balance_anc():
    """Charge-balance ANC holds organic anions inside, so brown event water takes pH and carbonate ANC only."""
    clear, brown = (solved(mix(LAKE, {**MELT, "doc_mg_l": np.full((1, 1), doc)}, 0.5), CONDITIONS, HRUSKA, AIR)
                    for doc in (0.0, 20.0))
    assert_array_equal(clear.anc_eq_l, brown.anc_eq_l)
    assert (brown.ph_closed < clear.ph_closed - 0.3).all()
    assert (brown.carbonate_anc_eq_l < clear.carbonate_anc_eq_l - 2e-5).all()


def test_without_organic_carbon_the_organic_model_is_indifferent():
    """A limit: no acid sites, no effect."""
    one, other = (solved(CLEAR_LAKE, CONDITIONS, organic_models()[name], AIR).ph_closed for name in ("oliver", "fakhraei"))
    assert_array_equal(one, other)


def test_draws_and_rows_keep_apart():
    """(lakes, 1) with (1, draws) gives (lakes, draws); each cell is what it is alone, and a gap stays where it is."""
    lakes = {k: v * np.array([[1.0], [0.5], [np.nan]]) for k, v in LAKE.items()}
    events = {k: v * np.array([[1.0, 0.8, 1.2, 0.5]]) for k, v in MELT.items()}
    two = conditions(np.full((3, 1), 10.0), 0.0, STRENGTH)
    found = solved(mix(lakes, events, 0.4), two, HRUSKA, AIR)
    assert found.ph_closed.shape == found.ph_open.shape == (3, 4)
    assert np.isnan(found.ph_closed[2]).all()
    alone = solved(mix({k: v[1:2] for k, v in lakes.items()}, {k: v[:, 3:] for k, v in events.items()}, 0.4), CONDITIONS,
                   HRUSKA, AIR)
    assert_allclose(found.ph_closed[1, 3], alone.ph_closed[0, 0], rtol=0, atol=1e-10)


# ---------------------------------------------------------------- bookkeeping


def test_parts_of_the_loss_by_hand():
    """Each part for the lake and the melt above, half and half; sea salt of both by the printed ratios."""
    parts = {name: float(v[0, 0]) * 1e6 for name, v in anc_changes(LAKE, MELT, 0.5).items()}
    non_marine = [171.0 - 30.0 * 1.110, 34.0 - 12.0 * 1.110]
    assert list(parts) == list(CHANGES)
    assert_allclose(parts["base_cations"], 0.5 * (non_marine[1] - non_marine[0]), atol=1e-9)
    assert_allclose(parts["ammonium"], 0.5 * (6.0 - 1.0), atol=1e-9)
    assert_allclose(parts["sulfate"], -0.5 * ((30.0 - 0.103 * 12.0) - (60.0 - 0.103 * 30.0)), atol=1e-9)
    assert_allclose(parts["nitrate"], -0.5 * (21.0 - 4.0), atol=1e-9)
    assert_allclose(parts["sea_salt"], 0.5 * (12.0 - 30.0) * (1.110 - 0.103 - 1.0), atol=1e-9)
    assert_allclose(parts["rest"], 0.0, atol=1e-9)


def test_parts_add_up_to_the_change():
    """Any ions, ANC measured apart from them: the parts are the whole change, and `rest` is what the ions miss."""
    rng = np.random.default_rng(7)
    base, event = ({k: rng.uniform(0.0, 1e-4, (50, 1)) for k in LAKE} for _ in range(2))
    f = rng.uniform(0.0, 1.0, (1, 20))
    parts = anc_changes(base, event, f)
    assert_allclose(sum(parts.values()), mix(base, event, f)["anc_eq_l"] - base["anc_eq_l"], rtol=0, atol=1e-18)
    missed = f * ((event["anc_eq_l"] - ion_anc(event)) - (base["anc_eq_l"] - ion_anc(base)))
    assert_allclose(parts["rest"], missed, rtol=0, atol=1e-18)


def test_whole_sea_salt_takes_next_to_nothing():
    """Sea spray is neutral: less than 1 % of the chloride added, and all of it in the part of sea salt."""
    spray = {f"{ion}_eq_l": LAKE[f"{ion}_eq_l"] + 2e-4 * {**SALT, "chloride": 1.0}.get(ion, 0.0) for ion in (*CATIONS, *ANIONS)}
    spray = LAKE | spray
    spray["anc_eq_l"] = ion_anc(spray)
    parts = anc_changes(LAKE, spray, 1.0)
    assert_allclose([parts[n] for n in ("base_cations", "sulfate", "nitrate", "rest")], 0.0, atol=1e-18)
    assert 0.0 < parts["sea_salt"][0, 0] < 0.01 * 2e-4


def test_sodium_held_back_by_soil_is_a_loss_of_sea_salt():
    """Chloride up by 200, sodium by 100 instead of 171.8: the missing charge is the loss, and stands in no other part."""
    lake = water([60, 20, 30 * 0.859, 5, 0, 40, 4, 30])
    storm = water([60, 20, 30 * 0.859 + 100, 5, 0, 40, 4, 230])
    parts = anc_changes(lake, storm, 1.0)
    marine = np.minimum([60.0, 20.0, 125.77, 5.0], 230.0 * np.array([0.037, 0.196, 0.859, 0.018])).sum()
    before = 30.0 * (0.859 + 0.196 + 0.037 + 0.018 - 0.103) - 30.0
    assert_allclose(parts["sea_salt"], 1e-6 * (marine - 0.103 * 230.0 - 230.0 - before), atol=1e-15)
    assert (parts["sea_salt"] < -9e-5).all()
    assert_allclose(sum(parts.values()), -1e-4, atol=1e-15)


def test_pure_dilution_is_named_so():
    """Distilled water takes base cations; the acid anions it thins out come back as a gain."""
    parts = anc_changes(LAKE, water([0] * 8), 0.5)
    assert_allclose(parts["base_cations"], -0.5e-6 * (171.0 - 30.0 * 1.110), atol=1e-15)
    assert parts["sulfate"] > 0.0
    assert parts["nitrate"] > 0.0
    assert_allclose(parts["sea_salt"], 0.0, atol=0.5 * 30e-6 * 0.01)


def test_a_missing_ion_leaves_its_parts_open():
    """No ion is filled in: parts with it are nan, the others stand."""
    parts = anc_changes(LAKE, {**MELT, "nitrate_eq_l": np.full((1, 1), np.nan)}, 0.5)
    assert_array_equal([bool(np.isnan(v).all()) for v in parts.values()], [n in ("nitrate", "rest") for n in CHANGES])


@pytest.mark.parametrize("f", [0.2, 0.6])
def test_all_parts_add_up_to_the_change_of_carbonate_anc(f):
    """Bicarbonate, carbonate and hydroxide less H+, worked out by hand at the pH before and after."""
    mixed = mix(LAKE, MELT, f)
    before, after = (solved(w, CONDITIONS, HRUSKA, AIR) for w in (LAKE, mixed))
    carbonate = [HAND.alkalinity(s.ph_closed[0, 0], w["dic_mol_l"]) for s, w in ((before, LAKE), (after, mixed))]
    weak = weak_changes(before, after)
    assert list(weak) == list(WEAK_CHANGES)
    change = sum(anc_changes(LAKE, MELT, f).values()) + sum(weak.values())
    assert_allclose(change, carbonate[1] - carbonate[0], rtol=0, atol=3e-8)
    assert_allclose(change, after.carbonate_anc_eq_l - before.carbonate_anc_eq_l, rtol=0, atol=1e-17)
    assert (weak["aluminum"] > 0.0).all()  # the melt brings aluminum, which buffers the fall


# ---------------------------------------------------------------- fractions


def test_fraction_at_an_anc():
    """(80 - 20) / (80 + 20) is 0.6; limits at the ends, above and below, and a gap."""
    found = fraction_at_anc([80.0, 80.0, 20.0, 10.0, 80.0, 80.0, np.nan], [-20.0, 20.0, -20.0, -20.0, 21.0, 90.0, 0.0], 20.0)
    assert_allclose(found, [0.6, 1.0, 0.0, 0.0, np.inf, np.inf, np.nan])
    assert crossing_words(found).tolist() == ["", "", *["at or below it already"] * 2, *["never, not even as event water alone"] * 2,
                                              "cannot be told"]


@pytest.mark.parametrize("exchange", ["closed", "open"])
@pytest.mark.parametrize("limit", [6.0, 5.5, 5.0])
def test_fraction_at_a_ph_by_a_search_along_the_mixing_line(exchange, limit):
    """The closed form against bisection over the fraction, each step solved by hand for its pH."""
    carbon = {} if exchange == "closed" else {"co2": float(AIR[0, 0])}
    expected = brentq(lambda f: hand_ph(mix(LAKE, MELT, f), **carbon) - limit, 0.0, 1.0, xtol=1e-10)
    found = fraction_at_ph(LAKE, MELT, limit, conditions=CONDITIONS, organic=HRUSKA, co2_of_air=AIR if carbon else None)
    assert_allclose(found, expected, rtol=0, atol=5e-4)
    assert 0.1 < expected < 0.99


def test_fraction_at_a_ph_that_is_passed_already_or_never():
    """0 and inf, as for ANC; and a lake with a gap does not touch its neighbors."""
    lakes = {k: np.concatenate([MELT[k], LAKE[k], LAKE[k] * np.nan, LAKE[k]]) for k in LAKE}
    four = conditions(np.full((4, 1), 10.0), 0.0, STRENGTH)
    events = {k: np.concatenate([LAKE[k], LAKE[k], MELT[k], MELT[k]]) for k in LAKE}
    found = fraction_at_ph(lakes, events, 5.5, conditions=four, organic=HRUSKA)[:, 0]
    assert_array_equal(found[:2], [0.0, np.inf])
    assert np.isnan(found[2])
    assert 0.0 < found[3] < 1.0


@pytest.mark.parametrize("seed", range(5))
def test_ph_crosses_each_limit_once_along_a_mixing_line(seed):
    """Any two waters: pH solved along the line is below the limit beyond the fraction found, and above before it."""
    rng = np.random.default_rng(seed)
    base, event = ({"anc_eq_l": rng.uniform(lo, hi, (40, 1)), "dic_mol_l": rng.uniform(1e-5, 3e-4, (40, 1)),
                    "doc_mg_l": rng.uniform(0.0, 20.0, (40, 1)), "aluminum_mol_l": rng.uniform(0.0, 1e-5, (40, 1))}
                   for lo, hi in ((2e-5, 2e-4), (-8e-5, 5e-5)))
    many = conditions(np.full((40, 1), 10.0), 0.0, STRENGTH)
    f = np.linspace(0.0, 1.0, 41)[None, :]
    for co2 in (None, AIR):
        share = fraction_at_ph(base, event, 5.5, conditions=many, organic=HRUSKA, co2_of_air=co2)
        path = solved(mix(base, event, f), many, HRUSKA, AIR)
        ph = path.ph_closed if co2 is None else path.ph_open
        falls = share[:, 0] > 0.0
        told = np.abs(f - share)[falls] > 1e-6
        assert_array_equal((ph <= 5.5)[falls][told], (f >= share)[falls][told])
        assert_array_equal(ph[~falls, 0] <= 5.5, True)
        assert np.isfinite(share[falls]).sum() > 9


def test_share_of_event_water_from_three_ancs():
    """Inverse of the mixing; equal waters tell nothing; a stray ANC shows as a share outside 0 to 1."""
    assert_allclose(event_share([80.0, 80.0, 80.0], [40.0, 10.0, 100.0], [-20.0, 80.0, -20.0]), [0.4, np.nan, -0.2])


# ---------------------------------------------------------------- event water


def loads(**given):
    """Deposition columns in meq/m2/yr as the event wants them."""
    return {f"{name}_deposition_eq_m2_yr": np.atleast_1d(value) * 1e-3 for name, value in given.items()}


def test_event_water_of_deposition():
    """A load of 40 meq/m2/yr in 0.8 m of rain is 50 µeq/L; free acid tells the ANC, with its sign turned."""
    found = event_from_deposition(loads(hydrogen=32.0, sulfur=40.0, nitrate=20.0, ammonium=12.0, chloride=8.0, base_cation=4.0),
                                  np.array([0.8]))
    expected = {"sulfate_eq_l": 50.0, "nitrate_eq_l": 25.0, "ammonium_eq_l": 15.0, "chloride_eq_l": 10.0, "anc_eq_l": -40.0,
                OTHER_CATIONS: 5.0, "sodium_eq_l": 8.59, "magnesium_eq_l": 1.96, "doc_mg_l": 0.0, "aluminum_mol_l": 0.0}
    for name, value in expected.items():
        assert_allclose(found[name] * 1e6, value, atol=1e-9, err_msg=name)


def test_event_water_of_ions_where_free_acid_is_missing():
    """Base cations and ammonium less acid anions: 5 + 15 - 50 - 25, and 0.7 % of the chloride for the sea salt."""
    given = {"sulfur": 40.0, "nitrate": 20.0, "ammonium": 12.0, "chloride": 8.0, "base_cation": 4.0}
    found = event_from_deposition(loads(**given), np.array([0.8]))
    assert_allclose(found["anc_eq_l"] * 1e6, 5.0 + 15.0 - 50.0 - 25.0 + 10.0 * (1.110 - 1.0), atol=1e-9)
    bare = event_from_deposition(loads(**{k: given[k] for k in ("sulfur", "nitrate", "ammonium")}), np.array([0.8]))
    assert_allclose(bare["anc_eq_l"] * 1e6, 15.0 - 75.0, atol=1e-9)
    dry = event_from_deposition(loads(**given), np.array([0.08]))
    assert_allclose(dry["anc_eq_l"], 10.0 * found["anc_eq_l"], rtol=1e-12)
    strong = event_from_deposition(loads(**given), np.array([0.8]), concentration=5.0)
    assert_allclose(strong["anc_eq_l"], 5.0 * found["anc_eq_l"], rtol=1e-12)


def test_event_water_that_deposition_does_not_tell():
    """Without sulfate, nitrate or ammonium there is no sum of ions; without precipitation there is nothing."""
    three = loads(sulfur=[40.0, np.nan, 40.0, 40.0], nitrate=[20.0] * 4, ammonium=[12.0, 12.0, np.nan, 12.0])
    found = event_from_deposition(three, np.array([0.8, 0.8, 0.8, 0.0]))
    assert_array_equal(np.isfinite(found["anc_eq_l"]), [True, False, False, False])
    assert np.isnan(found["chloride_eq_l"][3])
    with_acid = event_from_deposition(three | loads(hydrogen=[8.0] * 4), np.array([0.8] * 4))
    assert_allclose(with_acid["anc_eq_l"] * 1e6, -10.0, atol=1e-9)


def test_words_of_event_water_from_deposition():
    """Source of the ANC, what was not given, and the factor, row by row."""
    given = loads(hydrogen=[30.0, np.nan, np.nan], sulfur=[40.0] * 3, nitrate=[20.0] * 3, ammonium=[12.0, 12.0, np.nan])
    start = "deposition over precipitation, times 5; "
    assert deposition_words(given, 5.0).tolist() == [
        start + "ANC is minus the free acid; not given: chloride with its sea salt, base cations beyond sea salt",
        start + "ANC is the sum of the ions; not given: chloride with its sea salt, base cations beyond sea salt",
        start + "no ANC: ammonium not given"]
    whole = loads(**dict.fromkeys((n.removesuffix("_deposition_eq_m2_yr") for n in DEPOSITION), 1.0))
    assert deposition_words(whole).tolist() == ["deposition over precipitation; ANC is minus the free acid"]
    assert deposition_words({}).tolist() == ["deposition over precipitation; no ANC: sulfate, nitrate, ammonium not given"]


def test_carbon_of_water_at_air():
    """Its closed pH is its open one, and its carbon is what the shares of carbonic acid by hand make of the CO2 held."""
    rain = at_air({k: v for k, v in MELT.items() if k != "dic_mol_l"}, CONDITIONS, HRUSKA, AIR)
    found = solved(rain, CONDITIONS, HRUSKA, AIR)
    assert_allclose(found.ph_closed, found.ph_open, rtol=0, atol=1e-9)
    assert_allclose(rain["dic_mol_l"], AIR / HAND.shares(found.ph_open[0, 0])[0], rtol=1e-3)


def test_what_is_missing_of_an_event_water_is_completed():
    """ANC from pH, closed where carbon is known and at air where not; carbon from air; what is known stays."""
    nan = np.nan
    anc, ph, dic = (np.array([v]).T for v in ([-2e-5, -2e-5, nan, nan, nan], [5.0, 5.0, 5.0, 5.0, nan], [9e-5, nan, 9e-5, nan, nan]))
    five = conditions(np.full((5, 1), 10.0), 0.0, STRENGTH)
    balance = balance_of({"doc_mg_l": np.full((5, 1), 3.0), "aluminum_mol_l": np.full((5, 1), 1e-6)}, five, HRUSKA)
    whole, carbon = (v[:, 0] for v in completed(balance, anc=anc, ph=ph, dic=dic, co2=AIR))
    air = float(AIR[0, 0])
    assert_array_equal(whole[:2], [-2e-5, -2e-5])
    assert_allclose(whole[2:], [hand_anc(5.0, 3.0, 1e-6, dic=9e-5), hand_anc(5.0, 3.0, 1e-6, co2=air), nan], rtol=0, atol=5e-9)
    assert_array_equal(carbon[[0, 2]], [9e-5, 9e-5])
    assert_allclose(carbon[3], air / HAND.shares(5.0)[0], rtol=1e-3)
    assert np.isnan(carbon[4])
    assert air < carbon[1] < 1.1 * air
