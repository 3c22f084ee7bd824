"""Results of made-up lakes, without files, and what a drawn panel shows of them."""

import numpy as np
import pandas as pd

from aquabuf.assess.lake.classes import class_names, classify
from aquabuf.assess.lake.response import response_curves
from aquabuf.assess.lake.schemes import shipped_schemes
from aquabuf.chem.organic import organic_models

BANDS, PH_SCHEME = shipped_schemes()["survey_bands"], shipped_schemes()["sweden_ph"]
NAMES = [c.name for c in BANDS.classes]
RESPONSE = response_curves(12.0, 5e-4, 400.0, 10.0, organic_models()["hruska_b"])
MANY_ANC = np.concatenate([np.linspace(-80.0, 300.0, 80), [900.0, 4000.0]])
HARD_NAME = "_lake $\\frac{$ 湖 of a name that goes on and on to sixty letters"


def survey(anc, *, scheme=BANDS, loads=True, **columns):
    """Results of made-up lakes with these ANC [µeq/L]; pH rises with it, loads too."""
    anc = np.asarray(anc, dtype=float)
    n = anc.size
    ph = 6.0 + np.arcsinh(anc / 20.0) / 2.0
    value = ph if scheme.quantity == "ph" else 1e-6 * anc
    load = np.where(np.isfinite(anc), 30.0 + 0.3 * anc, np.nan) if loads else np.full(n, np.nan)
    table = {
        "sample_id": [f"s{k}" for k in range(n)], "row": np.arange(2, n + 2), "site": "", "region": "",
        "class": class_names(scheme, classify(scheme, value)), "anc_used_ueq_l": anc, "anc_used_from": "Gran ANC", "ph": ph,
        "ph_at_air": ph + 0.3, "critical_load_meq_m2_yr": load, "critical_load_meq_m2_yr_low": load - 5.0,
        "critical_load_meq_m2_yr_high": load + 8.0, "exceedance_meq_m2_yr": 40.0 + np.arange(n) % 7 - load,
        "exceedance_probability": np.nan, "acid_to_ph_6_0_open_ueq_l": anc - 5.0, "acid_to_ph_6_0_open_ueq_l_low": anc - 12.0,
        "acid_to_ph_6_0_open_ueq_l_high": anc + 2.0, "acid_to_anc_limit_ueq_l": anc - 20.0, "warnings": ""}
    return pd.DataFrame(table | columns)


def clouds(axes):
    """Marks by class: places (2, lakes), in the order drawn."""
    return {c.get_label().rpartition(" (")[0]: np.asarray(c.get_offsets()).T for c in axes.collections
            if not c.get_label().startswith("_")}


def lines(axes, label):
    """Lines of a label."""
    return [np.array(line.get_data(), dtype=float) for line in axes.lines if line.get_label() == label]


def upright(axes, label):
    """Where upright lines of a label stand."""
    return [line.get_xdata()[0] for line in axes.lines if line.get_label() == label]


def words(axes):
    """All that is written inside an axis."""
    return [t.get_text() for t in axes.texts]


def title(axes):
    """Title, wherever it stands."""
    return axes.get_title(loc="left") + axes.get_title()


def steps(axes, label):
    """Corners of a curve of shares, without the ends that reach to the edges."""
    line = next(line for line in axes.lines if line.get_label() == label)
    return np.array(line.get_data())[:, 1:-1]


def bars(axes):
    """Lengths of the segments of each bar, by its name."""
    names = {y: t.get_text() for y, t in zip(axes.get_yticks(), axes.get_yticklabels(), strict=True)}
    out = {}
    for patch in axes.patches:
        out.setdefault(names[round(patch.get_y() + 0.5 * patch.get_height())], []).append(patch.get_width())
    return out


def ticks_of(axis):
    """Labels of the ticks of an axis that are in view."""
    low, high = sorted(axis.get_view_interval())
    return [t for at, t in zip(axis.get_majorticklocs(), axis.get_ticklabels(), strict=True)
            if low <= at <= high and t.get_text()]
