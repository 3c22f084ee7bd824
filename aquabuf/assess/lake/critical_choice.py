"""Which variant of the steady-state water chemistry method is used: a choice that checks and tells itself.

The variants move the critical load of one lake by half, so none is used without being named. The defaults:

* form "concentration": the one seen in print, with S = 400 µeq/L. In five lakes of the Adirondacks (monitoring data of
  the US EPA, 1983 to 2017; derived) base cations fell by 0.33 to 0.79 of what sulfate and nitrate fell by, on average
  0.54. This form gives 0.59 and the flux form 0.42, both at the base cations of the first years.
* base cations "today": as printed. "original" (0.45 in those lakes) fits no better and gives the higher load. Five
  lakes settle nothing, which is why the variants are always shown beside the choice.
* background "norway": the oldest relation and the one met most often (judgment, no source); it is made for one region,
  as each is. It gives the highest loads, so look at the others where your lakes are elsewhere.
* an original sulfate above today's is "kept" and flagged. A relation misses to both sides; if only one of them were cut
  off, the loads of a whole survey would come out too low. "capped" is there for the single lake.
* ANC limit 20 µeq/L: fish and invertebrates, the widest set of waters behind any limit (Lien et al. 1996, printed).
* tracer "chloride": the usual one (printed with its ratios). Road salt calls for sodium or none.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import cache
from types import MappingProxyType
from typing import Protocol

from aquabuf.assess.lake.sea_salt import NO_TRACER, TRACERS
from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = [
    "BASE_CATIONS_AT", "EXCESS", "FORMS", "LIMIT_MOST_EQ_L", "LIMIT_SLOPE_YR_M", "MOST_LIMIT_EQ_L",
    "CriticalLoadChoice", "Form", "NamedLimit", "SulfateBackground", "limit_words", "parse_choice",
    "sulfate_backgrounds",
]


@dataclass(frozen=True, slots=True, kw_only=True)
class Form:
    """What the share F of the soil depends on, the amount at which it reaches 1, and where that comes from."""

    s_scale: float  # [eq/L, or eq/m2/yr]
    unit: str       # as people write it
    units: float    # of those in one eq/L, or one eq/m2/yr
    words: str
    source: str


FORMS: Mapping[str, Form] = MappingProxyType({
    "concentration": Form(
        s_scale=4e-4, unit="µeq/L", units=1e6, words="the concentration of base cations",
        source="S and equation printed in the abstract of the Nordic critical loads; the factor pi/2 is recalled"),
    "flux": Form(
        s_scale=0.4, unit="meq/m²/yr", units=1e3, words="the base cations that run off per area and year",
        source="Henriksen & Posch 2001, Mapping Manual (recalled)"),
})
BASE_CATIONS_AT: Mapping[str, str] = MappingProxyType({
    "today": "taken at today's base cations (printed)",
    "original": "taken at the base cations before acid deposition, which F itself decides (solved for; Henriksen & "
                "Posch 2001, recalled)",
})
EXCESS: Mapping[str, str] = MappingProxyType({
    "kept": "kept where it is above today's sulfate, and flagged (our choice: errors to both sides cancel in a survey)",
    "capped": "cut to today's sulfate where it is above it, and flagged (our choice: the lower load)",
})
LIMIT_SLOPE_YR_M = 0.25   # ANC limit per critical load: 50 µeq/L at 200 meq/m2/yr; Henriksen et al. 1995. [yr/m]
LIMIT_MOST_EQ_L = 50e-6   # where the variable limit stays; Henriksen et al. 1995. [eq/L]
MOST_LIMIT_EQ_L = 1e-3    # largest ANC limit that is accepted, either sign; a slip of units is larger. [eq/L]
LEAST_SCALE, MOST_SCALE = 0.01, 100.0   # of S that is accepted, as parts of its usual size
SCALE_KEY, NO_TRACER_WORD = "s=", "no_sea_salt"


@dataclass(frozen=True, slots=True, kw_only=True)
class SulfateBackground:
    """Sulfate before acid deposition from today's non-marine base cations: a + b BC*. [eq/L, -]"""

    name: str
    a_eq_l: float
    b: float
    region: str
    mark: str
    source: str

    def in_words(self) -> str:
        """The relation in one line."""
        recalled = ", recalled" if self.mark == "recalled" else ""
        return f"{self.a_eq_l * 1e6:g} µeq/L + {self.b:g} BC* ({self.name}: {self.region}; {self.source}{recalled})"


@cache
def sulfate_backgrounds() -> Mapping[str, SulfateBackground]:
    """The shipped relations by name."""
    return MappingProxyType({r["name"]: SulfateBackground(
        name=r["name"], a_eq_l=float(r["a_ueq_l"]) * 1e-6, b=float(r["b"]), region=r["region"], mark=r["mark"],
        source=r["source"]) for r in read_table("sulfate_background")})


class NamedLimit(Protocol):
    """An ANC limit: one value, or one that varies with the load."""

    @property
    def is_variable(self) -> bool:
        """Whether the limit rises with the critical load."""

    @property
    def value_eq_l(self) -> float:
        """The limit where it does not vary. [eq/L]"""


@dataclass(frozen=True, slots=True, kw_only=True)
class CriticalLoadChoice:
    """One variant of the method; raises InputError for a choice that is none.

    form : "concentration" or "flux". base_cations : "today" or "original", where F is taken.
    sulfate_background : a name of the shipped table; excess_background : where it gives more than today's sulfate,
    "kept" or "capped".
    s_scale : base cations at which F reaches 1, None for the usual ones of the form. [eq/L, or eq/m2/yr for "flux"]
    anc_limit_eq_l : None for the limit that varies with the load. tracer : of sea salt, "none" to leave it in.
    """

    form: str = "concentration"
    base_cations: str = "today"
    sulfate_background: str = "norway"
    excess_background: str = "kept"
    s_scale: float | None = None
    anc_limit_eq_l: float | None = 20e-6
    tracer: str = "chloride"

    def __post_init__(self) -> None:
        for name, subject, allowed in (
            ("form", "the form of F", FORMS), ("base_cations", "the base cations F is taken at", BASE_CATIONS_AT),
            ("sulfate_background", "the relation for original sulfate", sulfate_backgrounds()),
            ("excess_background", "what is done with an original sulfate above today's", EXCESS),
            ("tracer", "the tracer of sea salt", (*TRACERS, NO_TRACER)),
        ):
            if getattr(self, name) not in allowed:
                raise InputError(f"{subject} must be one of {', '.join(allowed)}; found {getattr(self, name)!r}. "
                                 f"Correct it.")
        self._check_scale()
        limit = self.anc_limit_eq_l
        if limit is not None and not abs(limit) <= MOST_LIMIT_EQ_L:
            raise InputError(f"the ANC limit must be within {MOST_LIMIT_EQ_L:g} eq/L of zero; found {limit:g}. "
                             f"Give 20 µeq/L as 2e-5.")

    def _check_scale(self) -> None:
        usual, found = FORMS[self.form], self.scale
        low, high = LEAST_SCALE * usual.s_scale, MOST_SCALE * usual.s_scale
        if not low <= found <= high:
            raise InputError(f"S of the {self.form} form must be from {low * usual.units:g} to "
                             f"{high * usual.units:g} {usual.unit}; found {found * usual.units:g}. "
                             f"The usual one is {usual.s_scale * usual.units:g}.")

    @property
    def scale(self) -> float:
        """S: base cations at which F reaches 1. [eq/L, or eq/m2/yr for the flux form]"""
        return FORMS[self.form].s_scale if self.s_scale is None else self.s_scale

    @property
    def has_usual_scale(self) -> bool:
        """Whether S is the usual one of the form."""
        return math.isclose(self.scale, FORMS[self.form].s_scale)

    @property
    def background(self) -> SulfateBackground:
        """The relation for original sulfate."""
        return sulfate_backgrounds()[self.sulfate_background]

    @property
    def label(self) -> str:
        """The choice as `parse_choice` reads it, such as "concentration today norway"; other defaults are left out."""
        units = FORMS[self.form].units
        rest = [] if self.excess_background == "kept" else [self.excess_background]
        rest += [] if self.has_usual_scale else [f"{SCALE_KEY}{self.scale * units:g}"]
        rest += [] if self.tracer == "chloride" else [NO_TRACER_WORD if self.tracer == NO_TRACER else self.tracer]
        return " ".join([self.form, self.base_cations, self.sulfate_background, *rest])

    def lines(self) -> tuple[str, ...]:
        """Every choice in words with its source, a line each."""
        form = FORMS[self.form]
        usual = "" if self.has_usual_scale else f", given by the user; usual {form.s_scale * form.units:g}"
        return (
            f"F = sin(pi/2 x/S), at most 1, x {form.words}, S {self.scale * form.units:g} {form.unit}{usual} "
            f"({form.source})",
            f"F {BASE_CATIONS_AT[self.base_cations]}",
            f"sulfate before acid deposition {self.background.in_words()}; {EXCESS[self.excess_background]}",
            "nitrate before acid deposition none (recalled)",
            limit_words(self.anc_limit_eq_l),
            f"sea salt taken off by {self.tracer}" if self.tracer != NO_TRACER else "sea salt left in",
        )

    def in_words(self) -> str:
        """All of it in one line."""
        return "; ".join(self.lines())


def limit_words(limit_eq_l: float | None) -> str:
    """An ANC limit in words, with what the shipped table says of it."""
    wanted = None if limit_eq_l is None else round(limit_eq_l * 1e6, 6)
    rows = [r for r in read_table("anc_limits") if (float(r["limit_ueq_l"]) if r["limit_ueq_l"] else None) == wanted]
    known = "; ".join(f"{r['organism']}, {r['source']}" for r in rows) or "given by the user"
    if limit_eq_l is None:
        return (f"ANC limit {LIMIT_SLOPE_YR_M:g} yr/m of the critical load, from 0 to {LIMIT_MOST_EQ_L * 1e6:g} µeq/L "
                f"({known})")
    return f"ANC limit {limit_eq_l * 1e6:g} µeq/L ({known})"


# ------------------------------------------------------------------ from the words of an option


def parse_choice(text: str, limit: NamedLimit | None = None) -> CriticalLoadChoice:
    """The choice that an option such as "flux original norway" names; what is not named keeps its default.

    Words in any order, parted by blanks or commas; `s=300` sets S in µeq/L, or meq/m2/yr in the flux form. `limit`
    comes from an option of its own, None for the default. Raises InputError for a word that is none.
    """
    found: dict[str, str] = {}
    for word in text.lower().replace(",", " ").split():
        kind = "s_scale" if word.startswith(SCALE_KEY) else _words().get(word, "")
        if not kind:
            raise InputError(f"the words of a critical load must be among {', '.join(_words())}, {SCALE_KEY}NUMBER; "
                             f"found {word!r}. Correct it.")
        before = found.setdefault(kind, word)
        if before != word:
            raise InputError(f"of {_group(kind)} a critical load takes one; found {before!r} and {word!r}. Drop one.")
    scale = found.pop("s_scale", None)
    if found.get("tracer") == NO_TRACER_WORD:
        found["tracer"] = NO_TRACER
    usual = CriticalLoadChoice(**found)  # type: ignore[arg-type]
    anc = usual.anc_limit_eq_l if limit is None else None if limit.is_variable else limit.value_eq_l
    own = None if scale is None else _number(scale.removeprefix(SCALE_KEY)) / FORMS[usual.form].units
    return replace(usual, anc_limit_eq_l=anc, s_scale=own)


@cache
def _words() -> Mapping[str, str]:
    """The field that each word of an option sets."""
    groups = {"form": FORMS, "base_cations": BASE_CATIONS_AT, "sulfate_background": sulfate_backgrounds(),
              "excess_background": EXCESS, "tracer": (*TRACERS, NO_TRACER_WORD)}
    return MappingProxyType({word: field for field, words in groups.items() for word in words})


def _group(kind: str) -> str:
    return f"{SCALE_KEY}NUMBER" if kind == "s_scale" else ", ".join(w for w, field in _words().items() if field == kind)


def _number(text: str) -> float:
    try:
        value = float(text)
    except ValueError:
        value = math.nan
    if not math.isfinite(value):
        raise InputError(f"{SCALE_KEY}NUMBER must hold a number; found {SCALE_KEY}{text}. Write it as {SCALE_KEY}400.")
    return value
