"""Laws from a table of states and fluxes."""

from __future__ import annotations

import itertools
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from wavekin.errors import InputError
from wavekin.laws.law import Law, Units
from wavekin.laws.parameters import nearest

READINGS = ("polygon", "smooth")
#: Slopes closer than this share of the larger are one: the curve is straight there.
SAME_SLOPE = 1e-12

Array = NDArray[np.float64]


def table_law(u: ArrayLike, f: ArrayLike, reading: str = "polygon", units: Units | None = None, name: str = "") -> Law:
    """Return the law that a table gives.

    Parameters
    ----------
    u, f : array_like, shape (m,), m >= 2
        States, strictly increasing, and fluxes.
    reading : {"polygon", "smooth"}
        "polygon" takes the straight lines between the rows as the law itself, so that front tracking is exact;
        "smooth" puts a curve with a continuous slope through the rows, see `shape_preserving`, that rises, falls
        and bends where the rows do and nowhere else.
    units : Units, optional
    name : str, optional

    Raises
    ------
    InputError
        Where the columns differ in length, have fewer than two rows, are not finite, or u does not increase.
    """
    if reading not in READINGS:
        raise InputError('must be "polygon" or "smooth"', key="reading", value=reading, mend=nearest(reading, READINGS))
    states, fluxes = check_table(u, f)
    spec = {"table": {"u": states.tolist(), "f": fluxes.tolist()}, "reading": reading}
    common = {"name": name or f"table ({reading})", "source": "measured table", "units": units or Units(), "spec": spec}
    return (_polygon if reading == "polygon" else _smooth)(states, fluxes, common)


def check_table(u: ArrayLike, f: ArrayLike, increasing: bool = True) -> tuple[Array, Array]:
    """Return two columns of numbers of the same length, or raise InputError; see `table_law`."""
    try:
        states, fluxes = np.array(u, dtype=float), np.array(f, dtype=float)
    except (TypeError, ValueError) as error:
        raise InputError("must hold numbers only", key="table", value=str(error), mend="mend the rows") from error
    if states.ndim != 1 or states.shape != fluxes.shape or len(states) < 2:
        raise InputError(
            "must be two columns of the same length with two rows or more", key="table",
            value=[states.shape, fluxes.shape], mend="give one flux for each state",
        )  # fmt: skip
    bad = np.flatnonzero(~(np.isfinite(states) & np.isfinite(fluxes)))
    if bad.size:
        row = int(bad[0])
        raise InputError(
            "must be finite", key=f"table row {row + 1}", value=[float(states[row]), float(fluxes[row])], mend="mend it"
        )
    bad = np.flatnonzero(np.diff(states) <= 0.0)
    if increasing and bad.size:
        row = int(bad[0]) + 1
        raise InputError(
            "must have states that increase strictly", key=f"table row {row + 1}", value=float(states[row]),
            mend="sort the rows and drop doubles",
        )  # fmt: skip
    return states, fluxes


def _polygon(states: Array, fluxes: Array, common: dict[str, Any]) -> Law:
    """Return the law of the straight lines between the rows."""
    slopes = np.diff(fluxes) / np.diff(states)
    return Law(
        lambda s: np.interp(s, states, fluxes),
        (states[0], states[-1]),
        derivative=lambda s: slopes[np.searchsorted(states[1:-1], np.asarray(s), side="right")],
        kinks=tuple(states[1:-1]),
        inflections=(),
        formula="straight lines between the table's rows",
        polygon=(states, fluxes),
        **common,
    )


def shape_preserving(states: Array, fluxes: Array) -> tuple[Array, Array, Array, Array]:
    """Return the shape-preserving quadratic spline through a table (Schumaker 1983).

    Between two rows the curve is two parabolas that meet in an extra knot with one slope. The slopes at the rows
    are those of the parabola through three rows, 0 at a row that is higher or lower than both neighbours, and at
    most twice the flatter neighbouring secant; rows on one line stay on it. So the curve rises and falls as the
    rows do, never passes the largest or smallest row, and is convex or concave over every stretch of rows that is;
    parabolas without a turn inside are reproduced. There are kinks only where a straight stretch meets another one,
    or a stretch less than half as steep.

    Returns
    -------
    knots, values : ndarrays, shape (k,)
    first, last : ndarrays, shape (k - 1,)
        Slopes at the left and right end of each cell between knots; f' is linear within.
    """
    widths = np.diff(states)
    secants = np.diff(fluxes) / widths
    slopes = _slopes(widths, secants)
    straight = _straight(secants)
    before, after = np.append(False, straight[:-1]), np.append(straight[1:], False)
    left = np.where(straight, secants, _limited(np.where(before, np.roll(secants, 1), slopes[:-1]), secants))
    right = np.where(straight, secants, _limited(np.where(after, np.roll(secants, -1), slopes[1:]), secants))
    below, above = left - secants, right - secants
    one_bend = below * above < 0.0
    spread = np.where(one_bend, right - left, 1.0)
    share = np.where(np.abs(above) < np.abs(below), above / spread, 1.0 + below / spread)
    share = np.where(one_bend, share, 0.5)
    middle = 2.0 * secants - share * left - (1.0 - share) * right
    extra = states[:-1] + share * widths
    extra_values = fluxes[:-1] + 0.5 * (left + middle) * (extra - states[:-1])
    knots = np.append(np.column_stack([states[:-1], extra]), states[-1])
    values = np.append(np.column_stack([fluxes[:-1], extra_values]), fluxes[-1])
    return knots, values, np.column_stack([left, middle]).ravel(), np.column_stack([middle, right]).ravel()


def _straight(secants: Array) -> NDArray[np.bool_]:
    """Return which intervals are level or lie on one line with a neighbour."""
    size = np.maximum(np.abs(secants[:-1]), np.abs(secants[1:]))
    alike = np.abs(np.diff(secants)) <= SAME_SLOPE * size
    return np.append(alike, len(secants) == 1) | np.insert(alike, 0, False) | (secants == 0.0)


def _slopes(widths: Array, secants: Array) -> Array:
    """Return the slopes at the rows."""
    if len(secants) == 1:
        return np.repeat(secants, 2)
    before, after = secants[:-1], secants[1:]
    inner = (widths[1:] * before + widths[:-1] * after) / (widths[1:] + widths[:-1])
    inner = np.where(before * after > 0.0, _limited(_limited(inner, before), after), 0.0)
    ends = 2.0 * secants[[0, -1]] - inner[[0, -1]]
    return np.concatenate([ends[:1], inner, ends[1:]])


def _limited(slopes: Array, secants: Array) -> Array:
    """Return slopes moved to between 0 and twice the secant, so that the curve does not turn back."""
    side = np.sign(secants)
    return side * np.clip(side * slopes, 0.0, 2.0 * np.abs(secants))


def _smooth(states: Array, fluxes: Array, common: dict[str, Any]) -> Law:
    """Return the law of the shape-preserving curve; f'' is constant between knots, so every bend is known exactly."""
    knots, values, slopes, last = shape_preserving(states, fluxes)
    rise = last - slopes
    rise = np.where(np.abs(rise) <= SAME_SLOPE * np.maximum(np.abs(slopes), np.abs(last)), 0.0, rise)
    second = rise / np.diff(knots)

    def cell(s: Array) -> NDArray[np.intp]:
        return np.searchsorted(knots[1:-1], s, side="right")

    def flux(s: Array) -> Array:
        s = np.asarray(s, dtype=float)
        i = cell(s)
        away = s - knots[i]
        return values[i] + away * (slopes[i] + 0.5 * second[i] * away)

    def derivative(s: Array) -> Array:
        i = cell(np.asarray(s, dtype=float))
        return slopes[i] + second[i] * (np.asarray(s, dtype=float) - knots[i])

    bend = np.sign(second)
    kinks = knots[1:-1][np.abs(slopes[1:] - last[:-1]) > SAME_SLOPE * np.abs(slopes).max()].tolist()
    straight: list[tuple[float, float]] = []
    for start, end in zip(knots[:-1][bend == 0.0].tolist(), knots[1:][bend == 0.0].tolist(), strict=True):
        joins = straight and straight[-1][1] == start and start not in kinks
        straight.append((straight.pop()[0] if joins else start, end))
    turns = [float(knots[i + 1]) for i, (a, b) in enumerate(itertools.pairwise(bend)) if a * b < 0.0]
    return Law(
        flux,
        (states[0], states[-1]),
        derivative=derivative,
        second_derivative=lambda s: second[cell(np.asarray(s, dtype=float))],
        kinks=tuple(kinks),
        inflections=tuple(turns),
        linear=tuple(straight),
        formula="shape-preserving curve through the table's rows",
        **common,
    )
