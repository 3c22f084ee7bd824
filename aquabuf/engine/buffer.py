"""How strongly a water resists pH change, through which pair, and how much acid or base it can take.

All functions take a solved `State` and return arrays with one value per row (nan where the row is not solved).
Additions are of strong acid or base that brings no carbon; ionic strength and volume are held.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import LN10, exp10
from aquabuf.engine.balance import alkalinity_at, fractions, moments
from aquabuf.engine.state import CARBONATE_FORMS, State

__all__ = [
    "EFFECTIVE_RANGE", "HYDROGEN", "HYDROXIDE", "Carrier", "PairShare", "Weakest", "acid_to_ph",
    "buffer_intensity", "carrier", "curve", "pair_shares", "weakest_buffering",
]

Array = NDArray[np.float64]

EFFECTIVE_RANGE = 1.0  # pH units on each side of pKa: base to acid 1:10 to 10:1, a third of the peak intensity
HYDROGEN, HYDROXIDE = "H+ itself", "OH- itself"
SEARCH_PH = (2.5, 12.0)
SEARCH_STEP = 0.5
CLOSING_ROUNDS = 40
WEAKEST_TOLERANCE = 1e-4  # pH; the intensity is flat there


def _groups(state: State) -> list[tuple[tuple[str, ...], tuple[Array, ...], Array]]:
    """Forms, constants and total of every acid in the water, carbonic acid first."""
    c = state.conditions
    return [(CARBONATE_FORMS, (c.k1, c.k2), state.dic)] + [
        (d.acid.species, c.acid_constants(d.acid), d.total) for d in state.acids]


def buffer_intensity(state: State, h: Array | None = None, *, co2: Array | None = None) -> Array:
    """dC_base/dpH at `h` (its own by default): carbon kept, or `co2` [mol/L] held as under open air. [eq/L per pH]

    Closed: ln10 (sum of total times variance of protons lost, + OH- + H+). Open: carbonate counts HCO3- + 4 CO3--.
    Source: Van Slyke 1922 for one acid; the variance form follows by differentiation.
    """
    c = state.conditions
    h = state.h if h is None else h
    inv = 1.0 / h
    total = c.c_oh * inv + c.c_h * h
    for forms, k, amount in _groups(state):
        if forms is CARBONATE_FORMS and co2 is not None:
            total += co2 * c.k1 * inv * (1.0 + 4.0 * c.k2 * inv)
        else:
            total += amount * moments(fractions(k, inv))[1]
    return LN10 * total


@dataclass(frozen=True, slots=True, eq=False)
class PairShare:
    """One conjugate pair: its buffer intensity [eq/L per pH], meter pKa, base-to-acid ratio and whether it acts."""

    label: str
    intensity: Array
    pka: Array
    base_acid_ratio: Array
    in_range: NDArray[np.bool_]


def pair_shares(state: State) -> list[PairShare]:
    """Closed buffer intensity split by conjugate pair and by the water itself; the parts add up to the whole.

    An acid of several steps has cross terms between forms that are two or more protons apart; each is shared
    evenly by the steps between them.
    """
    c = state.conditions
    ph = state.ph()
    shares = []
    for forms, k, amount in _groups(state):
        alpha = fractions(k, 1.0 / state.h)
        for step in range(1, len(forms)):
            weight = sum((j - i) * alpha[i] * alpha[j] for i in range(step) for j in range(step, len(forms)))
            pka = -np.log10(k[step - 1] * c.activity_per_h)
            with np.errstate(invalid="ignore"):
                acts = np.abs(ph - pka) <= EFFECTIVE_RANGE
            shares.append(PairShare(f"{forms[step - 1]}/{forms[step]}", LN10 * amount * weight, pka,
                                    k[step - 1] / state.h, acts))
    nothing = np.full(state.h.shape, np.nan)
    never = np.zeros(state.h.shape, dtype=bool)
    shares.append(PairShare(HYDROGEN, LN10 * c.c_h * state.h, nothing, nothing, never))
    shares.append(PairShare(HYDROXIDE, LN10 * c.c_oh / state.h, nothing, nothing, never))
    return shares


@dataclass(frozen=True, slots=True, eq=False)
class Carrier:
    """The pair that buffers most now.

    label : conjugate pair as acid/base, or the water itself; "" where the row is not solved
    share : its part of the closed buffer intensity. [-]
    acid_left, base_left : strong acid and base until the pair leaves its effective range (negative: left already),
    closed; nan where the water itself carries. [eq/L]
    """

    label: NDArray[np.str_]
    share: Array
    pka: Array
    base_acid_ratio: Array
    in_range: NDArray[np.bool_]
    acid_left: Array
    base_left: Array


def carrier(state: State) -> Carrier:
    """Pair with the largest closed buffer intensity, and what is left of it."""
    shares = pair_shares(state)
    intensity = np.stack([s.intensity for s in shares])
    solved = np.isfinite(state.h)
    best = np.argmax(np.where(np.isfinite(intensity), intensity, -1.0), axis=0)

    def pick(name: str) -> Array:
        return np.take_along_axis(np.stack([getattr(s, name) for s in shares]), best[None], axis=0)[0]

    label = np.where(solved, np.array([s.label for s in shares])[best], "")
    pka = pick("pka")
    now = state.alkalinity
    return Carrier(
        label=label, share=pick("intensity") / intensity.sum(axis=0), pka=pka,
        base_acid_ratio=pick("base_acid_ratio"), in_range=pick("in_range") & solved,
        acid_left=now - state.alkalinity_at_ph(pka - EFFECTIVE_RANGE),
        base_left=state.alkalinity_at_ph(pka + EFFECTIVE_RANGE) - now,
    )


def acid_to_ph(state: State, ph: Array | float, *, co2: Array | None = None) -> Array:
    """Strong acid that brings the water to a meter pH; negative is base. [eq/L]

    Closed: its carbon stays. Open: `co2` [mol/L] is held, as in water kept in equilibrium with air.
    """
    return state.alkalinity - state.alkalinity_at_ph(np.asarray(ph, dtype=float), co2=co2)


@dataclass(frozen=True, slots=True, eq=False)
class Weakest:
    """Meter pH of the nearest minimum of closed buffer intensity, intensity there, distance to it; nan if none."""

    ph: Array
    intensity: Array
    distance: Array


def weakest_buffering(state: State) -> Weakest:
    """Follow the buffer intensity downhill from the sample to the bottom of its valley (pH 2.5 to 12).

    Strides until the slope turns, then regula falsi with the Illinois weights on the slope.
    """
    ph = state.ph()
    near = np.where(np.isfinite(ph), np.clip(ph, *SEARCH_PH), 7.0)
    far, bottom = near.copy(), np.full(ph.shape, np.nan)
    slope_near = _intensity_slope(state, near)
    slope_far = slope_near.copy()
    at_bottom = np.isfinite(ph) & (slope_near == 0.0)
    bottom[at_bottom] = near[at_bottom]
    rows = np.flatnonzero(np.isfinite(ph) & (slope_near != 0.0))
    turned = []
    while rows.size:
        near[rows], slope_near[rows] = far[rows], slope_far[rows]
        far[rows] = np.clip(far[rows] - SEARCH_STEP * np.sign(slope_near[rows]), *SEARCH_PH)
        slope_far[rows] = _intensity_slope(state, far[rows], rows)
        has_turned = slope_far[rows] * slope_near[rows] <= 0.0
        turned.append(rows[has_turned])
        rows = rows[~has_turned & (far[rows] > SEARCH_PH[0]) & (far[rows] < SEARCH_PH[1])]
    rows = np.sort(np.concatenate(turned)) if turned else rows
    for _ in range(CLOSING_ROUNDS):
        if not rows.size:
            break
        a, b, f_a, f_b = near[rows], far[rows], slope_near[rows], slope_far[rows]
        new = np.where(f_b == f_a, b, b - f_b * (b - a) / np.where(f_b == f_a, 1.0, f_b - f_a))
        f_new = _intensity_slope(state, new, rows)
        crossed = f_new * f_b <= 0.0
        near[rows], slope_near[rows] = np.where(crossed, b, a), np.where(crossed, f_b, 0.5 * f_a)
        far[rows], slope_far[rows] = new, f_new
        bottom[rows] = new
        rows = rows[np.abs(new - b) > WEAKEST_TOLERANCE]
    return Weakest(bottom, buffer_intensity(state, state.h_from_ph(bottom)), bottom - ph)


def _intensity_slope(state: State, ph: Array, rows: NDArray[np.intp] | None = None) -> Array:
    """Slope of closed buffer intensity against pH, over ln10^2, at meter pH values of some of the rows (or all)."""
    pick = slice(None) if rows is None or rows.size == state.h.size else rows
    c = state.conditions
    inv = c.activity_per_h[pick] * exp10(ph)
    total = c.c_oh[pick] * inv - c.c_h[pick] / inv
    for _, k, amount in _groups(state):
        total += amount[pick] * moments(fractions([step[pick] for step in k], inv))[2]
    return np.where(np.isfinite(total), total, 0.0)


def curve(state: State, ph: Array, *, co2: Array | None = None) -> tuple[Array, Array]:
    """Strong acid added [eq/L] and buffer intensity [eq/L per pH] at each meter pH; rows by points.

    `ph` has one value per point; the result has shape (rows, points).
    """
    system = state.system(co2=co2)
    added, intensity = (np.empty((state.h.size, ph.size)) for _ in range(2))
    for j, value in enumerate(ph):
        h = state.h_from_ph(np.full(state.h.shape, value))
        added[:, j] = state.alkalinity - alkalinity_at(system, h)
        intensity[:, j] = buffer_intensity(state, h, co2=co2)
    return added, intensity
