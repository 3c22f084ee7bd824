"""Places in a plan file: every message names file, line and table, and the nearest known name where one is wrong."""

from __future__ import annotations

import datetime
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from difflib import get_close_matches
from typing import Any, TypeVar

from aquabuf.assess.plant.toml_lines import KeyPath, Lines
from aquabuf.errors import InputError
from aquabuf.units import key as plain

__all__ = ["Place", "nearest_hint", "nearest_word", "shown_value"]

T = TypeVar("T")


def nearest_word(word: str, known: Iterable[str]) -> str:
    """The known word that resembles `word` most, "" where none does."""
    by_plain = {plain(k) or k: k for k in known}
    near = get_close_matches(plain(word) or word, by_plain, n=1, cutoff=0.5)
    return by_plain[near[0]] if near else ""


def nearest_hint(word: str, known: Iterable[str]) -> str:
    """The nearest known word as a sentence of a message, "" where none resembles it."""
    near = nearest_word(word, known)
    return f" The nearest is {near}." if near else ""


def shown_value(value: object) -> str:
    """A value of the file as messages show it, cut where it is long."""
    timed = isinstance(value, datetime.date | datetime.time)
    text = str(value) if timed else str(value).lower() if isinstance(value, bool) else repr(value)
    return text if len(text) <= 60 else f"{text[:57]}..."


@dataclass(frozen=True, slots=True)
class Place:
    """A table of the file: for messages that name file, line and table."""

    file: str
    lines: Lines
    path: KeyPath
    label: str

    def where(self, key: str = "") -> str:
        """File, line and table."""
        return f"{self.file}, line {self.lines.of((*self.path, key) if key else self.path)}, {self.label}"

    def error(self, words: str, key: str = "") -> InputError:
        """An error at a key, or at the table."""
        return InputError(f"{self.where(key)}: {words}")

    def inner(self, *keys: str | int, label: str) -> Place:
        """A table within."""
        return Place(self.file, self.lines, (*self.path, *keys), label)

    def table(self, value: object, label: str = "") -> dict[str, Any]:
        """The value if it is a table."""
        if not isinstance(value, dict):
            name = label or self.label
            raise self.error(f"must be a table of keys and values; found {shown_value(value)}. Write {name} and its "
                             "keys below.")
        return value

    def tried(self, key: str, do: Callable[[], T]) -> T:
        """What `do` gives; its refusal gets file and line."""
        try:
            return do()
        except InputError as error:
            raise self.error(str(error), key) from None

    def unknown(self, key: str, known: Iterable[str], what: str = "a key here") -> InputError:
        """What to say of a name that is not known."""
        known = tuple(known)
        hint = nearest_hint(key, known) or f" There are {', '.join(known)}."
        return self.error(f"{key} is not {what}.{hint} Correct it or remove it.", key)
