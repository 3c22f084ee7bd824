"""Every function of the chemistry floor takes scalars, lists and arrays, broadcasts, and keeps rows apart."""

import importlib
import inspect

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from published_rows import CHEM_TABLES

# Three ordinary values for each argument name that the functions share.
SAMPLES = {
    "t_c": (5.0, 15.0, 25.0), "salinity": (20.0, 30.0, 35.0), "elevation_m": (0.0, 500.0, 2000.0),
    "charge": (1.0, -1.0, 2.0), "ionic_strength": (0.001, 0.01, 0.1), "size": (3.5, 4.0, 5.0),
    "slope": (0.015, 0.075, 0.165), "a": (0.49, 0.5, 0.51), "b": (0.325, 0.328, 0.33),
    "co2_ppm": (280.0, 400.0, 425.0), "doc_mg_l": (0.5, 4.0, 24.0), "ph": (4.2, 5.8, 7.4),
    "pressure_atm": (0.8, 0.9, 1.0), "sulfate": (0.01, 0.02, 0.028),
    "k_bisulfate": (0.05, 0.08, 0.1), "fluoride": (1e-5, 3e-5, 7e-5), "k_fluoride": (0.001, 0.002, 0.0025),
    "wind_m_s": (0.5, 3.0, 8.0), "lake_area_m2": (2e5, 1e6, 4e7), "k600_m_d": (0.5, 0.8, 2.0),
    "schmidt": (1400.0, 800.0, 470.0), "sg": (1.1, 1.25, 1.335),
    "ionization_kj_mol": (-22.4, 0.0, 51.95), "heat_kj_l": (1.0, 20.0, 55.8), "capacity_kj_l_k": (4.0, 4.1, 4.18),
    "water_per_acid": (0.0, 1.0, 10.0),
    **{f"{metal}_mg_l": (0.0, 12.0, 55.0) for metal in ("iron_ii", "iron_iii", "aluminum", "manganese")},
    **{f"{metal}_mol_l": (0.0, 2e-4, 1e-3) for metal in ("iron_ii", "iron_iii", "aluminum", "manganese")},
    "acidity": (1e-3, 5e-3, 2e-2), "alkalinity_eq_l": (0.0, 1e-3, 2e-3), "eq_l": (-1e-3, 2e-3, 6e-3),
    "flow_m3_h": (1.0, 22.7, 400.0), "mg_l": (-20.0, 313.0, 1344.0),
}
FIXED = {"pk": 4.756, "enthalpy_j_mol": -410.0, "heat_capacity_j_mol_k": -142.0,  # one acid at a time
         "pk1": 3.04, "pk2": 4.51, "pk3": 6.46}
OTHERS = {"acid_named", "acid_table", "organic_models", "charge_and_slope",  # look-ups take names; a pair has its own tests
          "transfer_relations", "schmidt_relations", "transfer_velocity_m_d",
          "atoms", "find_product", "molar_mass", "own_product", "products", "strength_of", "with_basicity",  # one product
          "zero_level_charge", "check_certificate", "density_from_strength", "freezes_at_c", "strength_from_density",
          "complex_at", "conflict", "dissolved_at", "free_at", "least_ph", "metal_named", "metals",  # one metal at a time
          "precipitation_window", "soluble_window", "window_disagreement", "dilution_heat_kj_mol",
          "carbonic_enthalpies_kj_mol"}


def _functions():
    for name in CHEM_TABLES:
        module = importlib.import_module(f"aquabuf.chem.{name}")
        for public in module.__all__:
            target = getattr(module, public)
            if inspect.isfunction(target) and public not in OTHERS:
                yield pytest.param(target, id=public)


def _names(function):
    return [name for name in inspect.signature(function).parameters if name not in FIXED]


WHOLE = {"t_c", "salinity", "elevation_m"}  # readings that are often written as whole numbers
FUNCTIONS = list(_functions())
EVERY_FUNCTION = pytest.mark.parametrize("function", FUNCTIONS)
WITH_SEVERAL_ARGUMENTS = pytest.mark.parametrize("function", [f for f in FUNCTIONS if len(_names(f.values[0])) > 1])
WITH_WHOLE_NUMBERS = pytest.mark.parametrize("function", [f for f in FUNCTIONS if WHOLE & set(_names(f.values[0]))])


def _call(function, values):
    fixed = {name: FIXED[name] for name in inspect.signature(function).parameters if name in FIXED}
    return function(**values, **fixed)


def _scalars(function):
    """One result per sample, from calls with plain numbers."""
    names = _names(function)
    return [float(_call(function, {name: SAMPLES[name][i] for name in names})) for i in range(3)]


@EVERY_FUNCTION
@pytest.mark.parametrize("make", [list, tuple, np.array, lambda x: np.array(x).reshape(3, 1)],
                         ids=["list", "tuple", "array", "column"])
def test_array_call_is_a_loop_of_scalar_calls(function, make):
    """Rows do not see each other, and the result has the shape of the arguments."""
    arguments = {name: make(SAMPLES[name]) for name in _names(function)}
    result = _call(function, arguments)
    assert result.dtype == np.float64
    assert result.shape == np.shape(next(iter(arguments.values())))
    assert_allclose(result.ravel(), _scalars(function), rtol=1e-13)


@EVERY_FUNCTION
def test_scalars_give_a_scalar_shape(function):
    """Plain numbers give one number."""
    assert np.shape(_call(function, {name: SAMPLES[name][0] for name in _names(function)})) == ()


@WITH_SEVERAL_ARGUMENTS
def test_arguments_broadcast(function):
    """A column against a row gives the full table; its diagonal is the row-by-row result."""
    first, *others = _names(function)
    arguments = {first: np.reshape(SAMPLES[first], (3, 1))} | {name: np.array(SAMPLES[name]) for name in others}
    table = _call(function, arguments)
    assert table.shape == (3, 3)
    assert_allclose(np.diag(table), _scalars(function), rtol=1e-13)


@EVERY_FUNCTION
def test_missing_reading_stays_in_its_row(function):
    """Not-a-number in one row gives not-a-number there, no warning, and untouched neighbors."""
    first = _names(function)[0]
    arguments = {name: np.array(SAMPLES[name]) for name in _names(function)}
    arguments[first][1] = np.nan
    result = _call(function, arguments)
    assert_array_equal(np.isnan(result), [False, True, False])
    assert_allclose(result[[0, 2]], np.take(_scalars(function), [0, 2]), rtol=1e-13)


@EVERY_FUNCTION
def test_arguments_are_not_changed(function):
    """The caller's arrays come back as they were."""
    arguments = {name: np.array(SAMPLES[name]) for name in _names(function)}
    _call(function, arguments)
    for name, values in arguments.items():
        assert_array_equal(values, SAMPLES[name])


@WITH_WHOLE_NUMBERS
def test_whole_numbers_count_like_decimals(function):
    """Integer temperatures, salinities and elevations are taken as such."""
    values = {name: int(SAMPLES[name][2]) if name in WHOLE else SAMPLES[name][2] for name in _names(function)}
    assert_allclose(_call(function, values), _scalars(function)[2], rtol=1e-13)
