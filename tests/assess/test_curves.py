"""Curves of the worst-buffered samples against the titration of a bicarbonate water worked out by hand."""

import numpy as np
import pytest
from carbonate_by_hand import BareWater
from numpy.testing import assert_allclose
from sample_tables import assessed

from aquabuf.assess.options import Options
from aquabuf.assess.sample.curves import CURVE_COLUMNS, curve_rows, worst
from aquabuf.assess.sample.headline import RANK_BY

ALK = 1e-3
HAND = BareWater(25.0, ALK)
DIC = HAND.dic(7.5, ALK)
WATER = {"sample_id": "w", "temperature_c": 25.0, "ph": 7.5, "alkalinity_eq_l": ALK}
AIR_CO2 = HAND.k0 * 425e-6 * (1.0 - 0.031256)  # 23.756 mmHg of water vapor at 25 °C, CRC Handbook


@pytest.fixture(scope="module")
def curve():
    """The curve of the one water, by pH."""
    return curve_rows(assessed(WATER).inputs, Options()).set_index("ph")


@pytest.mark.parametrize("ph", [3.5, 4.5, 6.0, 7.5, 8.3, 10.0, 11.0])
def test_curve_is_the_titration_by_hand(curve, ph):
    """Acid added is the alkalinity lost, carbon kept or CO2 held; the slope is the buffer intensity there (0.4 %)."""
    expected = {"acid_added_meq_l": 1e3 * (ALK - HAND.alkalinity(ph, DIC)), "buffer_closed_meq_l_ph": 1e3 * HAND.buffer(ph, DIC),
                "acid_added_open_meq_l": 1e3 * (ALK - HAND.alkalinity_at_co2(ph, AIR_CO2)),
                "buffer_open_meq_l_ph": 1e3 * HAND.buffer(ph, AIR_CO2 / HAND.shares(ph)[0], "open")}
    row = curve.loc[ph]
    for name, value in expected.items():
        assert_allclose(row[name], value, rtol=0.008, atol=0.003, err_msg=name)


def test_curve_has_steps_of_a_tenth(curve):
    """From pH 3.5 to 11, both ends included; no acid at the sample's own pH."""
    assert_allclose(curve.index, np.linspace(3.5, 11.0, 76), rtol=0, atol=1e-9)
    assert_allclose(curve.loc[7.5, "acid_added_meq_l"], 0.0, rtol=0, atol=1e-9)
    assert (np.diff(curve["acid_added_meq_l"]) < 0.0).all()


def test_curve_of_an_open_run_starts_from_the_water_at_air():
    """Brought to air first: then no acid is needed at the pH that the open bicarbonate water has by hand."""
    table = curve_rows(assessed(WATER, exchange="open").inputs, Options(exchange="open"))
    at_zero = np.interp(0.0, table["acid_added_meq_l"].to_numpy()[::-1], table["ph"].to_numpy()[::-1])
    assert_allclose(at_zero, HAND.ph_at_co2(ALK, AIR_CO2), rtol=0, atol=0.01)


def test_curves_keep_the_order_of_the_samples():
    """Sample by sample in the order given, whatever pair each was solved from."""
    rows = [WATER | {"sample_id": "a"}, {"sample_id": "b", "temperature_c": 5.0, "alkalinity_eq_l": 1e-3, "dic_mol_l": 1e-3},
            WATER | {"sample_id": "c", "ph": 6.5}]
    table = curve_rows(assessed(*rows).inputs, Options())
    assert tuple(table.columns) == CURVE_COLUMNS
    assert table["sample_id"].drop_duplicates().tolist() == ["a", "b", "c"]
    assert table.groupby("sample_id").size().tolist() == [76, 76, 76]


def test_curves_of_nothing():
    """No sample, no row, the same columns."""
    inputs = assessed(WATER).inputs.take(np.array([], dtype=int))
    assert tuple(curve_rows(inputs, Options()).columns) == CURVE_COLUMNS


def test_samples_of_two_pieces_are_joined():
    """A value that one piece lacks is missing there; each sample keeps its curve."""
    a, b = assessed(WATER).inputs, assessed({"sample_id": "b", "temperature_c": 5.0, "ph": 7.0, "dic_mol_l": 1e-3}).inputs
    both = curve_rows(a.joined(b), Options())
    alone = [curve_rows(x, Options()) for x in (a, b)]
    assert_allclose(both["acid_added_meq_l"], np.concatenate([x["acid_added_meq_l"] for x in alone]), rtol=1e-9, atol=1e-12)
    assert both["sample_id"].drop_duplicates().tolist() == ["w", "b"]


def test_worst_first():
    """Least acid to pH 6 first; ties in input order; unknown last."""
    assert worst(np.array([3.0, -1.0, np.nan, 2.0, -1.0]), 4).tolist() == [1, 4, 3, 0]
    assert RANK_BY == "acid_to_ph_6_0_meq_l"
