"""How much acid a lake can take: volumes, loads and years by hand arithmetic and mass balances written here."""

import csv
import os
from pathlib import Path

import numpy as np
import pytest
from made_lakes import lakes_of
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.lake.capacity import H2SO4_KG_PER_KEQ, deposition, hydrology, keq, years_left
from aquabuf.assess.lake.inputs import Lakes

DATA = os.environ.get("AQUABUF_OPEN_DATA", "")
NAN = float("nan")
POND = {"runoff_m_yr": 0.6, "lake_area_m2": 2e5, "watershed_area_m2": 2e6}
LOADS = {"sulfur": 0.040, "nitrate": 0.020, "ammonium": 0.015, "base_cation": 0.010}  # eq/m2/yr


def water(*rows):
    """Volume, residence time, outflow of the lakes, and where the volume is from."""
    found = hydrology(lakes_of(*rows))
    return (*(v[:, 0] for v in (found.volume_m3, found.residence_yr, found.outflow_m3_yr)), list(found.volume_from))


def fallen(*rows, **options):
    """Deposition of lakes from their loads by short name."""
    named = [{f"{name}_deposition_eq_m2_yr": v for name, v in row.items()} for row in rows]
    return deposition(lakes_of(*named), **options)


# ------------------------------------------------------------------ water


def test_volume_given_before_depth_before_time():
    """9e5 m3 as given; 4 m times 2e5 m2; 0.6 m/yr from 2e6 m2 through 0.7 yr."""
    tau = POND | {"residence_time_yr": 0.7}
    depth = tau | {"mean_depth_m": 4.0}
    volume, residence, outflow, words = water(depth | {"lake_volume_m3": 9e5}, depth, tau, POND)
    assert_allclose(volume, [9e5, 8e5, 8.4e5, NAN], rtol=1e-12)
    assert_allclose(residence, [0.7, 0.7, 0.7, NAN], rtol=1e-12)
    assert_allclose(outflow, 1.2e6, rtol=1e-12)
    assert words == ["given", "mean depth and area", "runoff and residence time", ""]


def test_outflow_is_runoff_of_land_and_rain_on_the_lake():
    """0.6 from 1.8e6 m2 of land and 1.0 on 2e5 m2 of lake; runoff all over where rain or lake is not given.

    A lake as large as its catchment has no land; one larger than it is an error, and has no outflow.
    """
    rain = POND | {"precipitation_m_yr": 1.0}
    _, _, outflow, _ = water(rain, POND, {k: v for k, v in rain.items() if k != "lake_area_m2"},
                             rain | {"watershed_area_m2": 2e5}, rain | {"watershed_area_m2": 1e5})
    assert_allclose(outflow, [0.6 * 1.8e6 + 1.0 * 2e5, 0.6 * 2e6, 0.6 * 2e6, 2e5, NAN], rtol=1e-12)


def test_residence_time_of_volume_and_outflow():
    """8e5 m3 over 1.2e6 m3/yr; as given where it is."""
    row = POND | {"mean_depth_m": 4.0}
    _, residence, _, _ = water(row, row | {"residence_time_yr": 3.0})
    assert_allclose(residence, [8e5 / 1.2e6, 3.0], rtol=1e-12)


@pytest.mark.parametrize(("row", "known"), [
    ({"mean_depth_m": 4.0, "runoff_m_yr": 0.6, "watershed_area_m2": 2e6}, (False, False, True)),   # no lake area
    ({"residence_time_yr": 0.7, "runoff_m_yr": 0.6, "lake_area_m2": 2e5}, (False, True, False)),   # no catchment
    ({"residence_time_yr": 0.7, "watershed_area_m2": 2e6, "lake_area_m2": 2e5}, (False, True, False)),  # no runoff
    ({"lake_volume_m3": 9e5}, (True, False, False)),
    ({}, (False, False, False)),
])
def test_what_is_missing_is_nan_and_nothing_else(row, known):
    """Volume, residence time and outflow each need their own; the lake beside is not touched."""
    whole = POND | {"residence_time_yr": 0.7, "mean_depth_m": 4.0}
    found = water(row, whole)
    assert tuple(np.isfinite(v[0]) for v in found[:3]) == known
    assert_allclose([v[1] for v in found[:3]], [8e5, 0.7, 1.2e6], rtol=1e-12)
    assert found[3] == ["given" if known[0] else "", "mean depth and area"]


def test_draws_stay_beside_their_lake():
    """Values of shape (lakes, draws): each draw by itself; the words are one per lake."""
    single = lakes_of({}, {})
    values = {"mean_depth_m": np.array([[4.0, 5.0, 6.0], [1.0, 2.0, NAN]]), "lake_area_m2": np.array([[2e5], [1e5]])}
    found = hydrology(Lakes(values, single.setting, single.organic, np.ones((1, 3))))
    assert_allclose(found.volume_m3, [[8e5, 1e6, 1.2e6], [1e5, 2e5, NAN]], rtol=1e-12)
    assert list(found.volume_from) == ["mean depth and area"] * 2


@pytest.mark.open_data
@pytest.mark.skipif(not DATA, reason="AQUABUF_OPEN_DATA names no folder")
def test_residence_times_of_a_survey():
    """The agency's residence times are volume over (runoff from land + precipitation on the lake): all drainage lakes.

    Eastern Lake Survey 1984 (US EPA). The file prints volumes to 0.001 hm3 and areas to 0.1 ha.
    """
    with (Path(DATA) / "nsws_lakes_1984.csv").open(encoding="utf-8", newline="") as handle:
        rows = list(csv.DictReader(handle))
    names = {"runoff_m_yr": ("runoff_m_yr", 1.0), "precip_m_yr": ("precipitation_m_yr", 1.0),
             "lake_area_ha": ("lake_area_m2", 1e4), "watershed_ha": ("watershed_area_m2", 1e4),
             "lake_volume_1e6_m3": ("lake_volume_m3", 1e6)}
    lakes = lakes_of(*({ours: float(row[theirs] or "nan") * scale for theirs,
                        (ours, scale) in names.items()} for row in rows))
    printed = np.array([float(row["residence_time_yr"] or "nan") for row in rows])
    found = hydrology(lakes)
    known = np.isfinite(printed) & np.isfinite(found.residence_yr[:, 0])
    assert known.sum() > 800
    off = np.abs(found.residence_yr[known, 0] / printed[known] - 1.0)
    rounding = 0.0005e6 / found.volume_m3[known, 0] + 0.5e4 / lakes.get("watershed_area_m2")[known, 0]
    assert (off <= rounding + 2e-3).mean() > 0.99


# ------------------------------------------------------------------ acid


def test_equivalents_of_a_lake():
    """20 µeq/L in 9.6e5 m3 are 20e-6 x 9.6e8 L = 19 200 eq; H2SO4 has 98.07 g/mol and two equivalents."""
    amount = keq(np.array([[20e-6], [-20e-6], [NAN]]), np.array([[9.6e5], [9.6e5], [1e6]]))
    assert_allclose(amount[:, 0], [19.2, -19.2, NAN], rtol=1e-12)
    assert_allclose(H2SO4_KG_PER_KEQ, 98.07 / 2.0, rtol=0, atol=0.005)


@pytest.mark.parametrize("gone", [(), *((name,) for name in LOADS), ("nitrate", "ammonium"),
                                  ("nitrate", "ammonium", "base_cation")])
def test_net_acid_counts_what_is_given(gone):
    """Sulfur, nitrate and ammonium less base cations, of those given; nothing without sulfur; and told in words."""
    row = {name: v for name, v in LOADS.items() if name not in gone}
    found = fallen(row, LOADS)
    sign = {"sulfur": 1, "nitrate": 1, "ammonium": 1, "base_cation": -1}
    net = sum(sign[name] * v for name, v in row.items()) if "sulfur" in row else NAN
    assert_allclose(found.net_acid[:, 0], [net, 0.065], rtol=1e-12)
    nitrogen = sum(row.get(name, 0.0) for name in ("nitrate", "ammonium")) if {"nitrate",
                                                                               "ammonium"} & set(row) else NAN
    assert_allclose(found.nitrogen[:, 0], [nitrogen, 0.035], rtol=1e-12)
    words = {"sulfur": "sulfur", "nitrate": " + nitrate", "ammonium": " + ammonium", "base_cation": " - base cations"}
    told = "".join(words[name] for name in row) if "sulfur" in row else ""
    assert list(found.counted) == [told, "sulfur + nitrate + ammonium - base cations"]


def test_sea_salt_of_the_sulfur():
    """0.103 of the chloride (ICP Waters) where that is given, unless sea salt is left in; negative too."""
    rows = ({"sulfur": 0.040, "chloride": 0.100}, {"sulfur": 0.040}, {"sulfur": 0.005, "chloride": 0.100})
    assert_allclose(fallen(*rows).sulfur[:, 0], [0.0297, 0.040, -0.0053], rtol=1e-12)
    assert_allclose(fallen(*rows).net_acid[:, 0], [0.0297, 0.040, -0.0053], rtol=1e-12)
    assert_allclose(fallen(*rows, keep_sea_salt=True).sulfur[:, 0], [0.040, 0.040, 0.005], rtol=1e-12)


# ------------------------------------------------------------------ years


LAKE = {"runoff_m_yr": 0.6, "watershed_area_m2": 2e6, "lake_area_m2": 2e5, "lake_volume_m3": 9.6e5}


def years(anc_ueq, net_acid, *rows):
    """Years by the catchment and by the lake alone."""
    lakes = lakes_of(*rows)
    shape = (len(rows), 1)
    found = years_left(np.full(shape, anc_ueq * 1e-6), lakes, hydrology(lakes), np.full(shape, net_acid))
    return [v[:, 0] for v in found]


def test_years_close_the_mass_balance():
    """Acid that falls in that time is the ANC of the lake: load x area x years = ANC x volume."""
    catchment, surface = years(30.0, 0.065, LAKE)
    anc_eq = 30e-6 * 9.6e5 * 1e3
    assert_allclose(0.065 * 2e6 * catchment, anc_eq, rtol=1e-12)
    assert_allclose(0.065 * 2e5 * surface, anc_eq, rtol=1e-12)


def test_years_without_areas():
    """A square meter of catchment holds runoff x residence time of lake water: 600 L/yr x 0.8 yr x 30 µeq/L over
    0.065 eq/yr.

    The same as through volume and area where the residence time is volume over runoff x area.
    """
    bare = {"runoff_m_yr": 0.6, "residence_time_yr": 0.8}
    catchment, surface = years(30.0, 0.065, bare,
                               {"runoff_m_yr": 0.6, "watershed_area_m2": 2e6, "lake_volume_m3": 9.6e5})
    assert_allclose(catchment, 600.0 * 0.8 * 30e-6 / 0.065, rtol=1e-12)
    assert_array_equal(np.isnan(surface), [True, True])


@pytest.mark.parametrize("load", [0.0, -0.01, NAN])
def test_no_years_where_no_net_acid_falls(load):
    """Neither a zero nor a negative load ever uses the ANC up, and an unknown one tells nothing."""
    assert np.isnan(years(30.0, load, LAKE)).all()


def test_no_years_left_below_the_limit():
    """0 where the limit is passed already, not a negative time; nan where ANC is missing."""
    assert_array_equal(np.concatenate(years(-5.0, 0.065, LAKE)), [0.0, 0.0])
    assert np.isnan(years(NAN, 0.065, LAKE)).all()


@pytest.mark.parametrize(("gone", "known"), [("watershed_area_m2", (False, True)), ("lake_area_m2", (True, False)),
                                             ("lake_volume_m3", (False, False)), ("runoff_m_yr", (True, True))])
def test_years_need_their_own_readings(gone, known):
    """Each of the two times goes without the other's area; with volume and catchment, runoff is not needed."""
    found = years(30.0, 0.065, {k: v for k, v in LAKE.items() if k != gone})
    assert tuple(np.isfinite(v).all() for v in found) == known
