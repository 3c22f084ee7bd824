"""Water and products for the tests of the steps."""

import numpy as np

from aquabuf import Water
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.stream import TOTALS, Stream
from aquabuf.chem.products import find_product, with_basicity

EQ_PER_MG_CACO3 = 2.0 / 100.086 / 1e3  # IUPAC masses
ML_PER_MGAL = 3.785411784


def water_of(ph=7.5, mg_caco3=100.0, t_c=25.0, strength=0.003, rows=1, **totals):
    """Rows of water by meter pH and alkalinity in mg/L as CaCO3; totals in mol/L, the others unknown."""
    one = np.ones(rows)
    alkalinity = mg_caco3 * EQ_PER_MG_CACO3 * one
    known = {n: totals[n] for n in ("ammonium", "phosphate", "hypochlorite") if n in totals}
    water = Water.from_ph_alkalinity(ph=ph, alkalinity_eq_l=alkalinity, t_c=t_c, ionic_strength_mol_l=strength,
                                     **{f"{n}_mol_l": v for n, v in known.items()})
    return Stream(t_c * one, alkalinity, water.dic_mol_l, {n: totals.get(n, np.nan) * one for n in TOTALS},
                  strength * one, one)


def stocked(name, strength=1.0, density_kg_l=None, basicity=None):
    """A product of the table as pure stock."""
    product = find_product(name) if basicity is None else with_basicity(find_product(name), basicity)
    return Stocked(name=name, product=product, strength=strength, density_kg_l=density_kg_l)


def words(outcome, severity=None):
    """Words of all findings, or of those of one severity."""
    return " | ".join(f.words for f in outcome.findings if severity in (None, f.severity))
