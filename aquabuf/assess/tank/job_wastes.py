"""The wastes of a stream file: what they hold, their titrations, how they come."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from aquabuf.assess.plant.plan_keys import Checked, check_keys
from aquabuf.assess.plant.plan_place import Place
from aquabuf.assess.plant.plan_store import Told
from aquabuf.assess.tank.composition import Waste, check_known, dissolved
from aquabuf.assess.tank.curve import MeasuredCurve, measured, strength_of
from aquabuf.assess.tank.job import Arrival, Batch, Daily, Spread
from aquabuf.assess.tank.job_contents import OwnAcids, contents_of, own_acids, tell_contents
from aquabuf.assess.tank.profile_draw import sd_from_most
from aquabuf.engine.conditions import LIMITS
from aquabuf.errors import FileError, InputError
from aquabuf.readings.curve_file import CurveTable, read_curves
from aquabuf.units import key as plain

__all__ = ["beside", "not_there", "read_wastes"]

MIDDLE_POINTS = 81  # at which samples are compared


def read_wastes(top: Place, content: Mapping[str, Any], folder: Path, told: Told, *, has_profile: bool,
                ) -> tuple[Arrival, ...]:
    """The wastes of a stream file in its order. Raises InputError naming line, key and remedy."""
    table = top.inner("wastes", label="[wastes]").table(content.get("wastes", {}))
    if not table:
        raise InputError(f"{top.file}: a stream file needs one waste or more in [wastes]; none is there. Add for "
                         "example [wastes.rinse] with its temperature, flow and what it holds.")
    own = own_acids(top, top.inner("acids", label="[acids]").table(content.get("acids", {})))
    by_plain: dict[str, str] = {}
    for name in table:
        place = top.inner("wastes", name, label=f"[wastes.{name}]")
        if not plain(name):
            raise place.error(f"a waste needs a name of letters; found {name!r}. Name it.")
        if plain(name) in by_plain:
            raise place.error(f"the name of a waste must differ from the others in its letters; found {name!r} and "
                              f"{by_plain[plain(name)]!r}. Rename one.")
        by_plain[plain(name)] = name
    return tuple(_arrival(top.inner("wastes", name, label=f"[wastes.{name}]"), name, value, own, folder, told,
                          in_profile=has_profile) for name, value in table.items())


def beside(place: Place, folder: Path, name: str, key: str) -> Path:
    """A table beside the stream file. Raises InputError where there is none."""
    try:
        there = (folder / name).is_file()
    except (OSError, ValueError):  # a name that no file can have
        there = False
    if not there:
        raise place.error(f"{key} must be a table beside the stream file; found no file {name!r}. Correct the name.",
                          key)
    return folder / name


def not_there(place: Place, key: str, word: str, known: Mapping[str, Any], what: str) -> InputError:
    """What to say of a word at a key that names nothing."""
    return InputError(str(place.unknown(word, known, what)).replace(place.where(word), place.where(key), 1))


def _arrival(place: Place, name: str, value: object, own: OwnAcids, folder: Path, told: Told, *, in_profile: bool,
             ) -> Arrival:
    found = check_keys(place, place.table(value), "wastes")
    samples = _samples(place, found, folder, told)
    curve = _chosen(place, found, samples, told)
    waste = Waste(name=name, t_c=found["temperature"], ph=found.get("ph"), solids_g_l=found.get("solids", 0.0),
                  curve=curve)
    contents = contents_of(place.inner("holds", label=f"{place.label} holds"), found.get("holds", {}), own)
    waste = place.tried("holds", lambda: dissolved(waste, contents, tuple(acid for acid, _ in own.values())))
    place.tried("ph" if "ph" in found.values else "holds", lambda: check_known(waste))
    tell_contents(place.label, waste, contents, own, told)
    batch = _inner(place, found, "batch", told)
    spread, daily = _inner(place, found, "strength", told), _inner(place, found, "daily", told)
    mean, least, most = found.get("flow"), found.get("least"), found.get("most")
    _check_flows(place, found, daily, batch, in_profile)
    _tell_course(place, found, told, in_profile)
    return Arrival(
        waste=waste, mean_m3_h=mean if batch is None else batch["size"] / batch["every"], least_m3_h=least,
        most_m3_h=most, samples=samples,
        spread=None if spread is None else Spread(relative_sd=spread["spread"], lasting_h=spread["lasting"]),
        daily=None if daily is None else Daily(swing=daily["swing"], peak_h=daily["peak"]),
        batch=None if batch is None else Batch(size_m3=batch["size"], every_h=batch["every"], over_h=batch["over"],
                                               first_h=batch["first"]))


def _inner(place: Place, found: Checked, key: str, told: Told) -> Checked | None:
    if key not in found.values:
        return None
    inner = place.inner(key, label=f"{place.label} {key}")
    checked = check_keys(inner, found[key], f"wastes.{key}")
    told.defaults(inner.label, checked)
    return checked


def _check_flows(place: Place, found: Checked, daily: Checked | None, batch: Checked | None, in_profile: bool) -> None:
    mean, least, most = found.get("flow"), found.get("least"), found.get("most")
    steady = [key for key in ("flow", "least", "most", "daily") if key in found.values]
    if batch is not None and steady:
        raise place.error(f"a waste that is dumped in batches has no {steady[0]}; found both. Remove one.", steady[0])
    if batch is not None and batch["over"] > batch["every"]:
        raise place.error(f"a dump must be over before the next begins, after {batch['every']:g} h; found over = "
                          f"{batch['over']:g} h. Correct one of them.", "batch")
    if mean is None and batch is None and not in_profile:
        raise place.error("flow is needed: a mean flow, a batch, or a [profile]; none is there. Add for example flow = "
                          "\"12 m3/h\".")
    if mean is None and batch is None and steady:
        raise place.error(f"{steady[0]} must go with flow, its mean; found none. Add flow or remove {steady[0]}.",
                          steady[0])
    if mean is None:
        return
    for key, wrong, rule in (("least", least is not None and least > mean, "at most"),
                             ("most", most is not None and most < mean, "at least")):
        if wrong:
            raise place.error(f"{key} must be {rule} the mean flow, {mean:g} m³/h; found {found[key]:g} m³/h. Correct "
                              "one of them.", key)
    swing = 0.0 if daily is None else daily["swing"]
    for key, end, wrong in (("least", 1.0 - swing, least is not None and mean * (1.0 - swing) < least),
                            ("most", 1.0 + swing, most is not None and mean * (1.0 + swing) > most)):
        if wrong:
            raise place.error(f"daily must stay within least and most; found a swing of {100.0 * swing:g} %, to "
                              f"{mean * end:g} m³/h, past {key} = {found[key]:g} m³/h. Correct one of them.", "daily")
    if most is not None:
        place.tried("most", lambda: sd_from_most(mean, most))


def _tell_course(place: Place, found: Checked, told: Told, in_profile: bool) -> None:
    """What is taken of flow, strength and solids where nothing is said, and what a profile makes idle."""
    if "solids" not in found.values:
        told.assume(f"{place.label}: no suspended solids, as the file does not say")
    if "strength" not in found.values:
        told.assume(f"{place.label}: its strength stays as stated{' but for [profile]' if in_profile else ''}, as the "
                    "file gives no spread")
    if in_profile:
        idle = [key for key in ("least", "most", "daily", "batch") if key in found.values]
        if "strength" in found.values:
            told.assume(f"{place.label}: its spread comes on top of the strengths of [profile]")
        if idle:
            told.notes.append(f"{place.label}: {', '.join(idle)} left aside, as [profile] has the flow over time")
    elif "batch" not in found.values and not {"most", "daily"} & set(found.values):
        told.assume(f"{place.label}: a steady flow, as the file gives neither a largest flow nor a daily cycle")


# ---------------------------------------------------------------- titrations


def _samples(place: Place, found: Checked, folder: Path, told: Told) -> tuple[MeasuredCurve, ...]:
    name = found.get("titration")
    if name is None:
        if "sample" in found.values:
            raise place.error("sample must go with titration; found none. Add titration or remove sample.", "sample")
        return ()
    file = beside(place, folder, name, "titration")
    table = place.tried("titration", lambda: _read(file))
    told.notes.extend(f"{place.label}, {name}: {words}" for words in table.notes)
    lines = [f"row {r.row}, sample {r.sample_id!r}, {r.column}: {r.rule}; found {r.value}. {r.remedy}"
             for r in table.refused.itertuples()]
    told.notes.extend(f"{place.label}, {name}, left out: {words}" for words in lines)
    if not table.curves:
        raise place.error(f"no titration of {name} can be used. {lines[0] if lines else 'It is empty'}.", "titration")
    t_c = found["temperature"]
    if any(np.isnan(points.t_c) for points in table.curves):
        if t_c > LIMITS["t_c"][3]:
            raise place.error(f"{name} must say at which temperature it was titrated, as a waste of {t_c:g} °C hardly "
                              "was as it is; found none. Add a column temperature_c.", "titration")
        told.assume(f"{place.label}: titrated at its own {t_c:g} °C, as {name} has no temperature")
    return tuple(measured(points, t_c) for points in table.curves)


def _read(file: Path) -> CurveTable:
    try:
        return read_curves(file)
    except FileError as error:
        raise InputError(str(error)) from None


def _chosen(place: Place, found: Checked, samples: tuple[MeasuredCurve, ...], told: Told) -> MeasuredCurve | None:
    if not samples:
        return None
    wanted = found.get("sample")
    by_name = {curve.sample_id: curve for curve in samples}
    if wanted is not None and wanted not in by_name:
        raise not_there(place, "sample", wanted, by_name, f"a sample of {found['titration']}")
    curve = _middle(samples) if wanted is None else by_name[wanted]
    if wanted is None and len(samples) > 1:
        told.assume(f"{place.label}: designed for sample {curve.sample_id}, the middle one of {len(samples)} by demand")
    if np.isnan(curve.raw_ph):
        raise place.error(f"the titration of {curve.sample_id!r} must hold the raw waste, with nothing added; it runs "
                          f"from {curve.base_eq_l[0]:.4g} to {curve.base_eq_l[-1]:.4g} eq/L. Add its pH at 0.",
                          "titration")
    return curve


def _middle(samples: tuple[MeasuredCurve, ...]) -> MeasuredCurve:
    """The sample in the middle by its strength, the first of two."""
    low, high = max(c.ph[0] for c in samples), min(c.ph[-1] for c in samples)
    if len(samples) == 1 or not low < high:
        return samples[0]
    strength, _ = strength_of(samples, np.linspace(low, high, MIDDLE_POINTS))
    return samples[int(np.argsort(strength, kind="stable")[(len(samples) - 1) // 2])]
