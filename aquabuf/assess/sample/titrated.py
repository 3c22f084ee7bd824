"""Results of titrations as readings of an assessment."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.sample.inputs import TITRATED_BY
from aquabuf.assess.titration.assess import TitrationResult, assess_titrations
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.assess.titration.tables import NO_RESULT, REFUSED, WARNED
from aquabuf.readings.result import Readings
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.readings.titration.reader import iter_titrations

__all__ = ["Titrated", "titrated_by"]

METALS = "metals take part"  # finding of a Gran line
ACIDITY_ONLY = "acidity only"
COLUMNS = {False: ("alkalinity_eq_l", "alkalinity_u_eq_l"), True: ("anc_eq_l", "anc_u_eq_l")}  # by "is it an ANC"


@dataclass(slots=True)
class Titrated:
    """Recommended results of titrations, and what became of them.

    results : value and standard uncertainty [eq/L], method, and whether it is an ANC, by sample name.
    without : titrations without a result, by status. warned : results that carry a warning.
    used, replaced : results that were taken into readings, and how many took the place of an alkalinity there.
    """

    results: dict[str, tuple[float, float, str, bool]] = field(default_factory=dict)
    without: Counter = field(default_factory=Counter)
    warned: int = 0
    used: Counter = field(default_factory=Counter)
    replaced: int = 0

    def put_into(self, readings: Readings) -> Readings:
        """The readings with the alkalinity (or ANC, of a whole sample) of each titrated sample in its place."""
        frame = readings.frame.copy()
        found = [self.results.get(name) for name in frame["sample_id"]]
        hit = np.array([f is not None for f in found], dtype=bool)
        had = np.zeros(len(frame), dtype=bool)
        for is_anc, names in COLUMNS.items():
            value, u = (frame[n].to_numpy(copy=True) if n in frame else np.full(len(frame), np.nan) for n in names)
            had |= hit & np.isfinite(value)
            value[hit], u[hit] = np.nan, np.nan
            for i, result in enumerate(found):
                if result is not None and result[3] == is_anc:
                    value[i], u[i] = result[:2]
            frame[names[0]], frame[names[1]] = value, u
        frame[TITRATED_BY] = [result[2] if result else "" for result in found]
        self.replaced += int(had.sum())
        self.used.update(result[2] for result in found if result)
        flags = readings.flags
        gone = flags["column"].isin([names[0] for names in COLUMNS.values()]) & flags["row"].isin(frame["row"][hit])
        return replace(readings, frame=frame, flags=flags[~gone])

    def in_words(self, source: str) -> list[str]:
        """What the titrations gave to the assessment."""
        count = sum(self.used.values())
        by = ", ".join(f"{method} {n:,}" for method, n in self.used.most_common())
        instead = f"; in {self.replaced:,} of them it took the place of the alkalinity in the readings"
        lines = [f"Alkalinity of {_many(count, 'sample')} is the recommended result of "
                 f"{'its' if count == 1 else 'their'} titration in {source} ({by})"
                 + (instead if self.replaced else "") + "."]
        if not count:
            lines = [f"No accepted sample of the readings has a titration with a result in {source}."]
        if len(self.results) > count:
            lines.append(f"Without an accepted sample of their name in the readings: "
                         f"{_many(len(self.results) - count, 'titration')} with a result.")
        if self.without:
            words = ", ".join(f"{status} {n:,}" for status, n in sorted(self.without.items()))
            lines.append(f"Nothing came of {_many(sum(self.without.values()), 'titration')} ({words}): where the "
                         f"readings have an alkalinity of their own, it stands. `aquabuf titration` says why.")
        if self.warned:
            lines.append(f"A warning stands with {_many(self.warned, 'result')} of titrations; `aquabuf titration` "
                         f"tells which.")
        return lines


def _many(count: int, noun: str) -> str:
    return f"{count:,} {noun}{'' if count == 1 else 's'}"


def _acid_of_metals(part: TitrationResult) -> NDArray[np.bool_]:
    """Titrations with base whose Gran line counts iron and aluminum: their free acid is no alkalinity to go on."""
    metals = next((f.here for f in part.found if f.name == METALS), np.zeros(part.at.size, dtype=bool))
    return part.solved.curves.is_base & metals


def titrated_by(files: TitrationFiles) -> Titrated:
    """Assess the titrations and keep what an assessment of readings needs. Raises as `iter_titrations` does."""
    out = Titrated()
    for t in iter_titrations(files.points, files.samples, points_map=files.points_map, samples_map=files.samples_map):
        part = assess_titrations(t, TitrationOptions(), by_liter=True, by_kilogram=True)
        s, choice = part.solved, part.choice
        per_liter = np.where(s.curves.by_mass, s.curves.density_kg_l, 1.0)
        is_anc = [str(words).startswith("ANC") for words in part.results["definition"].to_numpy()[part.at]]
        usable = np.isfinite(choice.value) & ~_acid_of_metals(part)
        for i in np.flatnonzero(usable).tolist():
            out.results[s.curves.names[i]] = (float(choice.value[i] * per_liter[i]), float(choice.u[i] * per_liter[i]),
                                              str(choice.method[i]), bool(is_anc[i]))
        status, has = part.results["status"].to_numpy(), np.zeros(len(t), dtype=bool)
        has[part.at] = usable
        out.without.update(word if word in (REFUSED, NO_RESULT) else ACIDITY_ONLY for word in status[~has].tolist())
        out.warned += int((status[has] == WARNED).sum())
    return out
