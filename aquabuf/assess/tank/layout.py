"""One tank of the train with all that was worked out for it, and the train as a whole."""

from __future__ import annotations

from dataclasses import dataclass

from aquabuf.assess.tank.feed import FeedNeed
from aquabuf.assess.tank.mixing import Baffles, Mixer, baffles, mixer
from aquabuf.assess.tank.rules import Standing
from aquabuf.assess.tank.stages import StageChoice
from aquabuf.assess.tank.volumes import MIN_PER_H, Residence, Vessel, round_vessel, unequal_volumes, volume_m3
from aquabuf.errors import InputError

__all__ = ["Layout", "Stage", "lay_out"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Stage:
    """One tank: its aim, shape and mixer. residence_min : at the largest flow."""

    number: int
    setpoint_ph: float
    residence_min: float
    vessel: Vessel
    mixer: Mixer
    baffles: Baffles

    @property
    def volume_m3(self) -> float:
        """Liquid."""
        return self.vessel.volume_m3

    @property
    def diameter_m(self) -> float:
        """Inner width."""
        return self.vessel.diameter_m

    @property
    def depth_m(self) -> float:
        """Depth of the liquid."""
        return self.vessel.liquid_m

    @property
    def dead_time_s(self) -> float:
        """Of mixing, at the largest flow."""
        return self.mixer.dead_s

    @property
    def lag_s(self) -> float:
        """Residence time less dead time, at the largest flow."""
        return self.mixer.lag_s

    @property
    def power_w(self) -> float:
        """Of the mixer, middle of its range."""
        return self.mixer.power_w

    @property
    def turnover_per_min(self) -> float:
        """Pumping of the mixer over the volume."""
        return self.mixer.turnover_per_min

    @property
    def standings(self) -> tuple[Standing, ...]:
        """How it stands to the rules on shape and mixing."""
        return (*self.vessel.standings, *self.mixer.standings)


@dataclass(frozen=True, slots=True, kw_only=True)
class Layout:
    """The train. notes : what was changed on the way, and why."""

    stages: tuple[Stage, ...]
    choice: StageChoice
    residence: Residence
    feeds: tuple[FeedNeed, ...]
    equalization_m3: float
    notes: tuple[str, ...]

    @property
    def total_m3(self) -> float:
        """Liquid of all tanks and the equalization."""
        return self.equalization_m3 + sum(s.volume_m3 for s in self.stages)


def lay_out(choice: StageChoice, time: Residence, flow_m3_h: float, depth_most_m: float, *,
            volumes_m3: tuple[float, ...] | None = None, foams: bool = False, feeds: tuple[FeedNeed, ...] = (),
            equalization_m3: float = 0.0) -> Layout:
    """The tanks of a choice: each of the residence time at the largest flow, unequal, unless volumes are set."""
    if volumes_m3 is None:
        sizes, note = unequal_volumes([volume_m3(flow_m3_h, time.minutes)] * choice.tanks)
    elif len(volumes_m3) == choice.tanks:
        sizes, note = tuple(volumes_m3), ""
    else:
        raise InputError(f"there must be one volume per tank ({choice.tanks}); found {len(volumes_m3)}. Correct one of "
                         "them.")
    stages = []
    for i, (size, ph) in enumerate(zip(sizes, choice.set_points, strict=True), start=1):
        vessel = round_vessel(size, depth_most_m, foams=foams)
        stages.append(Stage(number=i, setpoint_ph=ph, residence_min=size / flow_m3_h * MIN_PER_H, vessel=vessel,
                            mixer=mixer(size, flow_m3_h), baffles=baffles(vessel.diameter_m)))
    return Layout(stages=tuple(stages), choice=choice, residence=time, feeds=feeds, equalization_m3=equalization_m3,
                  notes=tuple(filter(None, (note, time.conflict))))
