"""What a lake assessment may be told, with its defaults, and what the words of it stand for."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from datetime import datetime
from difflib import get_close_matches
from pathlib import Path

from aquabuf.assess.lake.anc_limit import AncLimit, find_anc_limit
from aquabuf.assess.lake.critical import CriticalLoadChoice, parse_choice
from aquabuf.assess.lake.event_file import EventWater, read_event
from aquabuf.assess.lake.liming import LimeProduct, lime_products
from aquabuf.assess.lake.schemes import FILE_ENDING, Scheme, find_scheme
from aquabuf.chem.gases import AIR_CO2_PPM, AIR_CO2_YEAR
from aquabuf.chem.organic import OrganicModel, organic_models
from aquabuf.chem.transfer import transfer_relations
from aquabuf.engine.conditions import CARBONIC_SETS
from aquabuf.errors import InputError

__all__ = ["ALWAYS_THRESHOLDS", "GROUPS", "LakeOptions", "Rules", "own_organic_model", "rules_of"]

ALWAYS_THRESHOLDS = (6.0, 5.5, 5.0)
GROUPS = ("region", "site", "water_kind")
SITES_WORDS = "SITES:PK,PK,PK (µeq of acid sites per mg of carbon, and three pK)"


@dataclass(frozen=True, slots=True, kw_only=True)
class LakeOptions:
    """Choices of one run; raises InputError for values that make no sense.

    schemes : names or TOML paths, the first one gives the class. organic : a shipped model or SITES:PK,PK,PK.
    critical_load : words of the variant, none for the default. anc_limit : µeq/L, a shipped name, or variable.
    lime, lime_anc_ueq_l, lime_ph, lime_date : product, target (a pH takes the place of the ANC) and day of liming.
    event_fraction : share of event water. deposition_changes : percent.
    """

    schemes: tuple[str, ...] = ("survey_bands",)
    organic: str = "hruska_b"
    critical_load: str = ""
    anc_limit: str = "20"
    lime: str = "limestone"
    lime_anc_ueq_l: float = 100.0
    lime_ph: float | None = None
    lime_date: str = ""
    event_fraction: float = 0.4
    wind_relation: str = "cole_caraco"
    deposition_changes: tuple[float, ...] = (-50.0, -25.0, 25.0)
    ammonium: bool = True
    group: str = "region"
    air_co2_ppm: float = AIR_CO2_PPM
    draws: int = 1000
    seed: int = 1
    thresholds: tuple[float, ...] = ALWAYS_THRESHOLDS
    carbonic: str = "millero"

    def __post_init__(self) -> None:
        _range("air CO2", self.air_co2_ppm, 1.0, 1e6, f"Outdoor air had about {AIR_CO2_PPM:g} ppm in {AIR_CO2_YEAR}.")
        _range("the share of event water", self.event_fraction, 0.0, 1.0, "Give 40 % as 0.4.")
        _range("the liming target", self.lime_anc_ueq_l, -1000.0, 10_000.0, "Give it in µeq/L, such as 100.")
        if self.lime_ph is not None:
            _range("the liming target pH", self.lime_ph, 4.0, 9.0, "Planning takes 6.0 to 6.5.")
        if self.lime_date:
            try:
                if datetime.strptime(self.lime_date, "%Y-%m-%d").strftime("%Y-%m-%d") != self.lime_date:
                    raise ValueError
            except ValueError:
                raise InputError(f"the day of liming must be written as 2026-05-01; found {self.lime_date!r}. "
                                 f"Correct it.") from None
        if self.draws != 0 and not 100 <= self.draws <= 100_000:
            raise InputError(f"draws must be 0 or from 100 to 100000; found {self.draws}. "
                             f"Use 1000, or 0 for no intervals.")
        if self.seed < 0:
            raise InputError(f"seed must be 0 or more; found {self.seed}. Any whole number does.")
        for ph in self.thresholds:
            _range("a pH threshold", ph, 2.0, 12.0, "Correct the list.")
        for change in self.deposition_changes:
            _range("a change of deposition", change, -100.0, 1000.0, "Give percent, such as -30.")
        object.__setattr__(self, "thresholds", tuple(dict.fromkeys(
            (*ALWAYS_THRESHOLDS, *(round(ph, 3) for ph in self.thresholds)))))
        for subject, value, allowed in (("the group", self.group, GROUPS), ("the carbonic "
                                                                            "set", self.carbonic, CARBONIC_SETS),
                                        ("the wind relation", self.wind_relation, transfer_relations())):
            if value not in allowed:
                raise InputError(f"{subject} must be one of {', '.join(allowed)}; found {value!r}. Correct it.")
        for scheme in self.schemes:
            if not scheme.endswith(FILE_ENDING):
                find_scheme(scheme)
        find_organic(self.organic)
        parse_choice(self.critical_load, find_anc_limit(self.anc_limit))
        _find_product(self.lime)
        if not self.schemes:
            raise InputError("a scheme is needed for the class; found none. Leave the option out for survey_bands.")


def _range(subject: str, value: float, low: float, high: float, remedy: str) -> None:
    if not low <= value <= high:
        raise InputError(f"{subject} must be from {low:g} to {high:g}; found {value:g}. {remedy}")


@dataclass(frozen=True, slots=True, kw_only=True)
class Rules:
    """What the words of the options stand for."""

    schemes: tuple[Scheme, ...]
    organic: OrganicModel
    critical: CriticalLoadChoice
    limit: AncLimit
    lime: LimeProduct
    event: EventWater | None = field(default=None)


def rules_of(options: LakeOptions, event: Path | None = None) -> Rules:
    """The rules that the options name. Raises InputError or FileError for a name that is none."""
    limit = find_anc_limit(options.anc_limit)
    return Rules(schemes=tuple(find_scheme(name) for name in dict.fromkeys(options.schemes)),
                 organic=find_organic(options.organic), critical=parse_choice(options.critical_load, limit),
                 limit=limit, lime=_find_product(options.lime), event=None if event is None else read_event(event))


def find_organic(text: str) -> OrganicModel:
    """A shipped model by name, or one of the user's own as SITES:PK,PK,PK."""
    if ":" in text:
        return own_organic_model(text)
    models = organic_models()
    if text not in models:
        near = get_close_matches(text, models, n=1)
        hint = f" Did you mean {near[0]!r}?" if near else ""
        raise InputError(f"the organic acid model must be one of {', '.join(models)}, or {SITES_WORDS}; found "
                         f"{text!r}.{hint}")
    return models[text]


def own_organic_model(text: str) -> OrganicModel:
    """Model of the user's own from its words."""
    sites, _, steps = text.partition(":")
    try:
        density, pk = float(sites), tuple(float(p) for p in steps.split(","))
    except ValueError:
        density, pk = 0.0, ()
    sound = len(pk) == 3 and all(map(math.isfinite, pk)) and list(pk) == sorted(pk) and -2.0 <= pk[0] <= pk[-1] <= 14.0
    if not (sound and 0.0 < density <= 50.0):
        raise InputError(f"an organic acid model of your own must read {SITES_WORDS}, pK rising; found {text!r}. "
                         f"Write for example 10.2:3.04,4.51,6.46.")
    return OrganicModel(name="own", sites_eq_mg=density * 1e-6, pk=pk, source="given by the user",
                        words="triprotic, of your own")


def _find_product(name: str) -> LimeProduct:
    products = lime_products()
    if name not in products:
        raise InputError(f"the liming product must be one of {', '.join(products)}; found {name!r}. Correct it.")
    return products[name]
