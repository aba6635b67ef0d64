"""A law fitted to scattered observations of states and fluxes, under the shape that the trade expects."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from wavekin.errors import InputError
from wavekin.laws.law import Law, Units, two_numbers
from wavekin.laws.parameters import nearest
from wavekin.laws.table import READINGS, check_table, table_law

SHAPES = ("free", "concave", "convex", "increasing", "decreasing")
#: Knots put in where only their number is given to a fit that has none: one for so many observations, within limits.
OBSERVATIONS_A_KNOT, FEWEST_KNOTS, MOST_KNOTS = 8, 3, 33

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Fit:
    """A fitted law and how well it fits.

    Attributes
    ----------
    law : Law
        The law through the knots.
    knots, fluxes : ndarray, shape (k,)
        States and fitted fluxes there.
    residuals : ndarray, shape (n,)
        Observed less fitted flux, in the order of the observations.
    rms, largest : float
        Root mean square and largest size of the residuals (unit of flux).
    """

    law: Law
    knots: Array
    fluxes: Array
    residuals: Array

    @property
    def rms(self) -> float:
        """Root mean square of the residuals (unit of flux)."""
        return float(np.sqrt(np.mean(self.residuals**2)))

    @property
    def largest(self) -> float:
        """Largest size of a residual (unit of flux)."""
        return float(np.abs(self.residuals).max())

    def __str__(self) -> str:
        count = len(self.residuals)
        return f"{count} observations, {len(self.knots)} knots, residual {self.rms:.4g} rms, {self.largest:.4g} at most"


def fit_law(
    u: ArrayLike,
    f: ArrayLike,
    knots: int | Sequence[float] | None = None,
    shape: str = "concave",
    through: Sequence[tuple[float, float]] = (),
    range: tuple[float, float] | None = None,
    reading: str = "polygon",
    units: Units | None = None,
) -> Fit:
    """Return the law that fits scattered observations best in the sense of least squares, under a given shape.

    The fit is a continuous chain of straight lines between knots. The least-squares problem under inequalities is
    solved exactly (Lawson and Hanson 1974, least distance programming).

    Parameters
    ----------
    u, f : array_like, shape (n,)
        Observed states and fluxes, in any order; states may repeat.
    knots : int or sequence of float, optional
        Number of knots, placed so that as many observations lie between any two, or their states; by default one
        for 8 observations, from 3 to 33.
    shape : {"concave", "convex", "increasing", "decreasing", "free"}
        What the chain must be.
    through : sequence of (state, flux)
        Points that the law meets exactly, e.g. no flow on the empty road and in the jam; they become knots.
    range : tuple of float, optional
        States that the law covers; by default those observed or gone through.
    reading : {"polygon", "smooth"}
        What is made of the knots, see `table_law`; residuals are those of the law so made.
    units : Units, optional

    Raises
    ------
    InputError
        For unusable columns, shapes and knots, observations outside the range, and points that contradict the shape.
    """
    if shape not in SHAPES:
        raise InputError(f"must be one of {', '.join(SHAPES)}", key="shape", value=shape, mend=nearest(shape, SHAPES))
    if reading not in READINGS:
        raise InputError("must be polygon or smooth", key="reading", value=reading, mend=nearest(reading, READINGS))
    states, fluxes = check_table(u, f, increasing=False)
    fixed = _points(through)
    both = np.concatenate([states, np.array(list(fixed))])
    a, b = two_numbers((both.min(), both.max()) if range is None else range)
    outside = np.flatnonzero((both < a) | (both > b))
    if outside.size:
        raise InputError(f"must lie in the range from {a!r} to {b!r}", key="u", value=float(both[outside[0]]),
                         mend="widen the range or drop the observation")  # fmt: skip
    places = np.unique(np.concatenate([_knots(states, knots, a, b), np.array(list(fixed))]))
    values = _fitted(states, fluxes, places, shape, fixed)
    law = table_law(places, values, reading, units, name=f"fit ({shape}, {reading})")
    return Fit(law, places, values, fluxes - np.asarray(law.flux(states)))


def _points(through: Sequence[tuple[float, float]]) -> dict[float, float]:
    """Return the points to go through as fluxes by states."""
    try:
        fixed = {float(state): float(flux) for state, flux in through}
    except (TypeError, ValueError) as error:
        raise InputError("must be pairs of numbers", key="through", value=through, mend="try [(0, 0)]") from error
    if len(fixed) != len(through) or not np.isfinite([*fixed, *fixed.values()]).all():
        raise InputError("must be finite and one a state", key="through", value=list(through), mend="mend the points")
    return fixed


def _knots(states: Array, knots: int | Sequence[float] | None, a: float, b: float) -> Array:
    """Return the states of the knots, the ends of the range among them."""
    if knots is None:
        knots = int(np.clip(len(states) // OBSERVATIONS_A_KNOT, FEWEST_KNOTS, MOST_KNOTS))
    if isinstance(knots, int | np.integer) and not isinstance(knots, bool):
        if knots < 2:
            raise InputError("must be at least 2", key="knots", value=knots, mend="leave it out")
        inner = np.quantile(np.unique(states), np.linspace(0.0, 1.0, int(knots)))[1:-1]
    else:
        inner = np.asarray(knots, dtype=float)
        if inner.ndim != 1 or not np.isfinite(inner).all() or ((inner < a) | (inner > b)).any():
            raise InputError(f"must be states from {a!r} to {b!r}", key="knots", value=knots, mend="leave it out")
    return np.unique(np.concatenate([[a], inner, [b]]))


def _fitted(states: Array, fluxes: Array, places: Array, shape: str, fixed: dict[float, float]) -> Array:
    """Return the fluxes at the knots that minimise the squares under the shape and through the fixed points."""
    cell = np.searchsorted(places[1:-1], states, side="right")
    share = (states - places[cell]) / np.diff(places)[cell]
    design = np.zeros((len(states), len(places)))
    rows = np.arange(len(states))
    design[rows, cell], design[rows, cell + 1] = 1.0 - share, share
    held = np.isin(places, list(fixed))
    values = np.array([fixed.get(float(place), 0.0) for place in places])
    free = ~held
    scale = float(np.abs(fluxes).max()) or 1.0
    target = fluxes - design[:, held] @ values[held]
    limits = _limits(places, shape)
    floor = -limits[:, held] @ values[held]
    if free.any():
        loads = design[:, free]
        if np.linalg.matrix_rank(loads) < free.sum():
            raise InputError(
                "must leave observations between any two", key="knots", value=len(places), mend="ask for fewer knots"
            )
        values[free] = scale * _least_squares(loads, target / scale, limits[:, free], floor / scale)
    slack = limits @ values
    if slack.size and slack.min() < -1e-9 * np.abs(limits).max() * np.abs(values).max():
        raise InputError(f"must allow a {shape} law", key="through", value=list(fixed.items()), mend="change the shape")
    return values


def _limits(places: Array, shape: str) -> Array:
    """Return the rows whose products with the knots' fluxes must not be negative."""
    slopes = np.diff(np.eye(len(places)), axis=0) / np.diff(places)[:, None]
    rows = {
        "free": slopes[:0],
        "increasing": slopes,
        "decreasing": -slopes,
        "convex": np.diff(slopes, axis=0),
        "concave": -np.diff(slopes, axis=0),
    }[shape]
    return rows / np.abs(rows).max(axis=1, keepdims=True) if len(rows) else rows


def _least_squares(loads: Array, target: Array, limits: Array, floor: Array) -> Array:
    """Return x that minimises |loads x - target| with limits x >= floor (Lawson and Hanson 1974, chapter 23)."""
    from scipy.optimize import nnls

    q, r = np.linalg.qr(loads)
    best = np.linalg.solve(r, q.T @ target)
    active = np.flatnonzero(np.abs(limits).max(axis=1, initial=0.0) > 0.0)
    if not active.size or (limits[active] @ best >= floor[active]).all():
        return best
    rows = np.linalg.solve(r.T, limits[active].T).T
    short = floor[active] - limits[active] @ best
    system = np.vstack([rows.T, short])
    multipliers, distance = nnls(system, np.concatenate([np.zeros(len(r)), [1.0]]), maxiter=100 * len(active) + 1000)
    miss = system @ multipliers - np.concatenate([np.zeros(len(r)), [1.0]])
    if distance < 1e-12:
        return best  # no x obeys: the caller tells which demand fails
    return best + np.linalg.solve(r, -miss[:-1] / miss[-1])
