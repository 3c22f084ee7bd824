"""Choices of a run: defaults and the message of each value that makes no sense."""

import pytest

from aquabuf.assess.options import Options
from aquabuf.assess.sample.columns import result_columns
from aquabuf.errors import InputError


def test_defaults():
    """Written down where a user can rely on them."""
    o = Options()
    assert (o.exchange, o.air_co2_ppm, o.draws, o.seed, o.carbonic) == ("closed", 425.0, 1000, 1, "millero")
    assert (o.acid_thresholds, o.base_thresholds) == ((6.5, 6.0, 5.5, 5.0, 4.5), (8.5, 9.0, 9.5))


@pytest.mark.parametrize(("choice", "message"), [
    ({"exchange": "ajar"}, r"exchange must be closed or open; found 'ajar'. Closed keeps the carbon"),
    ({"air_co2_ppm": 0.0}, r"air CO2 must be above 0 and at most 1000000 ppm; found 0. Outdoor air had about 425 ppm in 2025"),
    ({"air_co2_ppm": 1e6 + 1}, r"air CO2 must be above 0"), ({"air_co2_ppm": float("nan")}, r"found nan"),
    ({"draws": 99}, r"draws must be 0 or from 100 to 100000; found 99. Use 1000, or 0 for no intervals"),
    ({"draws": 100_001}, r"draws must be 0 or from 100"), ({"draws": -1}, r"draws must be 0 or from 100"),
    ({"acid_thresholds": (1.9,)}, r"a pH threshold must be from 2 to 12; found 1.9. Correct the list"),
    ({"base_thresholds": (12.1,)}, r"a pH threshold must be from 2 to 12; found 12.1"),
    ({"acid_thresholds": (float("nan"),)}, r"found nan"),
], ids=str)
def test_options_that_make_no_sense(choice, message):
    """Rule, value found and remedy."""
    with pytest.raises(InputError, match=message):
        Options(**choice)


@pytest.mark.parametrize("choice", [{"draws": 100}, {"draws": 100_000}, {"air_co2_ppm": 1e6}, {"acid_thresholds": (2.0, 12.0)}], ids=str)
def test_options_at_their_limits(choice):
    """The limits themselves are allowed."""
    name, value = next(iter(choice.items()))
    assert set(value) <= set(getattr(Options(**choice), name)) if isinstance(value, tuple) else getattr(Options(**choice), name) == value


def test_tolerance_to_ph_six_is_always_there():
    """The summary ranks by it."""
    assert Options(acid_thresholds=()).acid_thresholds == (6.0,)
    assert Options(acid_thresholds=(5.0, 6.0)).acid_thresholds == (5.0, 6.0)


def test_seed_below_zero():
    """A seed is a whole number from 0 on."""
    with pytest.raises(InputError, match="seed must be"):
        Options(seed=-1)


def test_thresholds_that_share_a_column():
    """Two thresholds never write into one column, however close they are."""
    names = [c.name for c in result_columns(Options(acid_thresholds=(5.121, 5.124, 6.0)))]
    assert {"acid_to_ph_5_121_meq_l", "acid_to_ph_5_124_meq_l", "acid_to_ph_6_0_meq_l"} <= set(names)
    assert len(names) == len(set(names))
