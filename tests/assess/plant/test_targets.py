"""Targets: what counts as a window, its words, and when it is met."""

import numpy as np
import pytest
from made_streams import stream, target
from numpy.testing import assert_array_equal

from aquabuf.assess.plant.quantities import find_quantity, plant_quantities
from aquabuf.assess.plant.targets import Target, all_met, reached
from aquabuf.errors import InputError


@pytest.mark.parametrize(("made", "words"), [
    (("ph", 8.3), "pH 8.30"), (("ph", 8.2, 8.6), "pH 8.20 to 8.60"), (("alkalinity", 40.0, np.inf), "alkalinity at least 40.0 mg/L as CaCO3"),
    (("ccpp", -np.inf, 4.0), "precipitation potential at most 4.00 mg/L as CaCO3"),
    (("alkalinity", 40.0, 60.0), "alkalinity 40.0 to 60.0 mg/L as CaCO3"), (("si_calcite", -0.1, 0.2), "saturation index -0.10 to 0.20"),
    (("si_calcite", -0.001, 0.2), "saturation index 0.00 to 0.20")])
def test_words(made, words):
    """As a person reads it, in the unit of the tables."""
    assert target(*made).words == words
    assert target(*made).is_point == (len(made) == 2)


def test_words_of_every_quantity():
    """Each target quantity can be put into words with its unit."""
    for name, quantity in plant_quantities().items():
        if quantity.is_target:
            words = target(name, 1.0, 2.0).words
            assert words.startswith(quantity.label)
            assert words.endswith("" if quantity.unit == "-" else quantity.unit)


def test_windows_that_are_none():
    """High below low, no end at all, or no number."""
    with pytest.raises(InputError, match=r"window of pH must go from low to high; found 9 to 8\. Swap them"):
        target("ph", 9.0, 8.0)
    with pytest.raises(InputError, match=r"window of alkalinity must go from low to high; found 60 to 40\. Swap them"):
        target("alkalinity", 60.0, 40.0)
    with pytest.raises(InputError, match=r"window of pH must have an end; found none\. Give a value"):
        Target(quantity=find_quantity("ph"), low=-np.inf, high=np.inf)
    with pytest.raises(InputError, match="window of pH must go from low to high; found nan"):
        Target(quantity=find_quantity("ph"), low=np.nan, high=8.0)


def test_met_within_a_millionth_of_the_unit():
    """Closeness 1e-6 in the unit of the tables, on both sides; an unknown value never counts."""
    want = target("alkalinity", 40.0, 60.0)
    mg = np.array([40.0 - 2e-6, 40.0 - 0.5e-6, 50.0, 60.0 + 0.5e-6, 60.0 + 2e-6, np.nan])
    assert_array_equal(want.met(mg / (100.086e3 / 2)), [False, True, True, True, False, False])
    assert_array_equal(target("ph", 8.0).met(np.array([8.0 - 2e-6, 8.0, 8.0 + 2e-6])), [False, True, False])
    assert_array_equal(target("ph", 8.0, np.inf).met(np.array([7.9, 14.0, np.inf])), [False, True, True])


def test_all_of_them_row_by_row():
    """A row counts when every target is met there."""
    some = stream([8e-4, 8e-4, 2e-3], [8e-4, 2e-3, 2e-3])
    ph = reached(some, (target("ph", 7.0),))["ph"]
    assert ph[0] > 7.5 > ph[1]
    wants = (target("ph", 7.5, np.inf), target("alkalinity", -np.inf, 60.0))
    assert_array_equal(all_met(some, wants), [True, False, False])
    assert_array_equal(all_met(some, wants[1:]), [True, True, False])
