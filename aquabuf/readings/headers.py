"""What a column header means: quantity, uncertainty or value, and unit. What is doubtful is an error, not a guess."""

from __future__ import annotations

import difflib
import re
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import NamedTuple

from aquabuf.errors import HeaderError
from aquabuf.readings.schema import Index, Quantity, example_header, label_for, unit_labels, why_not
from aquabuf.units import WITH_BASIS, Unit, find_basis, key, linear, parse_unit

__all__ = ["Column", "column_for", "nearest_names", "parse_header"]

_BRACKETS = re.compile(r"^(?P<name>.*?)\s*[(\[](?P<unit>[^()\[\]]*)[)\]]\s*$", re.DOTALL)
_UNCERTAIN = re.compile(r"_(?:standard_uncertainty|uncertainty|sigma|u)$")
_AS = re.compile(r"^(.+)_as_([a-z0-9_]+)$")


class _Meaning(NamedTuple):
    """One quantity that a header may mean."""

    quantity: Quantity
    is_u: bool  # its standard uncertainty
    basis: str  # that the words state


@dataclass(frozen=True, slots=True, kw_only=True)
class Column:
    """One column of a file: what it holds and how to bring it to house units (value * scale + offset)."""

    header: str
    quantity: Quantity
    is_u: bool = False  # standard uncertainty of the quantity
    unit: Unit | None = None  # None for text, dates and choices
    scale: float = 1.0
    offset: float = 0.0
    negative: str = "keep"  # keep, zero or missing: what to do with values below zero

    @property
    def name(self) -> str:
        """Canonical column name in house units."""
        return self.quantity.u_name if self.is_u else self.quantity.name

    @property
    def unit_label(self) -> str:
        """Unit in the file, in words; "" when there is none."""
        return label_for(self.quantity, self.unit) if self.unit else ""

    def in_file_unit(self, house: float) -> float:
        """A house value as the file would show it, rounded to the six figures a message needs."""
        return float(f"{(house - self.offset) / self.scale:.6g}")


def nearest_names(name: str, index: Index, count: int = 3) -> list[str]:
    """Canonical names whose header resembles `name`, the best first."""
    plain = key(name)
    close = difflib.get_close_matches(plain, index, n=3 * count, cutoff=0.6)
    words = [known for known in index if len(known) > 3 and known in plain]
    return list(dict.fromkeys(quantity.name for known in (*close, *words) for quantity, _ in index[known]))[:count]


def _lookup(name: str, index: Index) -> list[_Meaning]:
    """What a header name without unit may mean; empty when it is not known."""
    stated = _AS.match(name)
    basis = find_basis(stated[2]) if stated else ""
    for candidate in (name, stated[1] if stated and basis else ""):
        bare = _UNCERTAIN.sub("", candidate)
        for known in (candidate, bare):
            if known in index:
                said = basis if candidate != name else ""
                return [_Meaning(quantity, known != candidate, own or said) for quantity, own in index[known]]
    return []


def _with_unit(header: str, meanings: Sequence[_Meaning], text: str) -> Column | None:
    """The column of the first meaning that `text` is a unit of; None when it is a unit of none."""
    for quantity, is_u, basis in meanings:
        unit = parse_unit(text, quantity.dimension) if quantity.is_number else None
        if unit is not None:
            return column_for(header, quantity, unit, is_u=is_u, basis=basis)
    return None


def _without_unit(header: str, meanings: Sequence[_Meaning]) -> Column:
    """The column of a header that says no unit; HeaderError where one is needed."""
    if len(meanings) > 1:
        raise _units_missing(header, [meaning.quantity for meaning in meanings])
    quantity, is_u, basis = meanings[0]
    default = quantity.house if quantity.is_number and quantity.has_default_unit else None
    return column_for(header, quantity, default, is_u=is_u, basis=basis)


def _ambiguous(header: str, quantity: Quantity, unit: Unit) -> HeaderError:
    ways = [replace(unit, basis=basis) for basis in quantity.bases]
    labels = " or ".join(f"{way.unit} as {way.basis}" for way in ways)
    names = " or ".join(f"{quantity.base}_{way.suffix}_{key(way.basis)}" for way in ways)
    return HeaderError(
        f"column {header!r} is ambiguous: {unit.unit} of {quantity.base} can mean {labels}, which are different "
        f"amounts. Rename it to {names}, or say the unit in a map file."
    )


def column_for(header: str, quantity: Quantity, unit: Unit | None, *, is_u: bool = False, basis: str = "") -> Column:
    """The column of a known quantity and unit; HeaderError when they do not go together.

    `basis` is what the words of the header state ("NO3-N"), used when the unit itself states none.
    """
    if not quantity.is_number:
        return Column(header=header, quantity=quantity)
    if unit is None:
        raise _unit_missing(header, quantity)
    mass = unit.kind == "mass" and quantity.dimension in WITH_BASIS
    if mass and not unit.basis and quantity.bases:
        chosen = basis or quantity.bare_basis
        if not chosen:
            raise _ambiguous(header, quantity, unit)
        unit = replace(unit, basis=chosen)
    reason = why_not(quantity, unit)
    if reason:
        raise HeaderError(
            f"column {header!r}: {quantity.base} cannot be given in {unit.label}, because {reason}. "
            f"Use one of: {', '.join(unit_labels(quantity))}."
        )
    mass_g, charge = quantity.molar_mass_g, quantity.charge
    scale, offset = linear(unit, quantity.dimension, molar_mass_g=mass_g, charge=charge)
    offset = 0.0 if is_u else offset  # a spread in °F has no zero point
    return Column(header=header, quantity=quantity, is_u=is_u, unit=unit, scale=scale, offset=offset)


def _unit_missing(header: str, quantity: Quantity) -> HeaderError:
    labels = unit_labels(quantity)
    return HeaderError(
        f"column {header!r} needs a unit: {quantity.base} can be in {', '.join(labels)}. "
        f"Write it in the header, e.g. {example_header(quantity)} or '{quantity.base} ({labels[0]})'."
    )


def _units_missing(header: str, quantities: Sequence[Quantity]) -> HeaderError:
    ways = "; ".join(f"{q.base} in {', '.join(unit_labels(q))}" for q in quantities if unit_labels(q) != ["-"])
    bare = [q.name for q in quantities if unit_labels(q) == ["-"]]
    ways += f"; or write {' or '.join(bare)}, which has no unit" if bare else ""
    return HeaderError(
        f"column {header!r} needs a unit, which says what is meant: {ways}. "
        f"Write it in the header, e.g. {example_header(quantities[0])}."
    )


def _unknown_unit(header: str, text: str, quantities: Sequence[Quantity]) -> HeaderError:
    first = quantities[0]
    if not first.is_number or (len(quantities) == 1 and unit_labels(first) == ["-"]):
        return HeaderError(f"column {header!r}: {first.name} takes no unit, found {text!r}. Remove it.")
    names = " or ".join(dict.fromkeys(q.base for q in quantities))
    labels = ", ".join(label for q in quantities for label in unit_labels(q) if label != "-")
    return HeaderError(f"column {header!r}: {text!r} is not a unit of {names}. Use one of: {labels}.")


def _unknown(header: str, index: Index) -> HeaderError:
    near = nearest_names(_BRACKETS.sub(r"\g<name>", header), index)
    hint = f"The nearest known names are {', '.join(near)}. " if near else "No known name is near. "
    return HeaderError(
        f"column {header!r} is not known. {hint}Rename it, remove it, or give its meaning in a map file "
        '([columns], or unlisted = "ignore").'
    )


def _bracketed(header: str, name: str, text: str, index: Index) -> Column | None:
    """Header with its unit apart ("Calcium (mg/L)"); None when the name in front is not known."""
    meanings = _lookup(key(name), index)
    if not meanings:
        return None
    # the brackets may hold a word of the name: "pH (field)"
    column = _with_unit(header, meanings, text) or _suffixed(header, index)
    if column is None:
        raise _unknown_unit(header, text, [meaning.quantity for meaning in meanings])
    return column


def _suffixed(header: str, index: Index) -> Column | None:
    """Header that ends in its unit ("calcium_mg_l"), or has none; the longest known name wins."""
    words = key(header).split("_")
    for cut in range(len(words), 0, -1):
        meanings = _lookup("_".join(words[:cut]), index)
        if meanings and cut == len(words):
            return _without_unit(header, meanings)
        column = _with_unit(header, meanings, "_".join(words[cut:]))
        if column is not None:
            return column
    return None


def parse_header(header: str, index: Index) -> Column:
    """The meaning of a header: "calcium_mg_l", "Calcium (mg/L)", "NO3-N [µg/L]", "alkalinity_u_ueq_l" ...

    Parameters
    ----------
    header
        As it stands in the file.
    index
        Known names, from `schema.name_index`.

    Raises
    ------
    HeaderError
        Unknown name or unit, unit missing where it matters, or two possible readings.
    """
    apart = _BRACKETS.match(header)
    column = _bracketed(header, apart["name"], apart["unit"], index) if apart else None
    if column is None and "," in header:
        name, _, text = header.rpartition(",")
        column = _with_unit(header, _lookup(key(name), index), text)
    column = column or _suffixed(header, index)
    if column is None:
        raise _unknown(header, index)
    return column
