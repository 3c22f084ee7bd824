"""Lakes from plain dictionaries in house units, without files; what a lake lacks was not measured."""

import numpy as np

from aquabuf.assess.lake.budget import anc_kinds, budget
from aquabuf.assess.lake.inputs import Lakes, setting_of
from aquabuf.chem.organic import organic_models

AIR_PPM = 400.0

# Lake 1A1-003 of the Eastern Lake Survey 1984 (US EPA), µeq/L as the agency prints them
HAWK_POND = {"calcium": 59.281, "magnesium": 16.287, "sodium": 17.487, "potassium": 6.341, "ammonium": 5.156,
             "sulfate": 132.457, "nitrate": 9.775, "chloride": 8.040, "fluoride": 2.853}
VALENCE = {"calcium": 2, "magnesium": 2, "sulfate": 2}


def ions(**ueq_l):
    """Amounts in mol/L from charges in µeq/L."""
    return {f"{name}_mol_l": 1e-6 * value / VALENCE.get(name, 1) for name, value in ueq_l.items()}


def columns(*rows):
    """One-dimensional values by column; 10 °C where a lake says nothing else."""
    names = dict.fromkeys(["temperature_c", *(name for row in rows for name in row)])
    return {name: np.array([row.get(name, 10.0 if name == "temperature_c" else np.nan) for row in rows]) for name in names}


def lakes_of(*rows, model="hruska_b", error=1.0, **setting):
    """`Lakes` of shape (lakes, 1)."""
    values = columns(*rows)
    return Lakes({name: v[:, None] for name, v in values.items()}, setting_of(values, AIR_PPM, **setting),
                 organic_models()[model], np.atleast_2d(error))


def budget_of(lakes, method="gran", **options):
    """The budget; `method` says what `anc` is, one word for all or one per lake."""
    n = lakes.setting.air_pco2_atm.shape[0]
    return budget(lakes, anc_kinds(np.broadcast_to(np.array(method, dtype=object), (n,))), **options)
