"""Does the slope of the Gran line bear out the strength of the titrant, and if not, is it strength or electrode?

Past the end point free acid rises by one equivalent per equivalent added. A line that rises by r of that means a
strength wrong by the factor r, or an electrode off by -log10 r, which the line alone cannot tell apart.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import LN10
from aquabuf.assess.titration.solve import LEAST_SLOPE_ERROR, Solved, organic_sites

__all__ = ["GOOD_CHI2", "doubt_in_words", "offset_explains", "organic_lowers", "slope_off", "strength_doubtful",
           "strength_explains", "unresolved", "what_tells"]

Array = NDArray[np.float64]

GOOD_CHI2 = 5.0           # reduced, of a fit that is believed
SLOPE_RATIO = (0.3, 3.0)  # beyond which the strength is in doubt; common practice, no source
SIGMAS = 2.5
EXPLAINED = 0.12          # of log10 of the ratio that an electrode offset may leave; about a quarter
CLEARLY_BETTER = 9.0      # chi-squared between electrode and strength: three standard deviations
ORGANIC_SHARE = 0.1       # of the acid on the line that organic sites may be before they spoil the test


def _checked(s: Solved) -> NDArray[np.bool_]:
    """Where the slope says something of the strength: not where the strength itself gave the pH."""
    return np.isfinite(s.gran.slope_ratio) & ~(s.curves.is_potential & (s.calibration.standards == 0))


def _good_fit(s: Solved) -> NDArray[np.bool_]:
    with np.errstate(invalid="ignore"):
        return (s.fit.u_offset < EXPLAINED) & (s.fit.fit.reduced_chi2 <= GOOD_CHI2)


def _for_electrode(s: Solved) -> Array:
    """Chi-squared that an electrode that is off leaves less than a strength that is wrong; nan where not known."""
    return (s.chi2_by_slope - s.fit.fit.reduced_chi2) * np.maximum(s.fit.points - 3, 1)


def offset_explains(s: Solved) -> NDArray[np.bool_]:
    """Where an electrode that is off by just that much fits the whole curve, and a strength that is wrong does not."""
    with np.errstate(invalid="ignore", divide="ignore"):
        by_so_much = np.abs(np.log10(s.gran.slope_ratio) + s.fit.fit.offset_ph) < EXPLAINED
        return _good_fit(s) & by_so_much & (_for_electrode(s) > CLEARLY_BETTER)


def strength_explains(s: Solved) -> NDArray[np.bool_]:
    """Where a strength that is wrong by just that much fits the whole curve, and an electrode that is off does not."""
    with np.errstate(invalid="ignore"):
        return (s.chi2_by_slope <= GOOD_CHI2) & (_for_electrode(s) < -CLEARLY_BETTER)


def organic_lowers(s: Solved) -> NDArray[np.bool_]:
    """Where organic acids along the line bind so much acid that its slope tests nothing."""
    on_line = s.curves.acid[np.arange(s.curves.count.size), np.maximum(s.gran.last, 0)] - s.gran.acid
    with np.errstate(invalid="ignore"):
        return (s.gran.slope_ratio < 1.0) & (organic_sites(s.samples, s.curves.count.size) > ORGANIC_SHARE * on_line)


def strength_doubtful(s: Solved) -> NDArray[np.bool_]:
    """Where the line is so far off that the strength, or its unit, must be wrong: no result is given then."""
    ratio = s.gran.slope_ratio
    with np.errstate(invalid="ignore"):
        far = (ratio < SLOPE_RATIO[0]) | (ratio > SLOPE_RATIO[1])
    return _checked(s) & far & ~offset_explains(s)


def slope_off(s: Solved) -> NDArray[np.bool_]:
    """Where the slope is off by more than 2.5 times what strength and electrode allow, and by 5 %."""
    allowed = np.maximum(SIGMAS * np.hypot(s.curves.relative_u, LN10 * s.curves.u_ph), LEAST_SLOPE_ERROR)
    with np.errstate(invalid="ignore", divide="ignore"):
        return _checked(s) & (np.abs(np.log(s.gran.slope_ratio)) > allowed) & ~strength_doubtful(s)


def unresolved(s: Solved) -> NDArray[np.bool_]:
    """Where the slope is off and the strength may be to blame: its error belongs into the uncertainty."""
    return slope_off(s) & ~offset_explains(s) & ~organic_lowers(s)


def doubt_in_words(s: Solved, i: int) -> str:
    """Why one titration with a doubtful strength gets no result though its methods have some."""
    ratio, c = s.gran.slope_ratio[i], s.curves
    unit = "eq/kg" if c.added_mass[i] else "eq/L"
    return (f"the strength of the titrant is in doubt: free acid rises by {ratio:.2g} of what {c.strength[i]:.3g} "
            f"{unit} should give, as {ratio * c.strength[i]:.2g} {unit} would; correct the strength or its unit")


def what_tells(s: Solved, here: NDArray[np.bool_]) -> NDArray[np.object_]:
    """Whether the bicarbonate part of the curve sides with the electrode or with the strength."""
    offset, ratio = s.fit.fit.offset_ph, s.gran.slope_ratio
    organic, electrode, strength = organic_lowers(s), offset_explains(s), strength_explains(s)
    more = np.full(here.size, "", dtype=object)
    for i in np.flatnonzero(here).tolist():
        if organic[i]:
            more[i] = ("organic acids bind acid along the line and lower its slope; with so much organic carbon the "
                       "slope cannot test strength and electrode")
        elif electrode[i]:
            more[i] = (f"the bicarbonate part of the curve shows the same electrode offset ({offset[i]:+.2f} pH): it "
                       f"is the electrode, if no CO2 was lost, and the result stands")
        elif strength[i]:
            more[i] = (f"the bicarbonate part of the curve finds the electrode right: it is the strength, if no CO2 "
                       f"was lost, and the true result is about {ratio[i]:.2f} times the one given; the uncertainty "
                       f"counts it")
        else:
            more[i] = (f"the curve cannot tell which; if it is the strength, the true result is about {ratio[i]:.2f} "
                       f"times the one given; the uncertainty counts it")
    return more
