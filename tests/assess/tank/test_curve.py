"""Measured titration curves: both ways, thinning, tables for mixtures, several samples, and how close points must be."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from scipy.optimize import brentq

from aquabuf.assess.tank.curve import MeasuredCurve, band, held_table, measured, resolution, strength_of
from aquabuf.engine.readout import GRID_PH, Readout
from aquabuf.errors import InputError
from aquabuf.readings.curve_points import CurvePoints

# ideal constants of facts table 3.2 (25 °C, recalled there): Kw = 1e-14, acetic 4.756
KW, PK = 1e-14, 4.756


def water(ph):
    """[OH-] - [H+]."""
    return KW * 10.0 ** np.asarray(ph) - 10.0 ** -np.asarray(ph)


def acetate(ph, mol=0.1):
    """Base held by acetic acid."""
    return mol / (1.0 + 10.0 ** (PK - np.asarray(ph)))


RAW = brentq(lambda p: acetate(p) + water(p), 1.0, 7.0)  # 2.881 in the facts table
STEPS = np.concatenate([[2.0, 2.5, RAW], np.arange(3.2, 12.05, 0.4)])


def acetic(ph=STEPS, mol=0.1, strong=0.0, name="acetic"):
    """Curve of acetic acid (and strong acid) that is not thinned."""
    return MeasuredCurve(name, strong + acetate(ph, mol) + water(ph), ph)


def thinned(normality=1.0, ph=STEPS):
    """Curve of 0.1 M acetic acid with titrant of this strength: B = acetate + w (1 + |B| / N), solved for B."""
    up = ph >= RAW
    base = (acetate(ph) + water(ph)) / (1.0 - np.where(up, 1.0, -1.0) * water(ph) / normality)
    base = np.where(np.abs(base) < 1e-12, 0.0, base)
    return MeasuredCurve("acetic", base, ph, 25.0, 1.0 / (1.0 + np.abs(base) / normality))


def test_points_are_met_and_both_ways_agree():
    """Base at a point's pH is its own, pH at a point's base too, and one way undoes the other in between."""
    curve = acetic()
    assert_allclose(curve.base_at(STEPS), curve.base_eq_l, rtol=0, atol=1e-15)
    assert_allclose(curve.ph_at(curve.base_eq_l), STEPS, rtol=0, atol=1e-12)
    assert_allclose(curve.raw_ph, 2.881, atol=6e-4)  # facts table 3.2
    ph = np.linspace(2.0, STEPS[-1], 500)
    assert_allclose(curve.ph_at(curve.base_at(ph)), ph, rtol=0, atol=1e-8)
    assert (np.diff(curve.base_at(ph)) > 0.0).all()


def test_nothing_outside_unless_asked_for():
    """Outside the points is nan, row by row; tails follow strong acid and base in water and are told."""
    curve = acetic().with_water(1.0, KW)
    assert_array_equal(np.isnan(curve.base_at([1.9, 2.5, 13.0, np.nan])), [True, False, True, True])
    assert_array_equal(np.isnan(curve.ph_at([-5.0, 0.05, 5.0])), [True, False, True])
    assert_array_equal(np.isnan(curve.buffer_at([1.9, 2.5])), [True, False])
    long = curve.with_tails(0.5, 13.5)
    assert_allclose(long.base_at([1.0, 13.0]) - long.base_at([STEPS[0], STEPS[-1]]),
                    water([1.0, 13.0]) - water([STEPS[0], STEPS[-1]]), rtol=1e-12)
    assert_allclose(long.ph_at(long.base_at([1.0, 13.0])), [1.0, 13.0], atol=1e-10)
    assert_allclose(long.buffer_at([1.0, 13.0]), np.log(10.0) * 0.1, rtol=1e-6)
    assert np.isnan(long.base_at(0.4))
    assert "measured from pH 2.00 to 12.00; beyond, only strong acid and base" in long.notes[-1]
    with pytest.raises(InputError, match=r"only when water is told apart; found no constants.*Call with_water first"):
        acetic().with_tails()


def test_buffer_is_the_slope():
    """Central differences of base, and the closed form of a weak acid (Van Slyke 1922) at its pK."""
    for curve in (acetic(), acetic().with_water(1.0, KW)):
        ph = np.linspace(2.2, 11.5, 94)
        slope = (curve.base_at(ph + 1e-5) - curve.base_at(ph - 1e-5)) / 2e-5
        assert_allclose(curve.buffer_at(ph), slope, rtol=1e-4, atol=1e-9)
    fine = acetic(np.arange(2.0, 12.0, 0.1)).with_water(1.0, KW)
    assert_allclose(fine.buffer_at(PK), np.log(10.0) * (0.1 / 4.0 + 10.0**-PK), rtol=5e-3)


def test_thinning_is_taken_out():
    """The curve of the waste that was not thinned, from one that was to half its strength."""
    curve = thinned(0.1)
    assert curve.dilution.min() < 0.55
    ph = np.linspace(2.0, 11.9, 300)
    true = acetate(ph) + water(ph)
    found = curve.with_water(1.0, KW)
    assert_allclose(found.base_at(ph), true, rtol=0, atol=2e-4)
    assert_allclose(found.base_at(STEPS[:-1]), acetate(STEPS[:-1]) + water(STEPS[:-1]), rtol=0, atol=1e-9)
    assert np.abs(curve.base_at(ph) - true).max() > 2e-3  # not so before
    assert "thinning by the titrant, down to 4" in found.notes[0]
    assert found.with_water(1.0, KW) is found


def test_held_table_gives_back_the_raw_waste():
    """The readout of the table has the raw pH, and the demands of facts table 3.2 (to pH 6, 7, 8, 9, printed to 1e-6)."""
    table, base, told = held_table(thinned(ph=np.concatenate([[2.5, RAW], np.arange(3.0, 12.05, 0.1)])), 1.0, KW)
    readout = Readout(1.0, KW, table[None])
    assert_allclose(readout.ph(base, [1.0]), RAW, rtol=0, atol=1e-6)
    demand = [readout.base_at(ph, [1.0]) - base for ph in (6.0, 7.0, 8.0, 9.0)]
    assert_allclose(demand, [0.094605, 0.099433, 0.099944, 0.100004], rtol=0, atol=1e-5)
    assert any("thinning" in words for words in told)
    assert "beyond, only strong acid and base" in told[-1]


def test_held_table_of_a_thinned_waste():
    """One part of waste in ten of water: base to reach a pH is a tenth of what acids hold, and water."""
    table, base, _ = held_table(acetic(np.concatenate([[2.5, RAW], np.arange(3.0, 12.05, 0.1)])), 1.0, KW)
    readout = Readout(1.0, KW, table[None])
    true = brentq(lambda p: acetate(p, 0.01) + water(p), 1.0, 7.0)
    assert_allclose(readout.ph(0.1 * base, [0.1]), true, rtol=0, atol=2e-3)
    for ph in (4.0, 6.0, 9.0, 11.0):
        assert_allclose(readout.base_at(ph, [0.1]) - 0.1 * base, acetate(ph, 0.01) + water(ph), rtol=2e-3)


def test_held_base_counts_from_the_zero_level():
    """Base of the raw waste is the acid it takes to pH 4.5; for bicarbonate-free strong base, its normality."""
    ph = np.concatenate([np.arange(3.0, 11.95, 0.25), [12.0]])
    strong = MeasuredCurve("NaOH", water(ph) - 0.01, ph)  # 0.01 N NaOH: pH 12
    table, base, _ = held_table(strong, 1.0, KW)
    assert_allclose(base, 0.01, rtol=0, atol=1e-8)
    assert_allclose(table, 0.0, rtol=0, atol=1e-12)
    table, base, _ = held_table(acetic(), 1.0, KW)
    assert_allclose(np.interp(4.5, GRID_PH, table), 0.0, atol=1e-12)
    assert_allclose(base, -acetate(4.5), atol=2e-4)
    assert (np.diff(table) >= 0.0).all()
    assert_allclose(table[GRID_PH < 2.0], table[0])
    assert_allclose(table[GRID_PH > 12.0], table[-1])


def test_steep_part_is_exact_where_water_is():
    """Two points far apart on the steep part of a strong acid are enough once water is told apart."""
    ph = np.array([2.0, 2.2, 2.6, 3.4, 10.6, 11.0])
    curve = MeasuredCurve("HCl", 0.01 + water(ph), ph)
    inside = np.linspace(4.0, 10.0, 25)
    true = 0.01 + water(inside)
    assert_allclose(curve.with_water(1.0, KW).base_at(inside), true, rtol=0, atol=1e-10)
    assert np.abs(curve.base_at(inside) - true).max() > 1e-5  # guessed between the points before


def test_flatter_than_water_is_floored_and_told():
    """A high electrode reading at the alkaline end asks for a buffer below zero: floored, with pH and share."""
    ph = np.concatenate([[2.0], np.arange(3.0, 12.05, 0.5)])
    read = ph + np.where(ph >= 11.5, 0.15, 0.0)
    curve = MeasuredCurve("HCl", 0.01 + water(ph), read)
    told = curve.with_water(1.0, KW)
    held = told.base_eq_l - water(read)
    assert (np.diff(held) >= -1e-15).all()
    assert held[-1] - held[0] < 1e-12  # all of it is water
    words = told.notes[0]
    worst = water(12.15) - water(12.0)  # what the electrode feigns at the end
    assert "from pH 11.65 to 12.15 the curve is flatter than water alone can be" in words
    assert f"{worst:.2g} eq/L" in words
    assert "check the electrode" in words
    assert_allclose(told.base_at(told.ph_at(0.0)), 0.0, atol=1e-12)
    assert acetic().with_water(1.0, KW).notes == ()
    both = MeasuredCurve("HCl", 0.01 + water(ph), read - np.where(ph < 2.5, 0.2, 0.0)).with_water(1.0, KW)
    assert "from pH 1.80 to 1.80 and from pH 11.65 to 12.15 the curve" in both.notes[0]
    scatter = ph + 0.01 * np.where(np.arange(ph.size) % 2, 1.0, -1.0)  # within reading errors: evened out without words
    assert MeasuredCurve("HCl", 0.01 + water(ph), scatter).with_water(1.0, KW).notes == ()


def test_flooring_does_not_move_the_raw_waste():
    """Where the raw waste itself is floored, demand still counts from its pH."""
    ph = np.array([1.0, 1.3, 1.5, 2.0, 3.0, 7.0, 11.0])
    read = ph - np.array([0.1, 0.05, 0.0, 0.0, 0.0, 0.0, 0.0])
    curve = MeasuredCurve("HCl", 0.1 + water(ph), read)  # raw waste of pH 1, read as 0.9
    found = curve.with_water(1.0, KW)
    assert "floored" in found.notes[0]
    assert_allclose(found.base_at(0.9), 0.0, atol=1e-12)
    assert_allclose(curve.raw_ph, 0.9, atol=1e-12)


def test_raw_waste_must_be_in_the_curve():
    """Demand counts from the raw waste."""
    curve = MeasuredCurve("x", np.arange(1.0, 6.0), np.arange(3.0, 8.0))
    assert np.isnan(curve.raw_ph)
    with pytest.raises(InputError, match=r"must hold the raw waste.*runs from 1 to 5 eq/L\. Add its pH at 0"):
        held_table(curve, 1.0, KW)


def test_from_a_file():
    """Points of a file, whose temperature outranks the one given."""
    points = CurvePoints(sample_id="s", base_eq_l=np.arange(5.0), ph=np.arange(3.0, 8.0), dilution=np.full(5, 0.9),
                         rows=np.arange(5), t_c=31.0, notes=("repaired",))
    curve = measured(points, 20.0)
    assert (curve.sample_id, curve.t_c, curve.notes) == ("s", 31.0, ("repaired",))
    assert_allclose(curve.dilution, 0.9)
    unknown = CurvePoints(sample_id="s", base_eq_l=np.arange(5.0), ph=np.arange(3.0, 8.0), dilution=np.ones(5), rows=np.arange(5))
    assert measured(unknown, 20.0).t_c == 20.0


X, Y = np.arange(5.0), np.arange(3.0, 8.0)


@pytest.mark.parametrize(("base", "ph", "dilution", "words"), [
    (X[:4], Y[:4], 1.0, r"needs 5 points or more.*found 4 and 4\. Titrate on"),
    (X, Y[:-1], 1.0, r"one base for each pH; found 5 and 4"),
    (X, np.array([3, 4, 4, 6, 7.0]), 1.0, r"must both rise.*point 3 has 2 eq/L at pH 4 after 1 eq/L at pH 4\. Correct"),
    (np.array([0, 2, 1, 3, 4.0]), Y, 1.0, r"point 3 has 1 eq/L at pH 5 after 2 eq/L at pH 4"),
    (np.array([0, np.nan, 2, 3, 4]), Y, 1.0, r"point 2 has nan eq/L"),
    (X, Y, 0.0, r"share of waste in the mixture must be above 0 and 1 at most; found 0 to 0\. Give sample volume"),
    (X, Y, np.array([1, 1, 1, 1, 1.2]), r"found 1 to 1\.2"),
])  # fmt: skip
def test_refusals(base, ph, dilution, words):
    """Each names the sample, the rule, the point and the remedy."""
    with pytest.raises(InputError, match="titration curve of 's'.*" + words):
        MeasuredCurve("s", base, ph, dilution=dilution)


def test_band_of_several_samples():
    """Lowest, median and highest demand at each pH; nan and a count of zero where none was measured."""
    curves = [acetic(mol=mol, strong=0.0) for mol in (0.05, 0.1, 0.3)]
    short = acetic(STEPS[(STEPS > 4.0) & (STEPS < 8.0)], mol=0.2)
    found = band([*curves, short], [3.2, 7.2, 13.0])
    every = acetate(7.2, np.array([0.05, 0.1, 0.2, 0.3])) + water(7.2)
    assert_allclose([found.lowest[1], found.median[1], found.highest[1]], [every[0], every[1:3].mean(), every[3]], rtol=1e-9)
    assert_allclose(found.median[0], acetate(3.2, 0.1) + water(3.2), rtol=1e-9)
    assert_array_equal(found.count, [3, 4, 0])
    for values in (found.lowest, found.median, found.highest):
        assert np.isnan(values[2])
    with pytest.raises(InputError, match=r"needs at least one titration curve; found none\. Titrate samples"):
        band([], 7.0)


def test_strength_of_each_sample():
    """Samples of one kind are multiples of the median; one of another kind leaves a misfit."""
    ph = np.arange(3.2, 11.0, 0.4)
    scaled = [MeasuredCurve(str(k), k * (acetate(STEPS) + water(STEPS)), STEPS) for k in (0.5, 1.0, 1.8)]
    strength, misfit = strength_of(scaled, ph)
    assert_allclose(strength, [0.5, 1.0, 1.8], rtol=1e-12)
    assert_allclose(misfit, 0.0, atol=1e-12)
    other = MeasuredCurve("other", 0.02 / (1.0 + 10.0 ** (9.0 - STEPS)) + water(STEPS), STEPS)
    strength, misfit = strength_of([scaled[0], scaled[1], other], ph)
    assert misfit[2] > 0.3
    far = MeasuredCurve("far", np.arange(5.0), np.linspace(12.5, 13.5, 5))
    strength, _ = strength_of([*scaled, far], ph)
    assert np.isnan(strength[3])
    assert_allclose(strength[:3], [0.5, 1.0, 1.8], rtol=1e-12)
    part = MeasuredCurve("part", 2.0 * scaled[1].base_eq_l[:12], STEPS[:12])  # a curve that ends early
    strength, misfit = strength_of([*scaled[:2], scaled[1], part], ph)
    assert_allclose([strength[3], misfit[3]], [2.0, 0.0], rtol=0, atol=1e-12)


def test_resolution_of_a_window():
    """The widest step that touches the window, how far base may be off in it, and what to titrate again."""
    ph = np.array([2.0, 3.0, 4.0, 5.0, 6.4, 8.9, 9.3, 11.0])
    curve = acetic(ph)
    found = resolution(curve, 6.0, 9.0)
    assert (found.covered, found.points, found.fine) == (True, 2, False)
    assert (found.gap_low, found.gap_high) == (6.4, 8.9)
    assert_allclose(found.gap_ph, 2.5)
    true = acetate(8.9) + water(8.9) - acetate(6.4) - water(6.4)
    assert_allclose(found.unsure_eq_l, true, rtol=1e-9)
    assert_allclose(found.step_eq_l, true / 5.0, rtol=1e-9)  # five steps of half a unit
    assert_allclose(found.unsure_share, true / (curve.base_at(9.0) - curve.base_at(6.0)), rtol=1e-9)
    assert "From pH 6.40 to 8.90 no point was read (2.5 pH; 0.5 is the most" in found.words
    assert f"in steps of {true / 5.0:.2g} eq/L or less" in found.words
    assert resolution(acetic(np.arange(2.0, 12.1, 0.4)), 6.0, 9.0).words == ""
    assert resolution(acetic(np.arange(2.0, 12.1, 0.4)), 6.0, 9.0).fine


def test_resolution_where_water_holds_everything():
    """A wide step of a strong acid leaves nothing unsure once water is told apart, and does before."""
    ph = np.array([2.0, 2.2, 2.6, 3.4, 10.6, 11.0])
    curve = MeasuredCurve("HCl", 0.01 + water(ph), ph)
    assert not resolution(curve, 6.0, 9.0).fine
    known = resolution(curve.with_water(1.0, KW), 6.0, 9.0)
    assert known.fine
    assert_allclose(known.unsure_eq_l, 0.0, atol=1e-10)
    assert_allclose(known.window_eq_l, 1.099e-5, rtol=1e-3)  # facts table 3.2


def test_resolution_of_a_window_not_covered():
    """A window beyond the points is not fine, partly or wholly, and the words say where the curve ends."""
    curve = acetic(np.arange(2.0, 8.1, 0.4))
    for low, high in ((6.0, 9.0), (9.0, 10.0)):
        found = resolution(curve, low, high)
        assert (found.covered, found.fine) == (False, False)
        assert "is not covered: the curve runs from pH 2.00 to 8.00. Titrate past both ends" in found.words
        assert np.isnan(found.window_eq_l)
    with pytest.raises(InputError, match=r"a low and a high pH, in this order; found 9 and 6\. Turn them"):
        resolution(curve, 9.0, 6.0)
