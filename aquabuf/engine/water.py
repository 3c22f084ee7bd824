"""`Water`: the engine for a Python user. Scalars or arrays in, arrays of their common shape out."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import as_rows, exp10
from aquabuf.chem import gases
from aquabuf.engine import buffer, precipitate
from aquabuf.engine.balance import fractions, protons_lost
from aquabuf.engine.build import SUFFIX, build_state, checked
from aquabuf.engine.conditions import conditions
from aquabuf.engine.pairs import solve_pair
from aquabuf.engine.state import CARBONATE_FORMS, PH_SCALES, Exchange, State
from aquabuf.engine.status import OUT_OF_RANGE, STATUS_WORDS
from aquabuf.errors import InputError, InputRangeError

__all__ = ["Water"]

Array = NDArray[np.float64]


class Water:
    """One or many waters with their acid-base equilibrium solved; read-only.

    Make one with `from_ph_alkalinity`, `from_alkalinity_dic`, `from_ph_dic`, `from_alkalinity_pco2`, `from_ph_pco2`
    or `from_dic_pco2`. All take, beside their pair:

    t_c : temperature, 0 to 50. [°C]
    salinity : practical, 0 to 50; below 1 the water is fresh, from 1 on it is marine. [-]
    ionic_strength_mol_l : of fresh rows; without it the larger of what salinity and alkalinity imply. [mol/L]
    pressure_atm : air pressure. [atm]
    <acid>_mol_l : total of a weak acid of the shipped table or of `acids`, such as phosphate_mol_l. Boron, sulfate
        and fluoride that are not given (or nan) come from salinity in marine rows and are zero in fresh ones. [mol/L]
    calcium_mol_l, magnesium_mol_l, sodium_mol_l, potassium_mol_l : for calcium carbonate. Calcium from salinity in
        marine rows where not given; the others count as none where not given or nan. [mol/L]
    acids : the user's own `Acid` records.
    carbonic, boron_ratio : marine constant set ("millero" or "lueker") and boron ratio ("uppstrom" or "lee").

    One bad row never stops or changes another: see `status`, and `status_words` for its meaning. Raises InputError
    only for unknown names and shapes that do not fit.
    """

    def __init__(self, state: State, shape: tuple[int, ...], options: dict):
        self._state = state
        self._shape = shape
        self._options = options

    @classmethod
    def _make(cls, known: Mapping[str, ArrayLike], ph_scale: str = "meter", **water: Any) -> Water:
        if "t_c" not in water:
            raise InputError("a water needs its temperature; t_c is missing. Give t_c in °C.")
        return cls(*build_state(known, ph_scale, **water))

    def __repr__(self) -> str:
        solved = int((self._state.status >= 0).sum())
        ph = self._state.ph()[self._state.status >= 0]
        spread = f", pH {ph.min():.2f} to {ph.max():.2f}" if solved else ""
        return f"<Water: {self._state.status.size} rows, {solved} solved{spread}>"

    # ---------------------------------------------------------------- making one

    @classmethod
    def from_ph_alkalinity(cls, *, ph: ArrayLike, alkalinity_eq_l: ArrayLike, ph_scale: str = "meter",
                           **water: Any) -> Water:
        """Water of known pH (on `ph_scale`: meter, total, seawater, free) and alkalinity [eq/L]."""
        return cls._make({"ph": ph, "alkalinity": alkalinity_eq_l}, ph_scale, **water)

    @classmethod
    def from_alkalinity_dic(cls, *, alkalinity_eq_l: ArrayLike, dic_mol_l: ArrayLike, **water: Any) -> Water:
        """Water of known alkalinity [eq/L] and total inorganic carbon [mol/L]."""
        return cls._make({"alkalinity": alkalinity_eq_l, "dic": dic_mol_l}, **water)

    @classmethod
    def from_ph_dic(cls, *, ph: ArrayLike, dic_mol_l: ArrayLike, ph_scale: str = "meter", **water: Any) -> Water:
        """Water of known pH (on `ph_scale`) and total inorganic carbon [mol/L]."""
        return cls._make({"ph": ph, "dic": dic_mol_l}, ph_scale, **water)

    @classmethod
    def from_alkalinity_pco2(cls, *, alkalinity_eq_l: ArrayLike, pco2_atm: ArrayLike, **water: Any) -> Water:
        """Water of known alkalinity [eq/L] in equilibrium with a CO2 pressure [atm]."""
        return cls._make({"alkalinity": alkalinity_eq_l, "pco2": pco2_atm}, **water)

    @classmethod
    def from_ph_pco2(cls, *, ph: ArrayLike, pco2_atm: ArrayLike, ph_scale: str = "meter", **water: Any) -> Water:
        """Water of known pH (on `ph_scale`) and CO2 pressure [atm]."""
        return cls._make({"ph": ph, "pco2": pco2_atm}, ph_scale, **water)

    @classmethod
    def from_dic_pco2(cls, *, dic_mol_l: ArrayLike, pco2_atm: ArrayLike, **water: Any) -> Water:
        """Water of known total inorganic carbon [mol/L] and CO2 pressure [atm]."""
        return cls._make({"dic": dic_mol_l, "pco2": pco2_atm}, **water)

    # ---------------------------------------------------------------- what it is

    def _out(self, rows: NDArray) -> NDArray:
        return rows.reshape(self._shape)

    @property
    def shape(self) -> tuple[int, ...]:
        """Common shape of what was given."""
        return self._shape

    @property
    def status(self) -> NDArray[np.int8]:
        """0 solved, 1 solved outside a constant's range, negative not solved; see `status_words`."""
        return self._out(self._state.status)

    @property
    def status_words(self) -> NDArray[np.str_]:
        """Status of each row in words."""
        words = np.array([STATUS_WORDS[int(s)] for s in self._state.status] or [""])
        return self._out(words[: self._state.status.size])

    def require_solved(self) -> Water:
        """This water, if every row is solved. Raises InputRangeError whose `mask` marks the rows that are not."""
        bad = self.status < 0
        if bad.any():
            first = int(self._state.status[np.flatnonzero(bad.ravel())[0]])
            hint = " Is a temperature in °F?" if first == OUT_OF_RANGE else ""
            raise InputRangeError(f"{int(bad.sum())} of {bad.size} waters are not solved; first: row "
                                  f"{int(np.flatnonzero(bad.ravel())[0])}, {STATUS_WORDS[first]}.{hint} "
                                  f"Correct or leave out the rows in `mask`.", bad)
        return self

    @property
    def residual_eq_l(self) -> Array:
        """Imbalance left in the alkalinity at the solution. [eq/L]"""
        return self._out(self._state.residual)

    @property
    def ph(self) -> Array:
        """pH as a meter calibrated with standard buffers reads it. [-]"""
        return self.ph_on("meter")

    @property
    def ph_total(self) -> Array:
        """pH on the total scale (mol/kg). [-]"""
        return self.ph_on("total")

    def ph_on(self, scale: str) -> Array:
        """pH on `scale`: meter, total, seawater or free. Raises InputError for another name."""
        return self._out(self._state.ph(checked(scale, PH_SCALES, "the pH scale", "Use 'meter' for a usual meter.")))

    @property
    def alkalinity_eq_l(self) -> Array:
        """Total alkalinity, signed. [eq/L]"""
        return self._out(self._state.alkalinity)

    @property
    def dic_mol_l(self) -> Array:
        """Total inorganic carbon. [mol/L]"""
        return self._out(self._state.dic)

    @property
    def pco2_atm(self) -> Array:
        """Partial pressure of CO2 in gas at equilibrium with the water. [atm]"""
        return self._out(self._state.co2 / self._state.conditions.k0)

    def pco2_air_ratio(self, co2_ppm: ArrayLike = gases.AIR_CO2_PPM) -> Array:
        """CO2 pressure over that of air with `co2_ppm` (dry mole fraction); above 1 the water gives CO2 off. [-]"""
        return self.pco2_atm / self._air_pco2(co2_ppm)

    def _air_pco2(self, co2_ppm: ArrayLike) -> Array:
        return gases.pco2_of_air(self._numbers(co2_ppm, "co2_ppm"), self.t_c, self.pressure_atm, self.salinity)

    def _numbers(self, value: ArrayLike, name: str) -> Array:
        """`value` as numbers that broadcast with this water. Raises InputError otherwise."""
        try:
            numbers = np.asarray(value, dtype=float)
            np.broadcast_shapes(numbers.shape, self._shape)
        except (TypeError, ValueError):
            raise InputError(f"{name} and the water must be numbers that broadcast to one shape; the water has "
                             f"{self._shape}, found {value!r}. Give one value, or one per row.") from None
        return numbers

    @property
    def t_c(self) -> Array:
        """Temperature. [°C]"""
        return self._out(self._state.conditions.t_c)

    @property
    def salinity(self) -> Array:
        """Practical salinity. [-]"""
        return self._out(self._state.conditions.salinity)

    @property
    def ionic_strength_mol_l(self) -> Array:
        """Ionic strength that the activity coefficients were taken at. [mol/L; mol/kg of water if marine]"""
        return self._out(self._state.conditions.ionic_strength_mol_l)

    @property
    def is_marine(self) -> NDArray[np.bool_]:
        """True where salinity is 1 or more."""
        return self._out(self._state.conditions.is_marine)

    @property
    def density_kg_l(self) -> Array:
        """Density. [kg/L]"""
        return self._out(self._state.conditions.density_kg_l)

    @property
    def pressure_atm(self) -> Array:
        """Air pressure. [atm]"""
        return self._out(self._state.conditions.pressure_atm)

    @property
    def state(self) -> State:
        """The solved rows, flattened, for functions of the engine that work on them."""
        return self._state

    @property
    def options(self) -> dict[str, Any]:
        """Acids of the user's own and names of the marine sets this water was made with."""
        return dict(self._options)

    @property
    def total_names(self) -> tuple[str, ...]:
        """Names of the weak acids and ions this water was made with."""
        return tuple(d.acid.name for d in self._state.acids) + tuple(self._state.ions)

    def total_mol_l(self, name: str) -> Array:
        """Total of a weak acid or ion in the water; zero if absent. [mol/L]"""
        for d in self._state.acids:
            if d.acid.name == name:
                return self._out(d.total)
        return self._out(self._state.ions.get(name, np.zeros(self._state.h.shape)))

    @property
    def species_mol_l(self) -> dict[str, Array]:
        """Concentration of every acid-base form by formula; carbonate forms include their ion pairs. [mol/L]"""
        c, s = self._state.conditions, self._state
        out = {f: s.dic * a for f, a in zip(CARBONATE_FORMS, s.carbonate_fractions(), strict=True)}
        for d, family in zip(s.acids, s.families, strict=True):
            alpha = fractions(family.k, 1.0 / s.h)
            out |= {form: d.total * a for form, a in zip(d.acid.species, alpha, strict=True)}
        out |= {"H+": c.c_h * s.h, "OH-": c.c_oh / s.h}
        return {form: self._out(v) for form, v in out.items()}

    def charge_eq_l(self, name: str) -> Array:
        """Charge that a weak acid carries, all its forms together; "carbonate" for inorganic carbon. [eq/L]"""
        s = self._state
        if name == "carbonate":
            return self._out(-s.dic * protons_lost(s.carbonate_fractions()))
        for d, family in zip(s.acids, s.families, strict=True):
            if d.acid.name == name:
                lost = protons_lost(fractions(family.k, 1.0 / s.h))
                return self._out(d.total * (d.acid.charge_full - lost))
        raise InputError(f"no acid {name!r} is in this water; it holds carbonate"
                         f"{''.join(', ' + d.acid.name for d in s.acids)}. Give {name}{SUFFIX} when making the water.")

    # ---------------------------------------------------------------- buffering

    def buffer_intensity_eq_l(self, exchange: Exchange = "closed") -> Array:
        """dC_base/dpH: closed, or open with the CO2 pressure it has now held. [eq/L per pH]"""
        s = self._state
        return self._out(buffer.buffer_intensity(s, co2=s.co2 if _checked_exchange(exchange) == "open" else None))

    def buffer_by_pair(self) -> dict[str, Array]:
        """Closed buffer intensity split by conjugate pair and the water itself; the parts add up. [eq/L per pH]"""
        return {p.label: self._out(p.intensity) for p in buffer.pair_shares(self._state)}

    def effective_ranges(self) -> dict[str, tuple[Array, Array, NDArray[np.bool_]]]:
        """Per conjugate pair: lowest and highest meter pH of its range (pKa - 1, pKa + 1), and whether pH is in it."""
        reach = buffer.EFFECTIVE_RANGE
        return {p.label: (self._out(p.pka - reach), self._out(p.pka + reach), self._out(p.in_range))
                for p in buffer.pair_shares(self._state) if p.label not in (buffer.HYDROGEN, buffer.HYDROXIDE)}

    def carrier(self) -> buffer.Carrier:
        """The pair that buffers most now, its base-to-acid ratio, and the acid and base left in its range."""
        found = buffer.carrier(self._state)
        return buffer.Carrier(**{n: self._out(getattr(found, n)) for n in found.__dataclass_fields__})

    def weakest_buffering(self) -> buffer.Weakest:
        """The pH of weakest buffering near the sample, the intensity there, and how far it is."""
        found = buffer.weakest_buffering(self._state)
        return buffer.Weakest(**{n: self._out(getattr(found, n)) for n in found.__dataclass_fields__})

    def acid_to_ph_eq_l(self, ph: ArrayLike, exchange: Exchange = "closed", *,
                        pco2_atm: ArrayLike | None = None) -> Array:
        """Strong acid that brings the water to a meter pH; negative if base is needed. [eq/L]

        Closed: carbon stays. Open: the water is kept at `pco2_atm` (its own by default).
        """
        target = self._numbers(ph, "ph")
        if np.broadcast_shapes(target.shape, self._shape) != self._shape:
            raise InputError(f"ph and the water must have one shape; the water has {self._shape}, found "
                             f"{target.shape}. Ask for one pH after the other, or use curve().")
        rows = as_rows(target, self._shape).reshape(-1) if target.ndim else target
        return self._out(buffer.acid_to_ph(self._state, rows, co2=self._held_co2(exchange, pco2_atm)))

    def base_to_ph_eq_l(self, ph: ArrayLike, exchange: Exchange = "closed", *,
                        pco2_atm: ArrayLike | None = None) -> Array:
        """Strong base that brings the water to a meter pH; negative if acid is needed. [eq/L]"""
        return -self.acid_to_ph_eq_l(ph, exchange, pco2_atm=pco2_atm)

    def _held_co2(self, exchange: Exchange, pco2_atm: ArrayLike | None) -> Array | None:
        if _checked_exchange(exchange) == "closed":
            return None
        if pco2_atm is None:
            return self._state.co2
        held = self._numbers(pco2_atm, "pco2_atm")
        if np.broadcast_shapes(held.shape, self._shape) != self._shape:
            raise InputError(f"pco2_atm and the water must have one shape; the water has {self._shape}, found "
                             f"{held.shape}. Make the water with one row per pressure.")
        return as_rows(held, self._shape).reshape(-1) * self._state.conditions.k0

    def curve(self, ph: ArrayLike, exchange: Exchange = "closed", *, pco2_atm: ArrayLike | None = None,
              ) -> tuple[Array, Array]:
        """Strong acid added [eq/L] and buffer intensity [eq/L per pH] at each of the meter pH values `ph` (1-D).

        Shape of both: the water's own shape followed by that of `ph`.
        """
        try:
            points = np.atleast_1d(np.asarray(ph, dtype=float))
        except (TypeError, ValueError):
            points = np.zeros((0, 0))
        if points.ndim != 1:
            raise InputError(f"the pH values of a curve must be numbers in one row; found {ph!r}. Correct them.")
        found = buffer.curve(self._state, points, co2=self._held_co2(exchange, pco2_atm))
        added, intensity = (v.reshape(self._shape + points.shape) for v in found)
        return added, intensity

    # ---------------------------------------------------------------- changing it

    def after_acid(self, acid_eq_l: ArrayLike, exchange: Exchange = "closed", *,
                   pco2_atm: ArrayLike | None = None) -> Water:
        """The water after strong acid (negative: base) that adds no carbon; ionic strength and volume are held."""
        alk = self.alkalinity_eq_l - self._numbers(acid_eq_l, "acid_eq_l")
        if _checked_exchange(exchange) == "closed":
            return self._again({"alkalinity": alk, "dic": self.dic_mol_l})
        held = self.pco2_atm if pco2_atm is None else self._numbers(pco2_atm, "pco2_atm")
        return self._again({"alkalinity": alk, "pco2": held})

    def at_pco2(self, pco2_atm: ArrayLike) -> Water:
        """The water after it has come to equilibrium with a CO2 pressure [atm]; alkalinity stays."""
        return self._again({"alkalinity": self.alkalinity_eq_l, "pco2": self._numbers(pco2_atm, "pco2_atm")})

    def at_air(self, co2_ppm: ArrayLike = gases.AIR_CO2_PPM) -> Water:
        """The water in equilibrium with air of `co2_ppm` (dry mole fraction) at its own pressure and temperature."""
        return self.at_pco2(self._air_pco2(co2_ppm))

    def at_temperature(self, t_c: ArrayLike) -> Water:
        """The closed sample at another temperature: amounts per kilogram stay, pH and CO2 pressure follow. [°C]"""
        t = self._numbers(t_c, "t_c")
        shape = np.broadcast_shapes(t.shape, self._shape)
        new = conditions(as_rows(t, shape).reshape(-1), as_rows(self.salinity, shape).reshape(-1))
        ratio = new.density_kg_l.reshape(shape) / self.density_kg_l
        water = {n: v * ratio if n.endswith(SUFFIX) else v for n, v in self._given().items()}
        known = {"alkalinity": self.alkalinity_eq_l * ratio, "dic": self.dic_mol_l * ratio}
        return self._make(known, **(self._options | water | {"t_c": t}))

    def _again(self, known: Mapping[str, ArrayLike]) -> Water:
        """Another pair for the same totals and conditions; one water becomes many where the pair has many rows."""
        s = self._state
        if np.broadcast_shapes(self._shape, *(np.shape(v) for v in known.values())) != self._shape:
            return self._make(known, **(self._options | self._given()))
        flat = {name: as_rows(v, self._shape).reshape(-1) for name, v in known.items()}
        return type(self)(solve_pair(flat, s.conditions, s.acids, s.ions), self._shape, self._options)

    def _given(self) -> dict[str, Array]:
        """Everything but the pair, as keywords of a constructor."""
        s, c = self._state, self._state.conditions
        out = {f"{d.acid.name}{SUFFIX}": self._out(d.total) for d in s.acids}
        out |= {f"{name}{SUFFIX}": self._out(v) for name, v in s.ions.items()}
        return out | {"t_c": self.t_c, "salinity": self.salinity, "pressure_atm": self._out(c.pressure_atm),
                      "ionic_strength_mol_l": self.ionic_strength_mol_l}

    # ---------------------------------------------------------------- calcium carbonate

    def saturation_index(self, mineral: str = "calcite") -> Array:
        """log10 of saturation with "calcite", "aragonite" or "vaterite" (fresh only); nan without calcium. [-]"""
        return self._out(precipitate.saturation_index(precipitate.pairing(self._state), _checked_mineral(mineral)))

    def saturation_ratio(self, mineral: str = "calcite") -> Array:
        """Ion activity product over solubility product. [-]"""
        return exp10(self.saturation_index(mineral))

    def precipitation_potential_mol_l(self, mineral: str = "calcite") -> Array:
        """Mineral that would precipitate (positive) or dissolve (negative) on the way to equilibrium. [mol/L]"""
        return self._out(precipitate.precipitation_potential(
            precipitate.pairing(self._state), _checked_mineral(mineral))[0])

    def ph_at_saturation(self, mineral: str = "calcite") -> Array:
        """Meter pH once the mineral has come to equilibrium with the closed water. [-]"""
        return self._out(precipitate.precipitation_potential(
            precipitate.pairing(self._state), _checked_mineral(mineral))[1])


def _checked_exchange(exchange: str) -> str:
    return checked(exchange, ("closed", "open"), "exchange", "Closed keeps the carbon, open holds the CO2 pressure.")


def _checked_mineral(mineral: str) -> str:
    return checked(mineral, precipitate.MINERALS, "the mineral", "Use 'calcite' unless you know better.")
