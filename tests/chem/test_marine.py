"""Seawater constants: scale conversions, independent data sets and the seam to fresh water."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from published_rows import read_rows

from aquabuf.chem import fresh, marine, seasalt

SCALE_ROWS = read_rows("ph_scales")


def _free_to_total(t_c, salinity):
    sulfate = seasalt.sulfate_of_seawater(salinity)
    return seasalt.free_to_total_scale(sulfate, marine.k_bisulfate(t_c, salinity))


def _free_to_seawater(t_c, salinity):
    return seasalt.free_to_seawater_scale(
        seasalt.sulfate_of_seawater(salinity), marine.k_bisulfate(t_c, salinity),
        seasalt.fluoride_of_seawater(salinity), marine.k_fluoride(t_c, salinity),
    )


@pytest.mark.parametrize("row", SCALE_ROWS, ids=lambda r: f"S={r['salinity']}")
def test_distance_of_the_scales_at_25_degrees(row):
    """pHF - pHT and pHT - pHSWS of the definitions; last printed digit."""
    to_total, to_sea = _free_to_total(25.0, float(row["salinity"])), _free_to_seawater(25.0, float(row["salinity"]))
    assert_allclose(np.log10(to_total), float(row["free_minus_total"]), rtol=0, atol=5.5e-6)
    assert_allclose(np.log10(to_sea / to_total), float(row["total_minus_seawater"]), rtol=0, atol=5.5e-6)


def test_lueker_on_the_seawater_scale_is_dickson_millero():
    """Two refits of the same measurements, on different scales, agree after conversion.

    Dickson & Millero 1987 (printed, seawater scale): pK1 = 3670.7/T - 62.008 + 9.7944 ln T - 0.0118 S + 0.000116 S^2,
    pK2 = 1394.7/T + 4.777 - 0.0184 S + 0.000118 S^2; tolerance 0.003 and 0.007 over the shared range.
    A conversion in the wrong direction is off by 0.02.
    """
    t_c, salinity = np.meshgrid(np.linspace(2.0, 35.0, 12), np.linspace(20.0, 40.0, 5))
    t = t_c + 273.15
    pk1 = 3670.7 / t - 62.008 + 9.7944 * np.log(t) - 0.0118 * salinity + 0.000116 * salinity**2
    pk2 = 1394.7 / t + 4.777 - 0.0184 * salinity + 0.000118 * salinity**2
    factor = _free_to_seawater(t_c, salinity) / _free_to_total(t_c, salinity)
    assert_allclose(-np.log10(marine.k1_lueker(t_c, salinity) * factor), pk1, rtol=0, atol=0.003)
    assert_allclose(-np.log10(marine.k2_lueker(t_c, salinity) * factor), pk2, rtol=0, atol=0.007)


def test_millero_agrees_with_lueker_in_sea_water():
    """Millero 2006 against Lueker 2000 on one scale, within two of Millero's standard deviations (0.0054, 0.011).

    Open-ocean salinities, where both fits have their data; at salinity 43 the second constants part by 0.034.
    """
    t_c, salinity = np.meshgrid(np.linspace(2.0, 35.0, 12), np.linspace(30.0, 38.0, 5))
    factor = _free_to_seawater(t_c, salinity) / _free_to_total(t_c, salinity)
    for lueker, millero, sigma in ((marine.k1_lueker, marine.k1_millero, 0.0054),
                                   (marine.k2_lueker, marine.k2_millero, 0.011)):
        difference = np.log10(lueker(t_c, salinity) * factor / millero(t_c, salinity))
        assert_allclose(difference, 0.0, rtol=0, atol=2.0 * sigma)


@pytest.mark.parametrize(("t_c", "distance"), [(25.0, 0.151), (2.0, 0.083)])
def test_meter_scale_against_two_fits_of_one_data_set(t_c, distance):
    """pH(meter) - pH(total) at salinity 35 is the gap between the same constants on both scales.

    The mean of pK1 and pK2, meter scale minus total scale, is 0.153/0.149 at 25 °C and 0.088/0.078 at 2 °C
    (Mehrbach et al. 1973 minus Lueker et al. 2000). The activity factor is good to 0.02.
    """
    factor = seasalt.hydrogen_activity_takahashi(t_c, 35.0) * _free_to_seawater(t_c, 35.0) / _free_to_total(t_c, 35.0)
    assert_allclose(-np.log10(factor), distance, rtol=0, atol=0.02)


@pytest.mark.parametrize(("sea", "land", "atol"), [
    (marine.k1_millero, fresh.k1_carbonic, 0.0015), (marine.k2_millero, fresh.k2_carbonic, 0.004),
    (marine.k_water_sea, fresh.k_water, 0.008), (marine.k0_co2, fresh.k_henry_co2, 0.0022),
], ids=["k1", "k2", "kw", "k0"])
def test_sea_water_without_salt_is_fresh_water(sea, land, atol):
    """At zero salinity the marine equations join independent fresh-water ones (Plummer & Busenberg, IAPWS).

    For water the tolerance is what published formulas of pKw differ by at 0 °C.
    """
    t_c = np.linspace(0.0, 25.0, 6)
    assert_allclose(np.log10(sea(t_c, 0.0)), np.log10(land(t_c)), rtol=0, atol=atol)


def test_calcite_joins_and_aragonite_steps_at_zero_salinity():
    """Mucci's calcite line starts on Plummer & Busenberg exactly; his aragonite line 0.032 above (both printed)."""
    t_c = np.linspace(5.0, 40.0, 8)
    assert_allclose(np.log10(marine.ksp_calcite_sea(t_c, 0.0) / fresh.ksp_calcite(t_c)), 0.0, rtol=0, atol=1e-9)
    step = np.log10(marine.ksp_aragonite_sea(t_c, 0.0) / fresh.ksp_aragonite(t_c))
    assert_allclose(step, 171.9773 - 171.945, rtol=0, atol=1e-9)


def test_two_fluoride_constants_agree_on_the_total_scale():
    """Dickson & Riley 1979 times 1 + TS/KS against Perez & Fraga 1987, S 35, 25 °C: DOE -5.80, Guide -6.09.

    The two data sets differ by 0.29 in ln K; nearer agreement would mean a scale factor applied twice.
    """
    on_total = np.log(marine.k_fluoride(25.0, 35.0) * _free_to_total(25.0, 35.0))
    other = np.log(marine.k_fluoride_perez_fraga(25.0, 35.0))
    assert_allclose(on_total - other, 6.09 - 5.80, rtol=0, atol=0.0105)


def test_conservative_totals_are_proportional_to_salinity():
    """Constant proportions of sea salt: at half the salinity half of each total, none without salt."""
    for total in (seasalt.boron_lee, seasalt.boron_uppstrom, seasalt.sulfate_of_seawater,
                  seasalt.fluoride_of_seawater, seasalt.calcium_of_seawater):
        assert_allclose(total([0.0, 17.5]), [0.0, 0.5 * total(35.0)], rtol=1e-14)


def test_ionic_strength_is_that_of_the_salts():
    """Half the sum of m z^2 over the major ions of standard sea water at salinity 35, per kg of water.

    Reference composition in mmol per kg of solution (recalled): Na 469, Mg 52.8, Ca 10.3, K 10.2, Sr 0.1, Cl 546,
    SO4 28.2, HCO3 2.0 with CO3 0.2, Br 0.8, F 0.1.
    """
    singly, doubly = 469.0 + 10.2 + 546.0 + 2.0 + 0.8 + 0.1, 52.8 + 10.3 + 0.1 + 28.2 + 0.2
    expected = 0.5e-3 * (singly + 4.0 * doubly) / 0.965
    assert_allclose(seasalt.ionic_strength_seawater(35.0), expected, rtol=0.005)
