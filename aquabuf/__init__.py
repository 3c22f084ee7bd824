"""aquabuf: field readings of water to alkalinity, speciation, buffering and acid tolerance, with error bars."""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from aquabuf.chem.acids import Acid
    from aquabuf.engine.mix import mix
    from aquabuf.engine.water import Water

__all__ = ["Acid", "Water", "__version__", "mix"]
__version__ = "0.1.0"

_HOME = {"Acid": "aquabuf.chem.acids", "Water": "aquabuf.engine.water", "mix": "aquabuf.engine.mix"}


def __getattr__(name: str) -> Any:
    """Import the engine only when it is asked for, so that the command line starts fast."""
    if name not in _HOME:
        raise AttributeError(f"module 'aquabuf' has no attribute {name!r}")
    return getattr(import_module(_HOME[name]), name)
