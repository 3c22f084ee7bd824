"""Density, dielectric constant and pressures against general reference libraries."""

import gsw
import numpy as np
import pytest
from iapws import IAPWS95
from iapws import _iapws as iapws_functions
from numpy.testing import assert_allclose
from scipy import constants

from aquabuf.chem import fresh, properties

ATMOSPHERE_MPA = 0.101325


def _reference_density(t_c):
    return IAPWS95(T=t_c + 273.15, P=ATMOSPHERE_MPA).rho


@pytest.mark.parametrize("t_c", [0.01, 4.0, 12.0, 25.0, 37.0, 50.0])
def test_water_density_against_iapws95(t_c):
    """Kell 1975 departs from IAPWS-95 by 0.004 kg/m3 at most from 0 to 50 °C."""
    assert_allclose(properties.water_density(t_c), _reference_density(t_c), rtol=0, atol=0.004)


@pytest.mark.parametrize("t_c", [0.01, 12.0, 25.0, 37.0, 50.0, 75.0])
def test_dielectric_constant_against_iapws(t_c):
    """Bradley & Pitzer 1979 departs from the IAPWS 1997 formulation by 0.06 at most."""
    expected = iapws_functions._Dielectric(_reference_density(t_c), t_c + 273.15)
    assert_allclose(properties.dielectric_constant(t_c), expected, rtol=0, atol=0.06)


@pytest.mark.parametrize("t_c", [0.01, 12.0, 25.0, 37.0, 50.0])
def test_ion_product_of_water_against_iapws(t_c):
    """pKw agrees with the IAPWS formulation (the library has its later coefficients) within 0.001."""
    expected = iapws_functions._Kw(_reference_density(t_c), t_c + 273.15)
    assert_allclose(-np.log10(fresh.k_water(t_c)), expected, rtol=0, atol=0.001)


@pytest.mark.parametrize(("salinity", "atol"), [(1.0, 0.0075), (10.0, 0.0075), (20.0, 0.0075), (35.0, 0.0075), (42.0, 0.015)])
@pytest.mark.parametrize("t_c", [0.0, 10.0, 25.0, 40.0])
def test_seawater_density_against_teos10(t_c, salinity, atol):
    """EOS-80 against TEOS-10 at 1 atm, for water of standard composition (SA = 35.16504/35 S).

    Tolerance 0.0075 kg/m3: twice the older equation's own standard deviation of 0.0036, which also covers its older
    temperature scale (0.01 °C at 40 °C, 0.004 kg/m3). At salinity 42, the edge of its data, four times.
    """
    absolute_salinity = salinity * 35.16504 / 35.0
    expected = gsw.rho_t_exact(absolute_salinity, t_c, 0.0)
    assert_allclose(properties.seawater_density(t_c, salinity), expected, rtol=0, atol=atol)


def test_sea_water_without_salt_is_as_dense_as_water():
    """Both density equations meet at zero salinity within 0.005 kg/m3, 0 to 40 °C: the older equation of water is not
    that of the equation of sea water."""
    t_c = np.linspace(0.0, 40.0, 9)
    assert_allclose(properties.seawater_density(t_c, 0.0), properties.water_density(t_c), rtol=0, atol=0.005)


def test_water_is_densest_at_four_degrees():
    """The maximum density of water lies at 3.98 °C (general handbook value)."""
    t_c = np.linspace(3.0, 5.0, 2001)
    assert_allclose(t_c[np.argmax(properties.water_density(t_c))], 3.98, rtol=0, atol=0.01)


def test_salt_lowers_vapor_pressure():
    """Witting's classic p = p0 (1 - 0.000537 S) (recalled) holds within 0.0005."""
    salinity = np.array([10.0, 20.0, 35.0])
    ratio = properties.vapor_pressure(25.0, salinity) / properties.vapor_pressure(25.0)
    assert_allclose(ratio, 1.0 - 0.000537 * salinity, rtol=0, atol=0.0005)


@pytest.mark.parametrize("height_m", [-400.0, 0.0, 500.0, 1500.0, 3000.0, 8000.0, 11000.0])
def test_air_pressure_is_the_barometric_closed_form(height_m):
    """(1 - L H / T0)^(g M / (R L)) with the constants of the standard atmosphere (recalled)."""
    exponent = 9.80665 * 0.0289644 / (8.31432 * 0.0065)
    expected = (1.0 - 0.0065 * height_m / 288.15) ** exponent
    assert_allclose(properties.air_pressure(height_m), expected, rtol=0, atol=2e-6)


def test_fundamental_constants_are_those_of_the_si():
    """Gas constant and ice point as in the constants of scipy."""
    assert_allclose(properties.GAS_CONSTANT, constants.R, rtol=1e-10)
    assert_allclose(properties.T_ZERO_K, constants.zero_Celsius, rtol=0)
