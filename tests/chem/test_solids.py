"""Magnesium hydroxide against thermochemistry that its constants do not come from."""

import numpy as np
from numpy.testing import assert_allclose

from aquabuf.chem.solids import ksp_brucite


def test_brucite_agrees_with_energies_of_formation():
    """CRC Handbook (recalled): Mg(OH)2 -833.5, Mg++ -454.8, OH- -157.2 kJ/mol; handbooks spread by 0.1 to 0.15."""
    energy = -454.8e3 - 2.0 * 157.2e3 + 833.5e3
    assert_allclose(np.log10(ksp_brucite(25.0)), -energy / (np.log(10.0) * 8.314462618 * 298.15), atol=0.15)


def test_brucite_follows_the_enthalpies_of_its_ions():
    """CRC Handbook (recalled): heat of solution -924.5, -466.9, -230.0 kJ/mol gives -2.4 kJ/mol: flat about 25 °C."""
    slope = (np.log(ksp_brucite(26.0)) - np.log(ksp_brucite(24.0))) / 2.0
    assert_allclose(slope * 8.314462618 * 298.15**2, -466.9e3 - 2.0 * 230.0e3 + 924.5e3, atol=2.5e3)
