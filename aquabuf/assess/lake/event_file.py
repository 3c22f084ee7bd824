"""The user's own event water, melt or storm water (TOML), checked key by key.

[event]
name = "first melt"                 needed
fraction = [0.2, 0.4]               needed: one share of event water or several, above 0 and at most 1
relative_uncertainty = 0.2          if wanted: of every value that has no uncertainty of its own
[water]
temperature_c = 1.0                 needed
"sulfate (µeq/L)" = 45              ions, DOC, aluminum, ANC, pH, carbon: headers as in a table of readings
"sulfate_u (µeq/L)" = 3             standard uncertainty, if wanted
anc_method = "gran"                 needed with anc: gran, curve_fit or charge_balance
"""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import LN10
from aquabuf.assess.lake.budget import NEEDED, gran_leaves_out
from aquabuf.assess.lake.episode import completed, ion_anc, water_of
from aquabuf.assess.lake.inputs import IONS, Lakes, setting_of
from aquabuf.assess.uncertainty import drawn
from aquabuf.chem.organic import OrganicModel
from aquabuf.errors import FileError, InputError
from aquabuf.readings.entries import is_number, read_entries
from aquabuf.readings.schema import Quantity, quantities

__all__ = ["DEFAULT_RELATIVE_U", "EventWater", "read_event", "water_of_event"]

Array = NDArray[np.float64]

DEFAULT_RELATIVE_U = 0.2  # one sample stands for a whole event; common practice, no source
GRAN_LIKE, BY_CHARGE = ("gran", "curve_fit"), "charge_balance"
TEMPERATURE, METHOD, PH, ANC = "temperature_c", "anc_method", "ph", "anc_eq_l"
CARBON = ("dic_mol_l", "pco2_atm")
_EVENT_KEYS = ("name", "fraction", "relative_uncertainty")
_APART = 0x5EED  # event and lake readings of one name must not be drawn alike


@dataclass(frozen=True, slots=True, kw_only=True)
class EventWater:
    """Event water as given: house units by column name, and the standard uncertainty of each value that has one.

    fractions : shares of event water asked for. anc_method : of a given ANC, "" where none is given.
    default_u : relative uncertainty that values without their own were given. [-]
    """

    name: str
    fractions: tuple[float, ...]
    values: Mapping[str, float]
    u: Mapping[str, float]
    anc_method: str
    default_u: float

    @property
    def missing_ions(self) -> tuple[str, ...]:
        """Ions without which there is no charge balance, and no telling what took the ANC."""
        return tuple(ion for ion in NEEDED if f"{ion}_mol_l" not in self.values)

    @property
    def anc_from(self) -> str:
        """What the ANC rests on."""
        if ANC in self.values:
            return "ANC given by charge balance" if self.anc_method == BY_CHARGE else f"ANC given ({self.anc_method})"
        return "pH" if self.missing_ions else "ions"

    @property
    def carbon_from(self) -> str:
        """What the inorganic carbon rests on."""
        given = next((name for name in CARBON if name in self.values), "")
        words = {"dic_mol_l": "inorganic carbon given", "pco2_atm": "CO2 pressure given"}
        return words.get(given, "equilibrium with air")

    def in_words(self) -> list[str]:
        """What is known of the event water, and what is left out or counted as none, a line each."""
        lines = [f"{self.name}: ANC from {self.anc_from}, carbon from {self.carbon_from}"]
        if self.missing_ions:
            lines.append(f"ions not given: {', '.join(self.missing_ions)}; what took the ANC cannot be told")
        none = [name for name, column in (("ammonium", "ammonium_mol_l"), ("organic carbon", "doc_mg_l"),
                                          ("aluminum", "aluminum_mol_l")) if column not in self.values]
        if none:
            lines.append(f"counted as none: {', '.join(none)}")
        if PH in self.values and self.anc_from != "pH":
            lines.append("its pH is not used, because its ANC is known")
        lines.append(f"uncertainty where none is given: {100 * self.default_u:g} % and the floor of the column table")
        return lines

    def drawn(self, draws: int, seed: int) -> dict[str, Array]:
        """Values by column name as arrays of shape (1, draws); without draws the values themselves, (1, 1)."""
        rows = {name: np.array([value]) for name, value in self.values.items()}
        if not draws:
            return {name: value[None, :] for name, value in rows.items()}
        u = {name: np.array([value]) for name, value in self.u.items()}
        return {name: many[None, :] for name, many in drawn(rows, u, draws, seed ^ _APART, u).items()}


def water_of_event(event: EventWater, organic: OrganicModel, air_co2_ppm: float, *, draws: int = 0, seed: int = 1,
                   organic_error: Array | float = 1.0) -> dict[str, Array]:
    """Event water as `episode.mix` wants it; ions that are not given are nan, but ammonium then counts as none.

    A titrated ANC becomes the charge-balance one: with the organic anions, less the aluminum, that a Gran line leaves
    out. `organic_error` is the factor on organic anions that the lakes were drawn with.
    """
    setting = setting_of({name: np.array([value]) for name, value in event.values.items()}, air_co2_ppm)
    lakes = Lakes(event.drawn(draws, seed), setting, organic, np.atleast_2d(organic_error))
    water = water_of(lakes)
    left_organic, left_aluminum = gran_leaves_out(lakes)
    if ANC in event.values:
        anc = lakes.get(ANC) + (0.0 if event.anc_method == BY_CHARGE else left_organic - left_aluminum)
    else:
        anc = ion_anc(water) - np.nan_to_num(lakes.charge("fluoride"))
    held = np.where(np.isfinite(lakes.get("pco2_atm")), lakes.get("pco2_atm") * setting.lake.k0, setting.air_co2_mol_l)
    anc, dic = completed(lakes.balance(), anc=anc, ph=lakes.get(PH), dic=lakes.get("dic_mol_l"), co2=held)
    return water | {"anc_eq_l": anc, "dic_mol_l": dic}


def read_event(path: str | Path) -> EventWater:
    """Read and check a file of event water. Raises FileError or InputError naming file, key, value and remedy."""
    path = Path(path)
    content = _toml(path)
    for key in content:
        if key not in ("event", "water"):
            raise InputError(f"{path.name}: tables must be [event] and [water]; found {key!r}. Put the key into one of "
                             f"them.")
    event, water = (_table(path.name, content, key) for key in ("event", "water"))
    for key in event:
        if key not in _EVENT_KEYS:
            raise InputError(f"{path.name}, [event]: keys must be {', '.join(_EVENT_KEYS)}; found {key!r}. "
                             f"Values of the water go into [water].")
    name = event.get("name")
    if not isinstance(name, str) or not name.strip():
        raise InputError(f"{path.name}, [event]: name must be text; found {name!r}. Write name = \"first melt\".")
    relative = _relative(path.name, event.get("relative_uncertainty", DEFAULT_RELATIVE_U))
    method = _method(path.name, water)
    values, own_u = _values(path.name, {key: value for key, value in water.items() if key != METHOD})
    _check_enough(path.name, values, method)
    u = {n: own_u.get(n, _default_u(quantities()[n], v, relative)) for n, v in values.items() if n != TEMPERATURE}
    return EventWater(name=name.strip(), fractions=_fractions(path.name, event.get("fraction")), values=values, u=u,
                      anc_method=method, default_u=relative)


def _toml(path: Path) -> dict[str, object]:
    try:
        return tomllib.loads(path.read_text(encoding="utf-8-sig"))
    except (OSError, UnicodeDecodeError) as error:
        reason = error.strerror if isinstance(error, OSError) and error.strerror else "not UTF-8 text"
        raise FileError(f"the file of event water {path.name} cannot be read: {reason}. Check the path.") from None
    except tomllib.TOMLDecodeError as error:
        raise InputError(f"{path.name} is not valid TOML: {error}. Correct that line.") from None


def _table(file: str, content: Mapping[str, object], key: str) -> dict[str, object]:
    found = content.get(key)
    if not isinstance(found, dict):
        raise InputError(f"{file}: [{key}] must be a table of keys and values; found {found!r}. Write [{key}] "
                         f"and its keys below.")
    return found


def _fractions(file: str, given: object) -> tuple[float, ...]:
    listed = given if isinstance(given, list) else [given]
    shares = [float(f) for f in listed if is_number(f) and 0.0 < f <= 1.0]
    if not shares or len(shares) < len(listed):
        raise InputError(f"{file}, [event]: fraction must be one share of event water or a list of them, above 0 and "
                         f"at most 1; found {given!r}. Write 40 % as fraction = 0.4.")
    return tuple(dict.fromkeys(shares))


def _relative(file: str, given: object) -> float:
    if is_number(given) and 0.0 <= given <= 2.0:
        return float(given)
    raise InputError(f"{file}, [event]: relative_uncertainty must be a number from 0 to 2; found {given!r}. "
                     f"Write 20 % as 0.2.")


def _method(file: str, water: Mapping[str, object]) -> str:
    allowed = (*GRAN_LIKE, BY_CHARGE)
    given = water.get(METHOD, "")
    if METHOD in water and given not in allowed:
        raise InputError(f"{file}, [water]: {METHOD} must be one of {', '.join(allowed)}; found {given!r}. An ANC to "
                         f"a fixed end point is another quantity: leave it out and give the ions or the pH.")
    return str(given)


@cache
def _allowed() -> dict[str, Quantity]:
    names = (TEMPERATURE, *(f"{ion}_mol_l" for ion in IONS), "doc_mg_l", "aluminum_mol_l", ANC, PH, *CARBON)
    return {name: quantities()[name] for name in names}


def _values(file: str, entries: Mapping[str, object]) -> tuple[Mapping[str, float], Mapping[str, float]]:
    """Values and standard uncertainties by column name of the value, in house units."""
    found = read_entries(entries, _allowed(), lambda key: f"{file}, [water] {key!r}", beside=(METHOD,))
    found.check_u(f"{file}, [water]", quantities())
    return found.values, found.u


def _check_enough(file: str, values: Mapping[str, float], method: str) -> None:
    """Temperature, and one way to an ANC."""
    if TEMPERATURE not in values:
        raise InputError(f"{file}, [water]: the temperature is needed; it is missing. Add for example "
                         f"{TEMPERATURE} = 1.0.")
    if (ANC in values) != bool(method):
        what, found = (METHOD, "anc alone") if ANC in values else ("anc", f"{METHOD} alone")
        raise InputError(f"{file}, [water]: anc and {METHOD} must come together; found {found}. Add {what}.")
    missing = [ion for ion in NEEDED if f"{ion}_mol_l" not in values]
    if missing and ANC not in values and PH not in values:
        raise InputError(f"{file}, [water]: the ANC needs anc, or ph, or all of {', '.join(NEEDED)}; found none of "
                         f"these, {', '.join(missing)} missing. Add one.")


def _default_u(quantity: Quantity, value: float, relative: float) -> float:
    """Standard uncertainty of a value that has none of its own: the floor of the column table and a relative part.

    A relative uncertainty of H+ is one of pH once divided by ln 10.
    """
    if quantity.name == PH:
        return quantity.default_u + relative / LN10
    return quantity.default_u + relative * abs(value)
