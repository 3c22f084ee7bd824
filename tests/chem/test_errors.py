"""The error tree: each kind can be caught as ours and as the ordinary kind of Python."""

import numpy as np
import pytest

from aquabuf import errors


@pytest.mark.parametrize(("kind", "ordinary"), [
    (errors.InputError, ValueError), (errors.HeaderError, ValueError), (errors.FileError, OSError),
])
def test_error_is_ours_and_ordinary(kind, ordinary):
    """The command line catches the base; a library user the built-in kind."""
    with pytest.raises(ordinary, match="the dose") as caught:
        raise kind("the dose must be positive; found -1. Give it in mg/L.")
    assert isinstance(caught.value, errors.AquabufError)


def test_range_error_carries_the_mask_of_the_rows():
    """The offending rows travel with the message."""
    with pytest.raises(errors.InputError, match="0 to 50") as caught:
        raise errors.InputRangeError("t_c must be 0 to 50 °C", np.array([False, True]))
    assert caught.value.mask.tolist() == [False, True]


def test_public_errors_are_the_tree_of_the_module():
    """Every public error descends from the base, and the base from nothing narrower than Exception."""
    assert all(issubclass(getattr(errors, name), errors.AquabufError) for name in errors.__all__)
    assert errors.AquabufError.__mro__[1] is Exception
