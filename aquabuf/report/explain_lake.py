"""Explain one lake of a run: the same readings, rules and draws again, and proof that the numbers are the same."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from aquabuf.assess.lake.assess import assess_lakes
from aquabuf.assess.lake.chain import LakeTables, lake_chain
from aquabuf.assess.lake.columns import lake_quantities
from aquabuf.assess.lake.options import LakeOptions, rules_of
from aquabuf.assess.lake.schemes import FILE_ENDING
from aquabuf.assess.lake.survey import site_keys
from aquabuf.assess.limits_file import read_limits
from aquabuf.assess.sample.chain import refused_chain
from aquabuf.assess.sample.chain_readings import Origin
from aquabuf.assess.sample.chain_steps import Chain
from aquabuf.readings.long.mapping import LongMap
from aquabuf.readings.origin import cells_of
from aquabuf.readings.result import join_readings
from aquabuf.readings.source import load_map, open_any
from aquabuf.report.chains import only_rows
from aquabuf.report.explain_files import RunFiles, options_from, titrations_of
from aquabuf.report.explain_search import prove, unknown_sample
from aquabuf.report.lake_run import lake_digits

__all__ = ["lake_chains"]


def lake_chains(folder: Path, record: Mapping[str, Any], sample_id: str, given: Path | None, row: int | None,
                ) -> list[Chain]:
    """The chain of every row of the survey that has this name, or of one of them.

    A lake is assessed again together with the other samples of its site, since one check compares them.
    """
    files = RunFiles.of(folder, record, given)
    options = _options(record, files)
    rules = rules_of(options, files.find("event"))
    limits = read_limits(files.find("limits"), lake_quantities(options.thresholds), "lake_limits")
    path, map_path = files.find("readings"), files.find("map")
    assert path is not None  # `RunFiles.of` saw to it
    mapping = None if map_path is None else load_map(map_path)
    readings, titrated = join_readings(open_any(path, mapping)), titrations_of(files)
    readings = readings if titrated is None else titrated.put_into(readings)
    ids = readings.frame["sample_id"].to_numpy(dtype=object)
    hits = np.flatnonzero(ids == sample_id)
    refused = readings.rejected[readings.rejected["sample_id"] == sample_id]
    keys, tables, accepted = site_keys(readings.frame), {}, {}
    for k in hits.tolist():
        same = (keys == keys[k]) & (keys != "")
        same[k] = True
        found = assess_lakes(only_rows(readings, same), rules, options, limits)
        line = int(readings.frame["row"].iloc[k])
        place = np.flatnonzero(found.results["row"].to_numpy() == line)
        if place.size:
            accepted[line], tables[line] = (found, int(place[0])), LakeTables.of(found, limits)
        else:
            refused = pd.concat([refused, found.rejected[found.rejected["row"] == line]])
    rows = sorted({*accepted, *(int(r) for r in refused["row"])})
    wanted = rows if row is None else [r for r in rows if r == row]
    if not wanted:
        names = dict.fromkeys((*ids, *readings.rejected["sample_id"].astype(str)))
        raise unknown_sample(sample_id, rows, names, path.name, row)
    cells = cells_of(path, mapping, set(wanted))
    chains = []
    for one in wanted:
        if one in accepted:
            found, i = accepted[one]
            prove(found.results.iloc[[i]], folder, lake_digits(options)["results.csv"], record)
            flags = readings.flags[readings.flags["row"] == one]
            origin = Origin.of(path.name, cells.get(one, ()), flags, found.frame.iloc[[i]], readings.headers)
            chains.append(lake_chain(found, i, tables[one], options, limits, origin, readings.headers))
        reasons = refused[refused["row"] == one]
        if len(reasons):
            chains.append(refused_chain(sample_id, one, Origin(file=path.name, cells=cells.get(one, ())), reasons,
                                        only_result=isinstance(mapping, LongMap) and bool(accepted)))
    return chains


def _options(record: Mapping[str, Any], files: RunFiles) -> LakeOptions:
    """The options of the run, schemes of the user's own by the file that was found."""
    options: LakeOptions = options_from(record, LakeOptions)
    paths = [files.find(f"scheme {k}") if name.endswith(FILE_ENDING) else None
             for k, name in enumerate(options.schemes, start=1)]
    schemes = tuple(name if path is None else str(path) for name, path in zip(options.schemes, paths, strict=True))
    return replace(options, schemes=schemes)
