"""Everything that aquabuf raises on purpose.

AquabufError
├── InputError          a value, name or option that cannot be used (also a ValueError)
│   ├── InputRangeError readings outside the range of a method; `mask` marks the rows
│   └── HeaderError     a column header that is unknown, ambiguous or repeated
└── FileError           a file that cannot be read, written or replaced (also an OSError)

Every message says the subject, the rule, the value found and the remedy.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:  # numpy is slow to import; the command line must start fast
    import numpy as np

__all__ = ["AquabufError", "FileError", "HeaderError", "InputError", "InputRangeError"]


class AquabufError(Exception):
    """Base of every error that aquabuf raises on purpose."""


class InputError(AquabufError, ValueError):
    """A value, name or option that cannot be used."""


class InputRangeError(InputError):
    """Readings outside the range of a method; `mask` marks the offending rows."""

    def __init__(self, message: str, mask: np.ndarray):
        super().__init__(message)
        self.mask = mask


class HeaderError(InputError):
    """A column header that is unknown, ambiguous or repeated."""


class FileError(AquabufError, OSError):
    """A file that cannot be read, written or replaced."""
