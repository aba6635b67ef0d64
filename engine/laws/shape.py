"""What the values of a flux tell about its shape: derivative, kinks, straight parts, inflections, bends.

Named laws know these in closed form. For a flux given as a bare function they are found here by dense sampling
and then refined, so they are as sure as sampling is: a feature narrower than a few thousandths of the range can be
missed. Every decision compares with the rounding of the flux itself, see `rounding`.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray
from wavekin.errors import InputError

Flux = Callable[[NDArray[np.float64]], Any]
Array = NDArray[np.float64]
Interval = tuple[float, float]

#: Cells into which an interval is cut where its shape is sampled.
CELLS = 4096
#: Values of the flux are trusted to this many roundings.
ULPS = 64.0
#: Distances, in cells, over which second differences are taken; the smallest that tells is believed.
STRIDES = (1, 4, 16, 64, 256)
#: A straight part spans at least this many cells.
STRAIGHT_CELLS = 64
#: A second difference this many times its neighbours' makes a kink suspected.
KINK_FACTOR = 4.0
#: A suspected kink is followed into a bracket of this share of the interval; there a slope's jump must persist.
KINK_BRACKET = 1e-7
#: Curvatures below this share of the largest are not told from 0.
CURVATURE_SHARE = 1e-13
#: Steps of differences for f'' and the distance within which two of them agree, as shares of the interval.
TURN_STEPS = (1e-2, 1e-3, 1e-4, 1e-5)
TURN_AGREEMENT = 1e-7

# Central second difference of eighth order (Fornberg 1988).
_SECOND = np.array([-1 / 560, 8 / 315, -1 / 5, 8 / 5, -205 / 72, 8 / 5, -1 / 5, 8 / 315, -1 / 560])
_NODES = np.arange(-3.0, 4.0)
# Derivatives of the seven Lagrange polynomials on _NODES; they are evaluated off centre near the ends.
_SLOPES = [
    np.polyder(np.poly(np.delete(_NODES, k)) / np.prod(_NODES[k] - np.delete(_NODES, k))) for k in range(len(_NODES))
]
_HALVINGS = 17


def rounding(u: Array, f: Array) -> float:
    """Return what second differences of sampled fluxes may be off by: rounding of the fluxes and of the states."""
    width = float(u[-1] - u[0])
    steepest = float(np.abs(np.diff(f)).max() * (len(u) - 1)) / width if width > 0.0 else 0.0
    return ULPS * float(np.finfo(float).eps) * (float(np.abs(f).max()) + steepest * float(np.abs(u).max()))


def bisected(function: Callable[[Array], Any], low: float, high: float) -> float:
    """Return where a function of one sign at `low` and the other at `high` changes sign, to the last bit."""
    below = float(np.asarray(function(np.array([low])))[0]) < 0.0
    while low < (middle := 0.5 * (low + high)) < high:
        value = float(np.asarray(function(np.array([middle])))[0])
        if value == 0.0:
            return middle
        low, high = (middle, high) if (value < 0.0) == below else (low, middle)
    return middle


def differences(flux: Flux, bounds: Array) -> Flux:
    """Return f' by differences within the intervals between `bounds` (ends of the range and kinks).

    The derivative of the interpolant through seven states is taken at steps from 1/64 of the interval down by
    halving, one-sided near the ends; per state the step is kept at which the answer changed least. A smooth
    flux of order 1 gets about 12 digits.
    """

    def derivative(states: Array) -> Array:
        u = np.atleast_1d(np.asarray(states, dtype=float))
        piece = np.searchsorted(bounds[1:-1], u, side="right")
        low, high = bounds[piece], bounds[piece + 1]
        best, least, last, change = np.zeros_like(u), np.full_like(u, np.inf), np.zeros_like(u), np.zeros_like(u)
        for halving in range(_HALVINGS):
            h = (high - low) / 64.0 * 0.5**halving
            centre = u.clip(low + 3.0 * h, high - 3.0 * h)
            place = (u - centre) / h
            nodes = (centre + k * h for k in _NODES)
            values = [np.asarray(flux(node.clip(low, high)), dtype=float) for node in nodes]
            slope = sum(np.polyval(w, place) * value for w, value in zip(_SLOPES, values, strict=True)) / h
            changed = np.abs(slope - last)
            if halving > 1:
                doubt = np.maximum(changed, change)
                better = doubt < least
                best, least = np.where(better, slope, best), np.where(better, doubt, least)
            last, change = slope, changed
        return best.reshape(np.shape(states))

    return derivative


def kinks_of(flux: Flux, a: float, b: float) -> tuple[float, ...]:
    """Return the states between a and b at which the slope of a flux jumps.

    Raises
    ------
    InputError
        Where the flux itself jumps.
    """
    u = np.linspace(a, b, CELLS + 1)
    f = np.asarray(flux(u), dtype=float)
    bends = np.abs(np.diff(f, 2))
    padded = np.pad(bends, 4, constant_values=0.0)
    around = np.max([padded[4 + k : len(padded) - 4 + k] for k in (-4, -3, 3, 4)], axis=0)
    suspects = np.flatnonzero(bends > np.maximum(KINK_FACTOR * around, rounding(u, f))) + 1
    found = []
    for group in np.split(suspects, np.flatnonzero(np.diff(suspects) > 2) + 1):
        if group.size and (kink := _kink(flux, float(u[group[0] - 1]), float(u[group[-1] + 1]), (a, b))) is not None:
            found.append(kink)
    return tuple(sorted(set(found)))


def _kink(flux: Flux, low: float, high: float, ends: Interval) -> float | None:
    """Return the kink in a bracket, None where the slope turns out to be continuous."""
    smallest = max(KINK_BRACKET * (ends[1] - ends[0]), 64.0 * float(np.spacing(max(map(abs, ends)))))
    first_rise = first_jump = None
    while True:
        u = np.linspace(low, high, 9)
        f = np.asarray(flux(u), dtype=float)
        step = u[1] - u[0]
        jump, rise = abs((f[8] - f[7]) - (f[1] - f[0])) / step, float(np.ptp(f))
        first_jump, first_rise = first_jump or jump, first_rise or rise
        if high - low <= smallest:
            break
        k = int(np.argmax(np.abs(np.diff(f, 2)))) + 1
        low, high = float(u[k - 1]), float(u[k + 1])
    if rise > 0.5 * first_rise and rise > rounding(u, f):
        raise InputError(
            f"must be continuous, and jumps near {0.5 * (low + high)!r}", key="flux", value=rise,
            mend="narrow the range to one side of the jump or make the flux steep there",
        )  # fmt: skip
    beside_end = min(low - ends[0], ends[1] - high) < 2.0 * (high - low)  # there f' may grow without bound
    if jump < 0.3 * first_jump or beside_end:
        return None
    width = high - low
    left, right = np.array([low - width, low]).clip(*ends), np.array([high, high + width]).clip(*ends)
    if left[0] == left[1] or right[0] == right[1]:
        return 0.5 * (low + high)
    (f0, f1), (g0, g1) = np.asarray(flux(left), dtype=float), np.asarray(flux(right), dtype=float)
    before, after = (f1 - f0) / (left[1] - left[0]), (g1 - g0) / (right[1] - right[0])
    if before == after:
        return 0.5 * (low + high)
    meeting = low + (g0 - f1 - after * (high - low)) / (before - after)
    return float(meeting) if low <= meeting <= high else 0.5 * (low + high)


def straight_parts(flux: Flux, a: float, b: float) -> tuple[Interval, ...]:
    """Return the parts of [a, b], 1/64 of it or wider, on which a flux is straight to rounding."""
    u = np.linspace(a, b, CELLS + 1)
    f = np.asarray(flux(u), dtype=float)
    noise = rounding(u, f)
    flat = np.concatenate(([False], np.abs(np.diff(f, 2)) <= noise, [False]))
    edges = np.flatnonzero(np.diff(flat.astype(int)))
    found = []
    for first, last in zip(edges[::2], edges[1::2] + 1, strict=True):
        if last - first < STRAIGHT_CELLS:
            continue
        chord = np.interp(u[first : last + 1], u[[first, last]], f[[first, last]])
        if np.abs(f[first : last + 1] - chord).max() > noise:
            continue  # bent, but so little that single cells do not show it
        slope = (f[last] - f[first]) / (u[last] - u[first])

        def off(state: Array, first: int = first, slope: float = slope) -> Array:
            departure = np.abs(np.asarray(flux(state)) - f[first] - slope * (state - u[first]))
            return np.where(departure > noise, 1.0, -1.0)

        low = a if first == 0 else bisected(off, float(u[first]), float(u[first - 1]))
        high = b if last == CELLS else bisected(off, float(u[last]), float(u[last + 1]))
        found.append((low, high))
    return tuple(found)


def inflections_of(flux: Flux, second: Flux | None, a: float, b: float) -> tuple[float, ...]:
    """Return where the curvature of a flux changes sign between a and b, from f'' where it is given."""
    u, sign = _signs_of_curvature(second, a, b) if second is not None else _signs_of_differences(flux, a, b)
    known = np.flatnonzero(sign)
    brackets = [(float(u[i]), float(u[j])) for i, j in itertools.pairwise(known) if sign[i] != sign[j]]
    with np.errstate(all="ignore"):
        if second is not None:
            return tuple(_change_of_sign(second, low, high) for low, high in brackets)
        return tuple(_turn(flux, low, high, (a, b)) for low, high in brackets)


def _change_of_sign(function: Flux, low: float, high: float) -> float:
    """Return where a function changes sign in a bracket; its middle where the signs at the ends do not tell."""
    at_low, at_high = np.asarray(function(np.array([low, high])), dtype=float)
    return bisected(function, low, high) if at_low * at_high < 0.0 else 0.5 * (low + high)


def _turn(flux: Flux, low: float, high: float, ends: Interval) -> float:
    """Return where the curvature changes sign in a bracket, by steps that shrink until two of them agree.

    Where f'' is continuous the first two do; where it jumps the place is known to the last step.
    """
    last = np.inf
    for share in TURN_STEPS:
        place = _change_of_sign(_curvature(flux, *ends, share * (ends[1] - ends[0])), low, high)
        if abs(place - last) < TURN_AGREEMENT * (ends[1] - ends[0]):
            return last
        last = place
    return last


def _signs_of_curvature(second: Flux, a: float, b: float) -> tuple[Array, Array]:
    """Return states, crowded near the ends, and the sign of f'' there (0 where it cannot be told)."""
    near = (b - a) * 0.5 ** np.arange(13.0, 41.0)
    even = np.linspace(a, b, CELLS + 1)
    u = np.unique(np.concatenate((even, a + near, b - near)))[1:-1]
    with np.errstate(all="ignore"):
        bends = np.asarray(second(u), dtype=float)
    bends = np.where(np.isfinite(bends), bends, 0.0)
    return u, np.where(np.abs(bends) > CURVATURE_SHARE * np.abs(bends).max(initial=0.0), np.sign(bends), 0.0)


def _signs_of_differences(flux: Flux, a: float, b: float) -> tuple[Array, Array]:
    """Return states and the sign of the second differences there (0 where rounding hides it)."""
    u = np.linspace(a, b, CELLS + 1)
    f = np.asarray(flux(u), dtype=float)
    noise, sign = rounding(u, f), np.zeros(CELLS + 1)
    for stride in STRIDES:
        bends = f[2 * stride :] - 2.0 * f[stride:-stride] + f[: -2 * stride]
        told = np.where(np.abs(bends) > noise, np.sign(bends), 0.0)
        inner = sign[stride:-stride]
        sign[stride:-stride] = np.where(inner == 0.0, told, inner)
    return u, sign


def _curvature(flux: Flux, a: float, b: float, step: float) -> Flux:
    """Return f'' by central differences of eighth order that stay within [a, b]."""

    def curvature(states: Array) -> Array:
        h = np.minimum(step, np.minimum(states - a, b - states) / 4.0)
        nodes = states + np.arange(-4.0, 5.0)[:, None] * h
        return _SECOND @ np.asarray(flux(nodes.ravel().clip(a, b)), dtype=float).reshape(nodes.shape) / h**2

    return curvature


def bend_of(flux: Flux, a: float, b: float) -> int | None:
    """Return the bend of a flux on [a, b] from secants: +1 convex, -1 concave, 0 straight, None where it changes."""
    u = np.linspace(a, b, 33)
    f = np.asarray(flux(u), dtype=float)
    noise = rounding(u, f)
    told: set[int] = set()
    for stride in (1, 4, 16):
        bends = f[2 * stride :] - 2.0 * f[stride:-stride] + f[: -2 * stride]
        told |= set(np.sign(bends[np.abs(bends) > noise]).astype(int).tolist())
    return None if len(told) > 1 else (told.pop() if told else 0)
