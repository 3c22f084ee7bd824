"""Guard rails of the doses, and what a pump does to the water that is stuck at full stroke or stands still."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.plant.aims import dosed_of
from aquabuf.assess.plant.steps.base import Dosed, Finding, Held, Step
from aquabuf.assess.plant.steps.words import as_rows_of, brief, holding, span
from aquabuf.assess.plant.storage import lime_solubility_g_l
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.train import Passed, Train, held_steps, run_train
from aquabuf.chem.products import molar_mass
from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = ["FULL", "STOPPED", "Fault", "Guards", "Level", "full_stroke", "guard", "ph_levels"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

FULL, STOPPED = "stuck at full stroke", "stopped"
HOURS_PER_DAY = 24.0
SOFTEN, LIME, LIME_FORMULA = "soften", "lime", "Ca(OH)2"  # kind of step; group of products; what dissolves of them
CHANGED = 0.05  # pH that a fault must move before it is worth a word


@cache
def _rails() -> Mapping[str, Mapping[str, str]]:
    return {r["name"]: r for r in read_table("guard_rails")}


def _rail(name: str) -> float:
    return float(_rails()[name]["value"])


@dataclass(frozen=True, slots=True, kw_only=True)
class Guards:
    """Limits that stop a plan; the defaults are those of guard_rails.csv, practice and not a regulation.

    within : kinds of steps whose water stays within the works and is meant to be outside; there it is only noted.
    """

    ph_low: float = field(default_factory=lambda: _rail("ph_low"))
    ph_high: float = field(default_factory=lambda: _rail("ph_high"))
    over_dose: float = field(default_factory=lambda: _rail("over_dose"))
    over_ph: float = field(default_factory=lambda: _rail("over_ph"))
    within: tuple[str, ...] = (SOFTEN,)

    def __post_init__(self) -> None:
        if not 0.0 <= self.ph_low < self.ph_high <= 14.0:
            raise InputError(f"the pH guard rails must go from low to high within 0 to 14; found {self.ph_low:g} to "
                             f"{self.ph_high:g}. Correct them.")
        if not self.over_dose >= 1.0 or not 0.0 < self.over_ph <= 14.0:
            raise InputError(f"the overdose rail must be at least 1 times the dose and a pH up to 14; found "
                             f"{self.over_dose:g} times and pH {self.over_ph:g}. Correct it.")

    def rule(self, name: str) -> str:
        """Where a rail is from."""
        row = _rails()[name]
        shipped = getattr(self, name) == float(row["value"])
        return f"{row['source']} ({row['mark']})" if shipped else "set in the plan"


@dataclass(frozen=True, slots=True, kw_only=True)
class Level:
    """A pH beyond which water does harm; side "high" or "low"."""

    name: str
    side: str
    ph: float
    words: str
    source: str

    def passed(self, ph: ArrayLike) -> Mask:
        """Where it is passed."""
        value = np.asarray(ph, dtype=float)
        return value > self.ph if self.side == "high" else value < self.ph


@cache
def ph_levels() -> tuple[Level, ...]:
    """The levels of guard_rails.csv."""
    rows = (r for r in read_table("guard_rails") if r["group"] != "guard")
    return tuple(Level(name=r["name"], side=r["group"], ph=float(r["value"]), words=r["words"],
                       source=f"{r['source']} ({r['mark']})") for r in rows)


# ---------------------------------------------------------------- guard rails


def guard(train: Train, guards: Guards | None = None) -> tuple[Finding, ...]:
    """Stops with their explanation where a plan passes a guard rail, worst cases in numbers; () where it is safe.

    Ahead of a later step that doses it is a warning: coagulation may want a pH that the mains must not have.

    pH is judged behind every step that doses or moves pH beyond a rail, and behind the last; then again with each
    product overdosed in its turn. More lime than dissolves stops a plan too: the pH it is solved for is not reached.
    """
    guards = guards or Guards()
    found = [f for k in range(len(train.passed)) for f in _ph_findings(train, k, guards)]
    for product in dict.fromkeys(d.product.name for _, d in train.doses()):
        over = run_train(train.raw, held_steps(train, {product: guards.over_dose}))
        first = next(k for k, p in enumerate(train.passed) if product in _names(p))
        found += [f for k in _judged(train) if k >= first for f in _over_findings(train, over, k, product, guards)]
    return holding(*found, *_undissolved(train))


def _undissolved(train: Train) -> list[Finding]:
    """Lime beyond its solubility where nothing is meant to settle: what stays solid raises no pH."""
    out = []
    for p in (p for p in train.passed if p.step.kind != SOFTEN):
        limes = [d for d in p.outcome.doses if LIME in d.product.product.groups]
        g_l = sum((d.mol_l for d in limes), start=np.zeros(train.raw.rows)) * molar_mass(LIME_FORMULA)
        most = lime_solubility_g_l(p.after.t_c)
        where = g_l > most
        out += [Finding(
            "stop",
            f"step {p.step.name!r} takes {span(1e3 * g_l, where, 0)} mg/L of {LIME_FORMULA} "
            f"as {' and '.join(d.product.name for d in limes)}, and about {span(1e3 * most, where, 0)} mg/L dissolve: "
            f"the rest stays solid and pH stays below {span(p.after.water().ph, where, 2)}", where,
            "solubility of lime (recalled)", "aim lower, or take caustic soda, which dissolves")] if limes else []
    return out


def _names(passed: Passed) -> list[str]:
    return [d.product.name for d in passed.outcome.doses]


def _judged(train: Train) -> list[int]:
    last = len(train.passed) - 1
    return [k for k, p in enumerate(train.passed) if p.outcome.doses or k == last]


def _severity(train: Train, k: int, guards: Guards) -> tuple[str, str]:
    """A stop, or less within the works, where a later step doses; and words for that."""
    if train.passed[k].step.kind in guards.within and k < len(train.passed) - 1:
        return "note", ", which this step is meant to do; later steps must bring it back"
    if k < len(train.passed) - 1 and not train.passed[k].outcome.doses:
        return "warning", ", within the works"
    if any(p.outcome.doses for p in train.passed[k + 1:]):
        return "warning", ", within the works; later steps must bring it back"
    return "stop", ""


def _ph_findings(train: Train, k: int, guards: Guards) -> list[Finding]:
    ph = train.passed[k].after.water().ph
    severity, meant = _severity(train, k, guards)
    moved = k in _judged(train) or np.abs(ph - train.passed[k].before.water().ph) >= CHANGED
    out = []
    for name, where, side, remedy in (
            ("ph_low", ph < guards.ph_low, "below", "lower the acid or coagulant, or add alkali ahead of it"),
            ("ph_high", ph > guards.ph_high, "above", "lower the alkali, or add carbon dioxide or another acid")):
        words = (f"behind step {train.passed[k].step.name!r} pH is {span(ph, where, 2)}, {side} the guard rail of "
                 f"{getattr(guards, name):g}{meant}")
        out.append(Finding(severity, words, where & moved, guards.rule(name), remedy))
    return out


def _over_findings(train: Train, over: Train, k: int, product: str, guards: Guards) -> list[Finding]:
    ph, now = over.passed[k].after.water().ph, train.passed[k].after.water().ph
    severity, meant = _severity(train, k, guards)
    where = (ph > guards.over_ph) & (ph > now)
    return [Finding(
        severity, f"{guards.over_dose:g} times the dose of {product} brings pH behind step "
        f"{train.passed[k].step.name!r} from {span(now, where, 2)} to {span(ph, where, 2)}, above the guard rail of "
        f"{guards.over_ph:g}: the water holds too little against this product{meant}", where, guards.rule("over_ph"),
        "aim at a lower pH or more carbon, take a milder product (soda ash or bicarbonate), or limit the pump so that "
        "it cannot give that much")]


# ---------------------------------------------------------------- pumps


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Fault:
    """A pump at fault for some hours; arrays of rows.

    dose_mol_l, wanted_mol_l : of the active substance, with the fault and as found. [mol/L]
    ph_behind, ph_final : right behind the step and behind the works, without mixing on the way; ph_wanted : behind the
        step without the fault. volume_m3 : of water that passes meanwhile.
    excess_kg : of product as delivered, beyond what was wanted; negative where it is missing. [kg]
    """

    product: Stocked
    step: str
    case: str
    hours: float
    dose_mol_l: Array
    wanted_mol_l: Array
    ph_behind: Array
    ph_final: Array
    ph_wanted: Array
    volume_m3: Array
    excess_kg: Array

    def levels(self, row: int = 0) -> tuple[Level, ...]:
        """Levels of harm that the water right behind the step passes."""
        return tuple(level for level in ph_levels() if level.passed(self.ph_behind[row]))

    def words(self, row: int = 0) -> tuple[str, ...]:
        """What happens and what to do, a sentence each."""
        name, mg_l = self.product.name, self.product.mg_l_product
        if not np.isfinite(self.ph_behind[row]):
            return (f"pump of {name} {self.case}: not known, the doses or the water were not found",)
        given, wanted = (float(mg_l(x[row])) for x in (self.dose_mol_l, self.wanted_mol_l))
        out = [f"pump of {name} in step {self.step!r} {self.case} for {self.hours:g} h: {brief(given)} mg/L of product "
               f"in place of {brief(wanted)}, pH {self.ph_behind[row]:.2f} right behind the step in place of "
               f"{self.ph_wanted[row]:.2f} and {self.ph_final[row]:.2f} behind the works, in "
               f"{self.volume_m3[row]:,.0f} m3 of water"]
        out += [f"that water {level.words} (pH {'above' if level.side == 'high' else 'below'} {level.ph:g}; "
                f"{level.source})" for level in self.levels(row)]
        return (*out, *self._lessons(row))

    def _lessons(self, row: int) -> tuple[str, ...]:
        moved = abs(self.ph_behind[row] - self.ph_wanted[row]) >= CHANGED
        if not moved:
            return ("pH does not tell this fault: watch the feed itself, by tank level and drawdown",)
        if self.case == STOPPED:
            side = "attacks pipes, and lead and copper with them" if self.ph_behind[row] < self.ph_wanted[row] else \
                "may leave scale, and chlorine works worse in it"
            return (f"without the feed the water {side}: start the standby feed or stop the works; a no-flow switch "
                    "with an alarm tells it at once",)
        if not self.levels(row):
            return ("stop the feed, hold the water back until its pH is known, and find the cause before the restart",)
        return (
            "stop the feed and the outflow, tell the health authority and the customers at once: no use, not even "
            "for washing, until pH is measured at the tap",
            "do not flush this water into the works, a filter or a sewer: hold it, bring its pH back in small "
            "portions, then flush the mains to waste by permit, pH read at every outlet",
            "a day tank limits what can run out; a feed tied to the main pump, and a pH alarm that stops it, limit for "
            "how long",
        )


def full_stroke(train: Train, product: str, *, flow_m3_d: ArrayLike, hours: float = 1.0,
                most_mol_l: ArrayLike | None = None, factor: ArrayLike | None = None, step: str | None = None,
                ) -> tuple[Fault, Fault]:
    """A pump at full stroke, and the same pump standing still, all other doses held.

    Parameters
    ----------
    most_mol_l, factor
        What the pump gives at full stroke: a dose of active substance at this flow [mol/L], or times the wanted dose.
        One of them.
    step
        Where the product goes in; may be left out where one step alone doses it.

    Raises
    ------
    InputError
        For a product that is not dosed there, none or both of dose and factor, less than the wanted dose, or hours or
        flow below 0.
    """
    k, which = _place(train, product, step)
    dosed = train.passed[k].outcome.doses[which]
    rows = train.raw.rows
    if (most_mol_l is None) == (factor is None):
        raise InputError(f"a stuck pump of {product!r} needs either its most dose or its factor on the dose; "
                         f"{'none is' if factor is None else 'both are'} given. Give one.")
    if not hours >= 0.0:
        raise InputError(f"hours of a fault must be 0 or more; found {hours:g}. Correct them.")
    if factor is not None:
        most = dosed.mol_l * as_rows_of(factor, rows, f"factor of {product!r}")
    else:
        most = as_rows_of(np.asarray(most_mol_l, dtype=float), rows, f"most_mol_l of {product!r}")
    if (most < dosed.mol_l * (1.0 - 1e-9)).any():
        low = int(np.argmax(most < dosed.mol_l))
        raise InputError(f"the pump of {product!r} must give at least the wanted dose at full stroke; found "
                         f"{brief(float(dosed.product.mg_l_product(most[low])))} of "
                         f"{brief(float(dosed.product.mg_l_product(dosed.mol_l[low])))} mg/L. Take a larger pump, or "
                         "correct its size.")
    volume = as_rows_of(flow_m3_d, rows, "flow_m3_d") * hours / HOURS_PER_DAY
    nothing = np.where(np.isfinite(dosed.mol_l), 0.0, np.nan)
    return (_fault(train, k, which, FULL, hours, most, volume),
            _fault(train, k, which, STOPPED, hours, nothing, volume))


def _place(train: Train, product: str, step: str | None) -> tuple[int, int]:
    """Number of the step and of the dose in it."""
    dosed_of(train, product)
    at = [(k, _names(p).index(product)) for k, p in enumerate(train.passed)
          if product in _names(p) and isinstance(p.step, Held) and step in (None, p.step.name)]
    if len(at) != 1:
        names = ", ".join(repr(p.step.name) for p in train.passed if product in _names(p))
        raise InputError(f"a fault is of one pump: {product!r} goes in at {names}; step is "
                         f"{'not given' if step is None else repr(step)}. Name one of them.")
    return at[0]


def _fault(train: Train, k: int, which: int, case: str, hours: float, mol_l: Array, volume: Array) -> Fault:
    passed, wanted = train.passed[k], train.passed[k].outcome.doses[which]
    steps: Sequence[Step] = held_steps(train)[k + 1:]
    doses = tuple(Dosed(d.product, mol_l) if j == which else d for j, d in enumerate(passed.outcome.doses))
    assert isinstance(passed.step, Held)
    run = run_train(passed.before, [passed.step.held(doses), *steps])
    return Fault(
        product=wanted.product, step=passed.step.name, case=case, hours=hours, dose_mol_l=mol_l,
        wanted_mol_l=wanted.mol_l, ph_behind=run.passed[0].after.water().ph, ph_final=run.final.water().ph,
        ph_wanted=passed.after.water().ph, volume_m3=volume,
        excess_kg=1e-3 * wanted.product.mg_l_product(mol_l - wanted.mol_l) * volume)
