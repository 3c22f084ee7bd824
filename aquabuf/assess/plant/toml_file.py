"""Reading a TOML file of settings: its text and what it holds, with plain words where that cannot be."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any

from aquabuf.errors import FileError, InputError

__all__ = ["read_toml"]


def read_toml(path: Path, kind: str) -> tuple[str, dict[str, Any]]:
    """Text and content of a TOML file. kind : what messages call it, such as "plan file".

    Raises
    ------
    FileError
        The file cannot be read or is not UTF-8.
    InputError
        It is not TOML; the message has the line that the parser tells.
    """
    try:
        text = path.read_text(encoding="utf-8-sig")
    except (OSError, ValueError) as error:
        reason = error.strerror if isinstance(error, OSError) and error.strerror else "not UTF-8 text"
        raise FileError(f"the {kind} {path.name} cannot be read: {reason}. Check the path.") from None
    try:
        return text, tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise InputError(f"{path.name} is not valid TOML: {error}. Correct that line.") from None
    except (RecursionError, ValueError) as error:
        reason = "brackets within brackets go too deep" if isinstance(error, RecursionError) else str(error)
        raise InputError(f"{path.name} is not valid TOML: {reason}. Correct it.") from None
