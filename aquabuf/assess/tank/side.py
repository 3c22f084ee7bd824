"""Side effects of neutralizing a waste with a reagent: solids, sludge, heat, gas, salt; and the cautions that go with
them."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from aquabuf.assess.tank.side_case import CARBON, SEVERITIES, STOP, WARNING, Effect, Treated
from aquabuf.assess.tank.side_gas import co2_effects, gas_effects, gas_hazards
from aquabuf.assess.tank.side_heat import HOT_C, SEWER_LIMIT_C, dissolved_effects, heat_effects
from aquabuf.assess.tank.side_solids import SLUDGE_SHARE, hydroxide_effects, salt_effects, sludge_effects
from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = ["ANY", "Caution", "Effect", "SideEffects", "Treated", "cautions_of", "side_effects", "tank_cautions"]

ANY = "any"
METALS, FLUORIDE = "metals", "fluoride"
GYPSUM, HOT = "gypsum", "hot"


@dataclass(frozen=True, slots=True)
class SideEffects:
    """All side effects of one treatment; a design with stops must not be carried out."""

    rows: tuple[Effect, ...]

    @property
    def stops(self) -> tuple[Effect, ...]:
        """Effects that forbid the design."""
        return self.of(STOP)

    @property
    def warnings(self) -> tuple[Effect, ...]:
        """Effects to be solved or borne."""
        return self.of(WARNING)

    def of(self, severity: str) -> tuple[Effect, ...]:
        """Rows of one severity. Raises InputError for a word that is none."""
        if severity not in SEVERITIES:
            raise InputError(f"a severity must be one of {', '.join(SEVERITIES)}; found {severity!r}. Correct it.")
        return tuple(row for row in self.rows if row.severity == severity)

    def value(self, name: str) -> float:
        """Value of an effect by its name. Raises InputError with the names there are."""
        for row in self.rows:
            if row.name == name:
                return row.value
        raise InputError(f"no side effect is called {name!r}; there are {', '.join(row.name for row in self.rows)}. "
                         "Take one of them.")


def side_effects(case: Treated, *, window: tuple[float, float] | None = None, outlet_limit_c: float = SEWER_LIMIT_C,
                 sludge_share: float = SLUDGE_SHARE) -> SideEffects:
    """Every side effect of one reagent in one waste, the gravest first, otherwise in the order of the work.

    window : pH of the permit, for the drift after CO2 strips. outlet_limit_c : of the discharge. sludge_share : solids
    in wet sludge, by mass.
    """
    rows = [*gas_effects(case), *salt_effects(case), *hydroxide_effects(case), *sludge_effects(case, sludge_share),
            *heat_effects(case, outlet_limit_c), *co2_effects(case, window), *dissolved_effects(case)]
    return SideEffects(tuple(sorted(rows, key=lambda row: -SEVERITIES.index(row.severity))))


# ---------------------------------------------------------------- cautions


@dataclass(frozen=True, slots=True)
class Caution:
    """A caution, what it hangs on, and where it comes from."""

    hangs_on: str
    words: str
    source: str


def tank_cautions(hangs_on: Iterable[str]) -> tuple[Caution, ...]:
    """Cautions that hang on these words, and those for any design, in the order of the table."""
    hangs = {ANY, *hangs_on}
    return tuple(Caution(r["hangs_on"], r["words"], f"{r['source']} ({r['mark']})") for r in read_table("tank_cautions")
                 if r["hangs_on"] in hangs)


def cautions_of(cases: Sequence[Treated], effects: Sequence[SideEffects] = ()) -> tuple[Caution, ...]:
    """Cautions by formula and groups of the reagents, by what the wastes hold, and by effects that come out."""
    hangs: set[str] = set()
    for case in cases:
        hangs |= {case.product.formula, *case.product.groups}
        hangs |= {name for name in (*gas_hazards(), FLUORIDE, CARBON) if case.total(name) > 0.0}
        if case.metals:
            hangs |= {METALS, *(m.name.partition("(")[0] for m in case.metals)}
    for row in (row for found in effects for row in found.rows):
        if row.name == "gypsum" and row.value > 0.0:
            hangs.add(GYPSUM)
        if row.name == "outlet temperature" and row.value > HOT_C:
            hangs.add(HOT)
    return tank_cautions(hangs)
