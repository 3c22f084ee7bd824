"""The ANC limit of an option: numbers, every shipped name with its published value, and what is refused."""

import re

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf.assess.lake.anc_limit import find_anc_limit
from aquabuf.errors import InputError
from aquabuf.tables import read_table

# µeq/L by name, none where it varies. Lien et al. 1996 (20); UK critical loads of fresh waters (0); Bridcut et al. 2004
# (39); Harriman et al. (20 to 50); Hesthagen et al. 2008 (1986: 20, 1995: 67; by rising organic carbon 33 and 73).
PUBLISHED = {"uk_0": 0, "norway_20": 20, "scotland_39": 39, "scotland_low": 20, "scotland_high": 50, "trout_1986": 20,
             "trout_1995": 67, "trout_toc_low": 33, "trout_toc_middle": 73, "variable": None}


def test_every_shipped_limit_is_checked_here():
    """A limit that nobody checked cannot be shipped."""
    assert set(PUBLISHED) == {row["name"] for row in read_table("anc_limits")}


@pytest.mark.parametrize(("name", "ueq_l"), PUBLISHED.items())
def test_shipped_names(name, ueq_l):
    """The published value in eq/L; the variable one has none."""
    limit = find_anc_limit(name)
    assert limit.name == name
    assert limit.is_variable == (ueq_l is None)
    assert_allclose(limit.value_eq_l, np.nan if ueq_l is None else ueq_l * 1e-6, rtol=1e-12)


@pytest.mark.parametrize(("text", "ueq_l"),
                         [("20", 20), ("-5", -5), ("0", 0), ("37.5", 37.5), ("1e2", 100), ("1000", 1000),
                                             ("-1000", -1000)])
def test_numbers_are_microequivalents(text, ueq_l):
    """Both ends of what is accepted are in it; a number does not vary."""
    limit = find_anc_limit(text)
    assert_allclose(limit.value_eq_l, ueq_l * 1e-6, rtol=1e-12, atol=0)
    assert not limit.is_variable


@pytest.mark.parametrize("text", ["1000.001", "-1001", "nan", "inf", "-inf", "", " ", "twenty", "20 µeq/L", "norway",
                                  "NORWAY_20",
                                  "2e-5 eq"])
def test_what_is_no_limit(text):
    """Neither a name nor a number of that size: rule, all names, value and remedy are told."""
    rule = ("the ANC limit must be a number of µeq/L within 1000 of zero or one of uk_0, norway_20, scotland_39, "
            f"scotland_low, scotland_high, trout_1986, trout_1995, trout_toc_low, trout_toc_middle, variable; found "
            f"{text!r}. Write for example 20.")
    with pytest.raises(InputError, match=f"^{re.escape(rule)}$"):
        find_anc_limit(text)


@pytest.mark.parametrize(("text", "words"), [
    ("scotland_39", r"ANC limit 39 µeq/L \(brown trout, Bridcut et al\. 2004, [^)]*\)"),
    ("39", r"ANC limit 39 µeq/L \(brown trout, Bridcut et al\. 2004, [^)]*\)"),
    ("20", r"ANC limit 20 µeq/L \(.*Lien et al\. 1996.*Harriman et al\..*Hesthagen et al\. 2008.*\)"),
    ("41", r"ANC limit 41 µeq/L \(given by the user\)"),
    ("-10", r"ANC limit -10 µeq/L \(given by the user\)"),
    ("variable", r"ANC limit 0\.25 yr/m of the critical load, from 0 to 50 µeq/L \(.*Henriksen et al\. 1995.*\)"),
])
def test_limits_tell_themselves(text, words):
    """Value, unit and every source that has this value."""
    assert re.fullmatch(words, find_anc_limit(text).in_words())
