"""Tables of metals for the readout against a balance written out here."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import brentq

from aquabuf.chem.metals import metal_named, metals
from aquabuf.engine.hydroxides import metal_table
from aquabuf.engine.readout import GRID_PH, Readout
from aquabuf.errors import InputError

KW = 1e-14


def base_by_hand(metal, total, ph):
    """OH- less H+, and the hydroxide in solid and anion."""
    oh = KW * 10.0**ph
    free = 10.0**-metal.pksp / oh**metal.charge
    up = 0.0 if metal.log_k_up is None else 10.0**metal.log_k_up * oh**metal.charge_up
    dissolved = min(total, free + up)
    anion = dissolved * up / (free + up)
    return oh - 10.0**-ph + metal.charge * (total - dissolved) + (metal.charge + (metal.charge_up or 0)) * anion


@pytest.mark.parametrize("name", metals())
def test_ph_of_a_metal_waste_agrees_with_the_balance(name):
    """Base from half to all of what the metal takes: pH within 1e-3 of a root finder's."""
    metal, total = metal_named(name), 2e-3
    readout = Readout(1.0, KW, np.zeros((1, GRID_PH.size)), (metal_table(metal, [total]),))
    for share in (0.3, 0.8, 1.05):
        base = share * metal.charge * total
        expected = brentq(lambda x, b=base: base_by_hand(metal, total, x) - b, 0.0, 14.5, xtol=1e-10)
        assert_allclose(readout.ph(base, np.ones(1)), expected, atol=1e-3)


def test_table_needs_amounts():
    """A negative amount is refused."""
    with pytest.raises(InputError, match=r"amount of zinc in a carrier must be zero or more; found \[-1.0\]"):
        metal_table(metal_named("zinc"), [-1.0])
