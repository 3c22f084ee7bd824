"""From what a plan asks for to the steps that do it."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import replace
from types import MappingProxyType

from aquabuf.assess.plant.plan import Plan, Source, StepSpec
from aquabuf.assess.plant.quantities import find_quantity
from aquabuf.assess.plant.steps.adjust import Adjust, Dose
from aquabuf.assess.plant.steps.base import Step
from aquabuf.assess.plant.steps.biology import METHANOL_CARBON, RESIDUAL_EQ_L, Denitrify, Nitrify
from aquabuf.assess.plant.steps.blend import Blend
from aquabuf.assess.plant.steps.blend import Source as Joining
from aquabuf.assess.plant.steps.coagulate import Coagulate
from aquabuf.assess.plant.steps.contactor import CalciteContactor
from aquabuf.assess.plant.steps.disinfect import Disinfect
from aquabuf.assess.plant.steps.fluoridate import Fluoridate
from aquabuf.assess.plant.steps.gas import Aerate
from aquabuf.assess.plant.steps.recarbonate import Recarbonate
from aquabuf.assess.plant.steps.remineralize import Remineralize
from aquabuf.assess.plant.steps.soften import Soften
from aquabuf.assess.plant.steps.temperature import ChangeTemperature
from aquabuf.assess.plant.stream import Stream, stream_of
from aquabuf.assess.plant.targets import Target
from aquabuf.chem.gases import AIR_CO2_PPM
from aquabuf.errors import InputError

__all__ = ["build_steps"]

DONORS: Mapping[str, float] = MappingProxyType({"methanol": METHANOL_CARBON, "none": 0.0})
ALL = "all"
MINUTES_PER_HOUR = 60.0
G_PER_KG = 1e3
ROUNDING = 1e-9  # of shares that add up to the whole


def build_steps(plan: Plan) -> list[Step]:
    """The steps of a plan in order. Raises InputError naming the step and its line where its settings do not fit."""
    sources = {name: _source_stream(source) for name, source in plan.sources.items()}
    steps: list[Step] = []
    for spec in plan.steps:
        try:
            steps.append(_BUILDERS[spec.kind](spec, plan, sources))
        except InputError as error:
            raise InputError(f"{plan.file}, line {spec.line}: {error}") from None
    return steps


def _source_stream(source: Source) -> Stream:
    return stream_of(dict(source.water.values))[0]


def _coagulate(spec: StepSpec, plan: Plan, _: Mapping[str, Stream]) -> Step:
    v = spec.values
    return Coagulate(name=spec.name, product=v["product"], dose_mol_l=v["dose"], floor_eq_l=v.get("floor"),
                     ph_window=v.get("ph_window"))


def _chlorinate(spec: StepSpec, plan: Plan, _: Mapping[str, Stream]) -> Step:
    v = spec.values
    density = v["product"].density_kg_l
    excess = v["excess_caustic"] * G_PER_KG * density if v["excess_caustic"] and density else 0.0
    if v["excess_caustic"] and not density:
        raise InputError(f"step {spec.name!r}: excess_caustic is a share by mass and needs the density of "
                         f"{v['product'].name!r}; it is not given. Add density to its product.")
    return Disinfect(name=spec.name, product=v["product"], dose_mol_l=v["dose"], demand_mol_l=v.get("demand", 0.0),
                     excess_caustic_g_l=excess)


def _nitrify(spec: StepSpec, plan: Plan, _: Mapping[str, Stream]) -> Step:
    amount, floor = spec.values["oxidize"], spec.values.get("floor")
    residual = RESIDUAL_EQ_L if floor is None else (floor, floor)
    whole = amount == ALL
    return Nitrify(name=spec.name, fraction=1.0 if whole else None, oxidized_mol_l=None if whole else amount,
                   residual_eq_l=(residual[0], residual[1]))


def _denitrify(spec: StepSpec, plan: Plan, _: Mapping[str, Stream]) -> Step:
    amount = spec.values["remove"]
    whole = amount == ALL
    return Denitrify(name=spec.name, fraction=1.0 if whole else None, removed_mol_l=None if whole else amount,
                     donor_carbon_per_n=DONORS[spec.values["donor"]])


def _aerate(spec: StepSpec, plan: Plan, _: Mapping[str, Stream]) -> Step:
    v = spec.values
    efficiency = 1.0 if v.get("to_air") else v.get("efficiency")
    return Aerate(name=spec.name, efficiency=efficiency, kla_per_h=v.get("kla"), time_h=v.get("time"),
                  co2_ppm=v.get("air_co2", AIR_CO2_PPM))


def _temperature(spec: StepSpec, plan: Plan, _: Mapping[str, Stream]) -> Step:
    return ChangeTemperature(name=spec.name, t_c=spec.values["to"])


def _blend(spec: StepSpec, plan: Plan, sources: Mapping[str, Stream]) -> Step:
    """Shares of the step, else those of the sources; flows count against the plan's flow, which is the blend's.

    Where one water is all of the blend, there are no other ratios to look at.
    """
    names = spec.values["with"]
    shares = spec.values.get("shares") or tuple(_share(plan.sources[n], plan) for n in names)
    own = 1.0 - sum(shares)
    if own < -ROUNDING:
        raise InputError(f"shares of the blend {spec.name!r} must add up to 100 % at most; found "
                         f"{100 * sum(shares):.4g} %. Lower them; the rest is the water of the step before.")
    own = own if own > ROUNDING else 0.0
    return Blend(name=spec.name, others=tuple(Joining(n, sources[n], s) for n, s in zip(names, shares, strict=True)),
                 own_share=own, own_name=plan.raw.name, with_sweep=len(names) + (own > 0.0) > 1)


def _share(source: Source, plan: Plan) -> float:
    if source.share is not None:
        return source.share
    return (source.flow_m3_d or 0.0) / plan.flow.now_m3_d


def _soften(spec: StepSpec, plan: Plan, _: Mapping[str, Stream]) -> Step:
    v = spec.values
    return Soften(name=spec.name, process=v["method"], lime=v["lime"], soda_ash=v.get("soda_ash"),
                  excess_eq_l=v.get("excess"), noncarbonate_left_eq_l=v.get("noncarbonate_left", 0.0),
                  magnesium_wanted_mol_l=v.get("magnesium"))


def _recarbonate(spec: StepSpec, plan: Plan, _: Mapping[str, Stream]) -> Step:
    stages = spec.values["ph"]
    return Recarbonate(name=spec.name, carbon_dioxide=spec.values["product"], to_ph=stages[-1],
                       first_ph=stages[0] if len(stages) > 1 else None)


def _contact(spec: StepSpec, plan: Plan, _: Mapping[str, Stream]) -> Step:
    v = spec.values
    rate = None if v.get("rate") is None else v["rate"] / MINUTES_PER_HOUR
    minutes = None if v.get("time") is None else v["time"] * MINUTES_PER_HOUR
    return CalciteContactor(name=spec.name, calcite=v["product"], carbon_dioxide=v.get("co2"),
                            co2_mol_l=v.get("co2_dose", 0.0), share=v.get("approach"), rate_per_min=rate,
                            contact_min=minutes)


def _remineralize(spec: StepSpec, plan: Plan, _: Mapping[str, Stream]) -> Step:
    v = spec.values
    return Remineralize(name=spec.name, mineral=v["mineral"], carbon_dioxide=v["co2"],
                        alkalinity_eq_l=v.get("alkalinity"), calcium_mol_l=v.get("calcium"), base=v.get("base"),
                        to_ph=v.get("ph"))


def _fluoridate(spec: StepSpec, plan: Plan, _: Mapping[str, Stream]) -> Step:
    return Fluoridate(name=spec.name, product=spec.values["product"], fluoride_mol_l=spec.values["fluoride"])


def _dose(spec: StepSpec, plan: Plan, _: Mapping[str, Stream]) -> Step:
    return Dose(name=spec.name, products=(spec.values["product"],), mol_l=(spec.values["dose"],))


def _adjust(spec: StepSpec, plan: Plan, _: Mapping[str, Stream]) -> Step:
    targets = spec.values["target"]
    if spec.values["open_to_air"]:
        targets = tuple(_open(t) for t in targets)
    return Adjust(name=spec.name, products=spec.values["products"], targets=targets, margin=spec.values["margin"])


def _open(target: Target) -> Target:
    """A pH target taken at equilibrium with air."""
    return replace(target, quantity=find_quantity("ph_at_air")) if target.quantity.name == "ph" else target


_BUILDERS: Mapping[str, Callable[[StepSpec, Plan, Mapping[str, Stream]], Step]] = MappingProxyType({
    "coagulate": _coagulate, "chlorinate": _chlorinate, "nitrify": _nitrify, "denitrify": _denitrify,
    "aerate": _aerate, "temperature": _temperature, "blend": _blend, "soften": _soften, "recarbonate": _recarbonate,
    "contact": _contact, "remineralize": _remineralize, "fluoridate": _fluoridate, "dose": _dose, "adjust": _adjust})
