"""What a map of a long table says about each characteristic: which quantity it is, and in which forms it counts."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

from aquabuf.readings.cells import parse_choice
from aquabuf.readings.headers import Column, nearest_names
from aquabuf.readings.long.words import plain
from aquabuf.readings.mapping import _NEGATIVE, _Place, _values
from aquabuf.readings.schema import Index, Quantity
from aquabuf.units import find_basis, key, parse_unit

__all__ = ["Form", "Forms", "form_of", "read_characteristics", "word_list"]

_KEYS = ("is", "fraction", "speciation", "as", "unit", "negative", "with")


@dataclass(frozen=True, slots=True, kw_only=True)
class Form:
    """One way to take a characteristic. Of several results of one quantity in a sample the lowest rank is used."""

    quantity: Quantity
    rank: int = 0  # of its first fraction
    fractions: tuple[str, ...] = ()  # plain words, the best first; empty = any
    speciations: tuple[str, ...] = ()  # plain words; empty = any
    basis: str = ""  # of a mass for which neither speciation nor unit states one
    unit: str = ""  # where the cell of the unit is blank
    negative: str = "keep"
    words: tuple[tuple[Column, str], ...] = ()  # what else the sample gets when such a result is used


Forms = Mapping[str, tuple[Form, ...]]  # by plain characteristic


def form_of(forms: Sequence[Form], fraction: str, speciation: str) -> tuple[Form, int] | None:
    """The first form that a result fits, and its rank; None when it fits none."""
    fraction, speciation = plain(fraction), plain(speciation)
    for form in forms:
        if form.speciations and speciation not in form.speciations:
            continue
        if not form.fractions:
            return form, form.rank
        if fraction in form.fractions:
            return form, form.rank + form.fractions.index(fraction)
    return None


def word_list(place: _Place, where: str, value: Any) -> tuple[str, ...]:
    """One word or a list of words, plain; "" stands for a blank cell."""
    found = [value] if isinstance(value, str) else value
    if not isinstance(found, list) or not found or not all(isinstance(word, str) for word in found):
        raise place.error(where, f'must be a word or a list of words, e.g. ["Dissolved", "Total"]; found {value!r}.')
    return tuple(map(plain, found))


def _quantity(place: _Place, where: str, name: Any, index: Index) -> tuple[Quantity, str]:
    """The quantity that a name means, and the basis its words state."""
    if not isinstance(name, str):
        raise place.error(where, f'must be the name of a quantity in quotes, e.g. "calcium"; found {name!r}.')
    by_column = {quantity.name: (quantity, "") for meanings in index.values() for quantity, _ in meanings}
    found = [by_column[name]] if name in by_column else index.get(key(name), ())
    if not found:
        near = nearest_names(name, index)
        hint = f"The nearest are {', '.join(near)}." if near else "`aquabuf columns` lists them."
        raise place.error(where, f"no quantity is named {name!r}; a name without its unit is needed. {hint}")
    quantity, basis = found[0]
    if len(found) > 1 or not quantity.is_number:
        raise place.error(where, f"must be one quantity measured as a number; found {name!r}. Use its column name.")
    return quantity, basis


def _words(place: _Place, where: str, entries: Any, index: Index) -> tuple[tuple[Column, str], ...]:
    """What `with` gives the sample: words of columns that are no numbers."""
    found = []
    for column, value in _values(place, place.table(where, entries), index):
        word = value if column.quantity.kind == "text" else parse_choice(str(value), column.quantity)
        if column.quantity.kind not in ("text", "choice") or word is None:
            allowed = ", ".join(dict.fromkeys(word for _, word in column.quantity.choices)) or "a column of words"
            raise place.error(f"{where} {column.name}", f"must be one of: {allowed}; found {value!r}.")
        found.append((column, str(word)))
    return tuple(found)


def _check_unit(place: _Place, where: str, quantity: Quantity, text: Any) -> str:
    if not isinstance(text, str) or parse_unit(text, quantity.dimension) is None:
        raise place.error(where, f"must be a unit of {quantity.base}, e.g. {quantity.house_unit!r}; found {text!r}.")
    return text


def _check_basis(place: _Place, where: str, quantity: Quantity, text: Any) -> str:
    basis = find_basis(text) if isinstance(text, str) else ""
    if basis not in quantity.bases:
        allowed = ", ".join(quantity.bases) or "nothing: it has no basis"
        raise place.error(where, f"must be one of: {allowed}; found {text!r}.")
    return basis


def _form(place: _Place, where: str, value: Any, index: Index, lists: Mapping[str, tuple[str, ...]]) -> Form:
    """One form from its entry, its rank still open."""
    entry = place.table(where, {"is": value} if isinstance(value, str) else value)
    place.known(where, entry, _KEYS)
    if "is" not in entry:
        raise place.error(where, "the key 'is' is missing. Name the quantity, e.g. is = \"calcium\".")
    quantity, basis = _quantity(place, where, entry["is"], index)
    fraction = entry.get("fraction")
    named = lists.get(fraction) if isinstance(fraction, str) else None
    fractions = () if fraction is None else named or word_list(place, f"{where} fraction", fraction)
    speciation = entry.get("speciation")
    return Form(
        quantity=quantity,
        fractions=fractions,
        speciations=() if speciation is None else word_list(place, f"{where} speciation", speciation),
        basis=_check_basis(place, f"{where} as", quantity, entry["as"]) if "as" in entry else basis,
        unit=_check_unit(place, f"{where} unit", quantity, entry["unit"]) if "unit" in entry else "",
        negative=place.choice(f"{where} negative", entry.get("negative", "keep"), _NEGATIVE),
        words=_words(place, f"{where} with", entry.get("with", {}), index),
    )


def read_characteristics(
    place: _Place, entries: Mapping[str, Any], index: Index, lists: Mapping[str, tuple[str, ...]]
) -> Forms:
    """The section [characteristics], checked; the order of the file is the order of preference."""
    found: dict[str, tuple[Form, ...]] = {}
    rank = 0
    for name, value in entries.items():
        where = f"[characteristics] {name!r}"
        if plain(name) in found:
            raise place.error(where, "is listed twice; case and blanks do not count. Remove one.")
        forms: list[Form] = []
        listed = value if isinstance(value, list) else [value]
        for entry in [] if value == "ignore" else listed:
            form = _form(place, where, entry, index, lists)
            forms.append(replace(form, rank=rank))
            rank += max(1, len(form.fractions))
        found[plain(name)] = tuple(forms)
    return found
