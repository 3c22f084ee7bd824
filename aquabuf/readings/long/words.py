"""How words of a long table are compared: case and blanks do not count, everything else does."""

from __future__ import annotations

from collections.abc import Iterable

__all__ = ["hit_by", "plain"]


def plain(text: str) -> str:
    """Lower case, single blanks. Letters of any alphabet stay."""
    return " ".join(text.casefold().split())


def hit_by(text: str, words: Iterable[str]) -> bool:
    """Whether `text` is one of the plain words; a word that ends in * stands for all that begin so."""
    found = plain(text)
    return any(found.startswith(word[:-1]) if word.endswith("*") else found == word for word in words)
