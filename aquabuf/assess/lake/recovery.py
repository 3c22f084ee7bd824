"""Does a lake recover from acid? Told by its ANC and what drives it, never by pH alone."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from aquabuf.assess.lake.trend_words import short
from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = ["PH_ALONE", "RECOVERY_COLUMNS", "RULE", "VERDICTS", "recovery"]

RECOVERY_COLUMNS = ("site", "recovering", "verdict", "anc_quantity", "anc_slope_ueq_l_yr", "anions_slope_ueq_l_yr",
                    "cations_slope_ueq_l_yr", "rising", "falling", "no_sure_trend", "words", "rule")
RULE = ("ANC decides (Gran ANC where its trend can be told, else charge-balance ANC): recovery is ANC rising while "
        "sulfate or nitrate falls and their sum does not rise, each at least likely with serial correlation counted "
        "where it can be; pH alone shows none")
PH_ALONE = ("pH rises, which alone is no recovery: less CO2 in the water, another time of year or another meter does "
            "the same")
_NEEDED = ("site", "quantity", "label", "status", "direction", "sen_slope")


@dataclass(frozen=True, slots=True)
class _Seen:
    """Directions of the ANCs, the one that decides first, and whether acid anions fall."""

    anc: Sequence[str]
    driven: bool


# Verdict, whether the lake recovers, and when: the first that holds counts.
_VERDICTS: tuple[tuple[str, str, Callable[[_Seen], bool]], ...] = (
    ("no trend of ANC can be told", "unknown", lambda s: not s.anc),
    ("definitions of ANC disagree", "unclear", lambda s: {"rising", "falling"} <= set(s.anc)),
    ("Gran ANC rises, charge balance does not: look for a change of method", "unclear",
     lambda s: s.anc[0] == "rising" and len(s.anc) > 1 and "rising" not in s.anc[1:]),
    ("ANC rises as acid anions fall", "yes", lambda s: s.anc[0] == "rising" and s.driven),
    ("ANC rises, cause not shown", "unclear", lambda s: s.anc[0] == "rising"),
    ("ANC falls", "no", lambda s: s.anc[0] == "falling"),
    ("acid anions fall, ANC does not surely rise", "not shown", lambda s: s.driven),
    ("no sure trend of ANC", "not shown", lambda s: True),
)
VERDICTS = {verdict: recovering for verdict, recovering, _ in _VERDICTS}


def recovery(table: pd.DataFrame) -> pd.DataFrame:
    """Whether each site recovers from acid, a row per site in order of appearance.

    Parameters
    ----------
    table
        As `trend_table` returns it.

    Returns
    -------
    pandas.DataFrame
        `RECOVERY_COLUMNS`. `recovering` is yes, no, not shown, unclear or unknown and follows from `verdict`
        (`VERDICTS`); slopes of ANC, of sulfate and nitrate together and of base cations, nan where not known; the
        quantities that rise, fall or do neither surely; `words` and the `rule`.

    Raises
    ------
    InputError
        Where a column of the table of trends is missing.

    Notes
    -----
    Charge-balance ANC is base cations minus strong acid anions, so what sulfate and nitrate lose is shared between a
    rise of ANC and a fall of base cations; the words give that share. The table `trend_quantities.csv` says which
    quantity judges (the first of them decides), drives, answers, is part of one or goes along.
    """
    for name in _NEEDED:
        if name not in table:
            raise InputError(f"recovery needs the column {name} of the table of trends; it is missing. Pass the table "
                             f"as trend_table returns it.")
    rows = [_judged(str(site), rows) for site, rows in table.groupby("site", sort=False)]
    return pd.DataFrame(rows, columns=list(RECOVERY_COLUMNS))


def _judged(site: str, rows: pd.DataFrame) -> dict[str, object]:
    """The row of one site."""
    known = rows[rows["status"] == "ok"]
    way = dict(zip(known["quantity"].astype(str), known["direction"].astype(str), strict=True))
    slope = dict(zip(known["quantity"].astype(str), known["sen_slope"].astype(float), strict=True))
    label = {q["name"]: q["label"] for q in read_table("trend_quantities")}
    known_of = {role: [q["name"] for q in read_table("trend_quantities") if q["role"] == role and q["name"] in way]
                for role in ("judge", "driver", "answer")}
    anc, drivers, cations = known_of["judge"], known_of["driver"], known_of["answer"]
    anions = sum(slope[name] for name in drivers) if drivers else np.nan
    driven = any(way[name] == "falling" for name in drivers) and anions <= 0.0
    seen = _Seen([way[name] for name in anc], driven)
    verdict, recovering = next((v, r) for v, r, holds in _VERDICTS if holds(seen))
    moving = ", ".join(f"{label[n]} {short(slope[n])}" for n in (*anc, *drivers) if way[n] != "no sure trend")
    return {
        "site": site, "recovering": recovering, "verdict": verdict, "anc_quantity": anc[0] if anc else "",
        "anc_slope_ueq_l_yr": slope[anc[0]] if anc else np.nan, "anions_slope_ueq_l_yr": anions,
        "cations_slope_ueq_l_yr": slope[cations[0]] if cations else np.nan,
        "rising": _listed(way, label, "rising"), "falling": _listed(way, label, "falling"),
        "no_sure_trend": _listed(way, label, "no sure trend"), "rule": RULE,
        "words": "; ".join([verdict, *([f"{moving} µeq/L per year"] if moving else []), *_other_anc(anc, way, label),
                            *_taken_up(anions, slope, way, cations), *_ph_alone(anc, way)])}


def _listed(way: dict[str, str], label: dict[str, str], direction: str) -> str:
    """Names of the quantities that go one way."""
    return ", ".join(label[name] for name, its in way.items() if its == direction)


def _other_anc(anc: list[str], way: dict[str, str], label: dict[str, str]) -> list[str]:
    """A word where another ANC rises and the one that decides does not."""
    rising = [label[name] for name in anc[1:] if way[name] == "rising" and way[anc[0]] == "no sure trend"]
    return [f"{rising[0]} rises, but {label[anc[0]]} decides: organic acids or errors of ions may be the difference"
            ] if rising else []


def _taken_up(anions: float, slope: dict[str, float], way: dict[str, str], cations: list[str]) -> list[str]:
    """What part of the fall of acid anions base cations take up."""
    if not (cations and way[cations[0]] == "falling" and anions < 0.0):
        return []
    share = 100.0 * slope[cations[0]] / anions
    taken = f"{share:.0f} % of the fall of acid anions" if share < 100.0 else "all the fall of acid anions"
    return [f"base cations fall too and take up {taken}"]


def _ph_alone(anc: list[str], way: dict[str, str]) -> list[str]:
    """What a pH that rises without ANC is worth."""
    return [PH_ALONE] if way.get("ph") == "rising" and not (anc and way[anc[0]] == "rising") else []
