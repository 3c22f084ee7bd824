"""Which ANC a lake has: by charge balance, titrated, corrected for organic acids; and why they differ.

Every quantity keeps the name of its definition; none is filled in for another. All in eq/L, signed.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import LN10
from aquabuf.assess.ionsums import conductivity_factor
from aquabuf.assess.lake.inputs import ANION_NAMES, BASE_CATIONS, CATION_NAMES, STRONG_ANIONS, Lakes
from aquabuf.chem.aluminum import charge_and_slope
from aquabuf.chem.organic import OrganicModel, strong_organic_anion
from aquabuf.tables import read_table

__all__ = ["GRAN_PH", "NEEDED", "AncKinds", "Budget", "Missing", "anc_kinds", "budget", "gran_leaves_out",
           "left_out_by_gran", "missing_ions"]

Array = NDArray[np.float64]

# Where the line of a Gran titration is taken to touch the curve of organic acids and aluminum. Of the usual window,
# pH 4.5 to 3.7, its upper end predicts the pH at air of lakes above pH 5 best (open survey; figures in docs/lake.md).
GRAN_PH = 4.5
NEEDED = (*BASE_CATIONS, *STRONG_ANIONS)  # ions without which there is no charge-balance ANC


@dataclass(frozen=True, slots=True, eq=False)
class Budget:
    """ANC of each lake by definition, and the sums they are made of. [eq/L]

    charge : base cations and ammonium less sulfate, nitrate and chloride; without ammonium where that is not measured;
    as given where it was worked out elsewhere and ions are missing. charge_bare : of the ions, without ammonium.
    gran, alkalinity, end_point : titrated, of the whole sample, of the filtered one, to a fixed pH.
    gran_of_ions : what a Gran titration would give by ions, organic carbon and aluminum; nan without organic carbon.
    organic_corrected : charge less a third of all organic acid sites. surplus : charge_bare less strong organic anions.
    gap : charge less Gran; of it organic (organic anions that the titration leaves out), aluminum, other (fluoride that
    was measured, and ammonium where the charge leaves it out), and the rest.
    """

    base_cations: Array
    strong_anions: Array
    charge: Array
    charge_bare: Array
    with_ammonium: NDArray[np.bool_]
    gran: Array
    gran_of_ions: Array
    alkalinity: Array
    end_point: Array
    organic_corrected: Array
    surplus: Array
    gap: Array
    gap_organic: Array
    gap_aluminum: Array
    gap_other: Array

    @property
    def gap_rest(self) -> Array:
        """What the parts do not explain: error, or an ion that was not measured. [eq/L]"""
        return self.gap - self.gap_organic - self.gap_aluminum - self.gap_other


@dataclass(frozen=True, slots=True, eq=False)
class AncKinds:
    """What the columns of ANC and alkalinity hold in each lake; masks of shape (lakes, 1).

    is_gran : a Gran ANC, or one by a method that agrees with it. is_end_point : titrated to a fixed pH, another
    quantity. is_computed : a charge balance that was worked out elsewhere.
    """

    is_gran: NDArray[np.bool_]
    is_end_point: NDArray[np.bool_]
    is_computed: NDArray[np.bool_]

    def take(self, rows: NDArray[np.intp]) -> AncKinds:
        """The same for some of the lakes."""
        return AncKinds(self.is_gran[rows], self.is_end_point[rows], self.is_computed[rows])


def anc_kinds(method: NDArray[np.object_]) -> AncKinds:
    """Kinds from the words of the column anc_method; unstated counts as Gran."""
    words = np.asarray(method, dtype=object)[:, None]
    end_point, computed = words == "end_point", words == "charge_balance"
    return AncKinds(~(end_point | computed), end_point, computed)


def budget(lakes: Lakes, kinds: AncKinds, *, ammonium: bool = True) -> Budget:
    """Every ANC of each lake. `ammonium` : whether the charge balance counts ammonium where it was measured."""
    base = sum((lakes.charge(ion) for ion in BASE_CATIONS[1:]), start=lakes.charge(BASE_CATIONS[0]))
    acid = sum((lakes.charge(ion) for ion in STRONG_ANIONS[1:]), start=lakes.charge(STRONG_ANIONS[0]))
    nh4 = lakes.charge("ammonium")
    counted = np.isfinite(nh4) & ammonium
    bare = base - acid
    anc, alkalinity = lakes.get("anc_eq_l"), lakes.get("alkalinity_eq_l")
    of_ions = bare + np.where(counted, np.nan_to_num(nh4), 0.0)
    computed = np.where(np.isfinite(anc), anc, alkalinity)
    charge = np.where(np.isnan(of_ions) & kinds.is_computed, computed, of_ions)
    gran = np.where(kinds.is_gran, anc, np.nan)
    organic, aluminum = gran_leaves_out(lakes)
    doc = lakes.get("doc_mg_l")
    return Budget(
        base_cations=base, strong_anions=acid, charge=charge, charge_bare=bare, with_ammonium=counted, gran=gran,
        gran_of_ions=np.where(np.isfinite(doc), bare + np.nan_to_num(nh4) - np.nan_to_num(lakes.charge("fluoride"))
                              - organic + aluminum, np.nan),
        alkalinity=np.where(kinds.is_gran | np.isfinite(anc), alkalinity, np.nan),  # the method is that of `anc`
        end_point=np.where(kinds.is_end_point, np.where(np.isfinite(anc), anc, alkalinity), np.nan),
        organic_corrected=charge - lakes.organic.strong_eq_l(doc) * lakes.organic_error,
        surplus=bare - strong_organic_anion(doc) * lakes.organic_error,
        gap=charge - gran, gap_organic=np.where(np.isfinite(doc), organic, np.nan),
        gap_aluminum=-aluminum,
        gap_other=np.nan_to_num(lakes.charge("fluoride")) - np.where(counted, 0.0, np.nan_to_num(nh4)))


def gran_leaves_out(lakes: Lakes) -> tuple[Array, Array]:
    """Organic anions and charge of aluminum that a Gran titration of each lake does not count as ANC. [eq/L]"""
    return left_out_by_gran(lakes.organic, lakes.doc_mg_l, lakes.aluminum_mol_l)


def left_out_by_gran(organic: OrganicModel, doc_mg_l: Array, aluminum_mol_l: Array) -> tuple[Array, Array]:
    """Organic anions and charge of aluminum that a Gran titration does not count as ANC. [eq/L]

    Both still react while the line is read. A Gran line is the tangent of that curve, so that it leaves out
    A - h dA/dh of the anions, taken at GRAN_PH (derived: charge balance of the acidified sample).
    """
    kept = _tangent(*organic.charge(np.array(GRAN_PH)))
    return doc_mg_l * kept, aluminum_mol_l * _tangent(*charge_and_slope(np.array(GRAN_PH)))


def _tangent(value: Array, slope_ph: Array) -> Array:
    """Value at h = 0 of the tangent in h, from value and slope against pH."""
    return value + slope_ph / LN10


@dataclass(frozen=True, slots=True, eq=False)
class Missing:
    """Ions of the charge balance that were not measured: names, and the most they can be together. [eq/L]

    low, high : bounds of the charge-balance ANC with those ions between nothing and that most; nan where no ion is
    missing, and without conductivity.
    """

    names: NDArray[np.object_]
    most: Array
    low: Array
    high: Array


def missing_ions(lakes: Lakes, conductivity_room_us_cm: Array) -> Missing:
    """Name and bound the ions of the charge balance that are missing; arrays of shape (lakes, 1).

    `conductivity_room_us_cm` is measured conductivity, its allowance added, less that of the ions known; each missing
    equivalent needs at least the conductivity of the slowest ion missing, at the ionic strength of the lake.
    """
    slowed = conductivity_factor(lakes.setting.lake.ionic_strength_mol_l)
    per_eq = {r["name"]: float(r["conductivity_s_cm2_eq"] or "nan") * 1e3 for r in read_table("ions")}
    gone = {ion: np.isnan(lakes.charge(ion)) for ion in NEEDED}
    names = np.full(conductivity_room_us_cm.shape[0], "", dtype=object)
    slowest, known = np.full(conductivity_room_us_cm.shape, np.inf), np.nan_to_num(lakes.charge("ammonium"))
    for ion, mask in gone.items():
        where = mask[:, 0]
        names[where] = np.where(names[where] == "", ion, names[where] + "; " + ion)
        slowest = np.where(mask, np.minimum(slowest, per_eq[ion] * slowed), slowest)
        known = known + np.nan_to_num(lakes.charge(ion)) * (1.0 if ion in CATION_NAMES else -1.0)
    cation, anion = (np.any([mask for ion, mask in gone.items() if ion in side], axis=0)
                     for side in (CATION_NAMES, ANION_NAMES))
    some = cation | anion
    with np.errstate(invalid="ignore"):
        most = np.where(some, np.maximum(conductivity_room_us_cm, 0.0) / np.where(some, slowest, 1.0), np.nan)
    return Missing(names, most, known - np.where(anion, most, 0.0) + 0.0 * most, known + np.where(cation, most, 0.0)
                   + 0.0 * most)
