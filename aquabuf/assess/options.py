"""What an assessment may be told, with its defaults."""

from __future__ import annotations

from dataclasses import dataclass

from aquabuf.chem.gases import AIR_CO2_PPM, AIR_CO2_YEAR
from aquabuf.errors import InputError

__all__ = ["ACID_THRESHOLDS", "ALWAYS_ACID", "BASE_THRESHOLDS", "Options"]

ACID_THRESHOLDS = (6.5, 6.0, 5.5, 5.0, 4.5)
BASE_THRESHOLDS = (8.5, 9.0, 9.5)
ALWAYS_ACID = 6.0  # the acid tolerance that the summary ranks by


@dataclass(frozen=True, slots=True, kw_only=True)
class Options:
    """Choices of one assessment run; raises InputError for values that make no sense.

    exchange : "closed" takes the water as sampled; "open" brings it to equilibrium with air first.
    air_co2_ppm : CO2 in dry air. [µmol/mol]
    draws, seed : of the uncertainty intervals; 0 draws leaves them out.
    acid_thresholds, base_thresholds : meter pH values that tolerance is computed to.
    carbonic : marine constant set, "millero" or "lueker".
    """

    exchange: str = "closed"
    air_co2_ppm: float = AIR_CO2_PPM
    draws: int = 1000
    seed: int = 1
    acid_thresholds: tuple[float, ...] = ACID_THRESHOLDS
    base_thresholds: tuple[float, ...] = BASE_THRESHOLDS
    carbonic: str = "millero"

    def __post_init__(self) -> None:
        if self.exchange not in ("closed", "open"):
            raise InputError(f"exchange must be closed or open; found {self.exchange!r}. Closed keeps the carbon.")
        if not 0.0 < self.air_co2_ppm <= 1e6:
            raise InputError(f"air CO2 must be above 0 and at most 1000000 ppm; found {self.air_co2_ppm:g}. "
                             f"Outdoor air had about {AIR_CO2_PPM:g} ppm in {AIR_CO2_YEAR}.")
        if self.draws != 0 and not 100 <= self.draws <= 100_000:
            raise InputError(f"draws must be 0 or from 100 to 100000; found {self.draws}. "
                             f"Use 1000, or 0 for no intervals.")
        if self.seed < 0:
            raise InputError(f"seed must be 0 or more; found {self.seed}. Any whole number does.")
        for name in ("acid_thresholds", "base_thresholds"):
            object.__setattr__(self, name, tuple(dict.fromkeys(round(ph, 3) for ph in getattr(self, name))))
            for ph in getattr(self, name):
                if not 2.0 <= ph <= 12.0:
                    raise InputError(f"a pH threshold must be from 2 to 12; found {ph:g}. Correct the list.")
        if ALWAYS_ACID not in self.acid_thresholds:
            object.__setattr__(self, "acid_thresholds", (ALWAYS_ACID, *self.acid_thresholds))
