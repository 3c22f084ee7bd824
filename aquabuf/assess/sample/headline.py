"""The figures of an assessed sample, from a solved water. One array per column of results.csv."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import exp10, worded
from aquabuf.assess.options import ALWAYS_ACID, Options
from aquabuf.chem.gases import pco2_of_air
from aquabuf.engine import buffer, precipitate
from aquabuf.engine.balance import fractions, protons_lost
from aquabuf.engine.conditions import FRESH_BELOW
from aquabuf.engine.state import State
from aquabuf.engine.water import Water
from aquabuf.units import convert, substances

__all__ = ["MARINE_FROM", "RANK_BY", "REGIMES", "TEST_ACID_EQ_L", "alkalinity_as_read", "headline", "threshold_column",
           "words_and_details"]

Array = NDArray[np.float64]

TEST_ACID_EQ_L = 5e-5  # 0.05 meq/L: of the order of an acid episode in a dilute lake; common practice, no source
BESIDE_RESULTS = ("flagged", "density_kg_l", "weak_cations_meq_l", "weak_anions_meq_l", "hydrogen_meq_l",
                  "hydroxide_meq_l")
REGIMES = ("fresh", "brackish", "marine")
MARINE_FROM = 30.0     # practical salinity; Venice system 1958 (recalled)
CCPP_AT_REST_MG_L = 1.0  # within this the water is called balanced; common practice, no source


def threshold_column(kind: str, ph: float, exchange: str, unit: str = "meq_l") -> str:
    """Column name of a tolerance, such as acid_to_ph_6_0_open_meq_l."""
    digits = f"{ph:g}" if ph % 1.0 else f"{ph:.1f}"
    return f"{kind}_to_ph_{digits.replace('.', '_')}{'_open' if exchange == 'open' else ''}_{unit}"


RANK_BY = threshold_column("acid", ALWAYS_ACID, "closed")  # what the worst-buffered samples are ranked by


def headline(water: Water, options: Options) -> dict[str, Array]:
    """Every figure that carries an interval, in the units of results.csv."""
    s = water.state
    air = pco2_of_air(options.air_co2_ppm, water.t_c, water.pressure_atm, water.salinity)
    at_air = water if options.exchange == "open" else water.at_pco2(air)
    pco2 = water.pco2_atm
    out = {
        "ph": water.ph,
        "ph_total": np.where(water.salinity >= FRESH_BELOW, water.ph_total, np.nan),
        **_alkalinity(water.alkalinity_eq_l),
        "dic_mmol_l": water.dic_mol_l * 1e3,
        "co2_mmol_l": pco2 * s.conditions.k0 * 1e3,
        "pco2_uatm": pco2 * 1e6,
        "pco2_air_ratio": pco2 / air,
        "ph_at_air": at_air.ph,
        "buffer_closed_meq_l_ph": water.buffer_intensity_eq_l("closed") * 1e3,
        "buffer_open_meq_l_ph": water.buffer_intensity_eq_l("open") * 1e3,
        "ph_drop_test_acid": water.ph - water.after_acid(TEST_ACID_EQ_L).ph,
    }
    for kind, sign, thresholds in (("acid", 1e3, options.acid_thresholds), ("base", -1e3, options.base_thresholds)):
        for ph in thresholds:
            out[threshold_column(kind, ph, "closed")] = sign * water.acid_to_ph_eq_l(ph)
            out[threshold_column(kind, ph, "open")] = sign * water.acid_to_ph_eq_l(ph, "open", pco2_atm=air)
    pairs = precipitate.pairing(s)
    out["si_calcite"] = precipitate.saturation_index(pairs, "calcite")
    potential, out["ph_at_saturation"] = precipitate.precipitation_potential(pairs, "calcite")
    out["ccpp_mg_l"] = potential * _mg_per_mol("calcium carbonate")
    return out


def _alkalinity(eq_l: Array) -> dict[str, Array]:
    """Alkalinity in the two units of results.csv."""
    return {"alkalinity_meq_l": eq_l * 1e3,
            "alkalinity_mg_l_caco3": convert(eq_l, "eq/L", "mg/L as CaCO3", "alkalinity")}


def alkalinity_as_read(measured_eq_l: Array, figures: dict[str, Array]) -> dict[str, Array]:
    """Alkalinity columns that follow the titration where there is one, whatever pair was solved."""
    return {name: np.where(np.isnan(v), figures[name], v) for name, v in _alkalinity(measured_eq_l).items()}


def _mg_per_mol(name: str) -> float:
    return substances()[name].molar_mass_g * 1e3


def words_and_details(water: Water, si_calcite: Array, ccpp_mg_l: Array) -> dict[str, NDArray]:
    """Figures without an interval: species, carrier, weakest buffering, aragonite, and the verdict on lime."""
    s = water.state
    carbonate = [f * s.dic * 1e3 for f in s.carbonate_fractions()]
    found, weakest = water.carrier(), water.weakest_buffering()
    aragonite_less = np.log10(precipitate.solubility_ratio(s, "calcite", "aragonite"))
    salinity = water.salinity
    return {
        "regime": worded(salinity.size, (salinity < FRESH_BELOW, "fresh"), (salinity >= MARINE_FROM, "marine"),
                         default="brackish"),
        "temperature_c": water.t_c,
        "salinity": salinity,
        "density_kg_l": water.density_kg_l,
        "alkalinity_used_meq_l": water.alkalinity_eq_l * 1e3,
        **_charges(water),
        "dic_umol_kg": water.dic_mol_l / water.density_kg_l * 1e6,
        "ionic_strength_mol_l": water.ionic_strength_mol_l,
        "bicarbonate_mmol_l": carbonate[1],
        "carbonate_mmol_l": carbonate[2],
        "carrier": found.label.astype(object),
        "carrier_share": found.share,
        "carrier_pka": found.pka,
        "carrier_base_acid_ratio": found.base_acid_ratio,
        "carrier_in_range": worded(salinity.size, (np.isfinite(found.pka), "no"), (found.in_range, "yes")),
        "pairs_in_range": _pairs_in_range(s),
        "carrier_acid_left_meq_l": found.acid_left * 1e3,
        "carrier_base_left_meq_l": found.base_left * 1e3,
        "weakest_ph": weakest.ph,
        "weakest_distance_ph": weakest.distance,
        "weakest_buffer_meq_l_ph": weakest.intensity * 1e3,
        "si_aragonite": si_calcite + aragonite_less,
        "saturation_ratio_calcite": exp10(si_calcite),
        "ccpp_words": ccpp_in_words(ccpp_mg_l),
    }


def _charges(water: Water) -> dict[str, Array]:
    """Charge of the weak acids beside carbonate, and of the water itself. [meq/L]"""
    s, c = water.state, water.state.conditions
    plus, minus = np.zeros(s.h.shape), np.zeros(s.h.shape)
    for dissolved, family in zip(s.acids, s.families, strict=True):
        lost = protons_lost(fractions(family.k, 1.0 / s.h))
        charge = dissolved.total * (dissolved.acid.charge_full - lost)
        plus += np.maximum(charge, 0.0)
        minus -= np.minimum(charge, 0.0)
    return {"weak_cations_meq_l": plus * 1e3, "weak_anions_meq_l": minus * 1e3,
            "hydrogen_meq_l": c.c_h * s.h * 1e3, "hydroxide_meq_l": c.c_oh / s.h * 1e3}


def _pairs_in_range(s: State) -> NDArray[np.object_]:
    """Labels of the pairs present whose effective range holds the pH, joined by semicolons."""
    out = np.full(s.h.shape, "", dtype=object)
    for share in buffer.pair_shares(s):
        act = share.in_range & (share.intensity > 0.0)
        out[act] = np.where(out[act] == "", share.label, out[act] + "; " + share.label)
    return out


def ccpp_in_words(ccpp_mg_l: Array) -> NDArray[np.object_]:
    """What the precipitation potential means, in words; "" where it is not known."""
    return worded(ccpp_mg_l.size, (ccpp_mg_l > CCPP_AT_REST_MG_L, "would deposit calcium carbonate"),
                  (ccpp_mg_l < -CCPP_AT_REST_MG_L, "would dissolve calcium carbonate"),
                  (np.abs(ccpp_mg_l) <= CCPP_AT_REST_MG_L, "close to balance with calcite"))
