"""Common cell schemes for scalar laws, compiled: what front tracking is measured against.

Uniform cells, conserved averages, a fixed time step. All are textbook schemes in their plain form:

* ``godunov``: first order with the exact flux of the local Riemann problem (Godunov 1959; Osher 1984);
* ``limited``: linear reconstruction with the minmod limiter (van Leer 1979; Harten 1983), the same flux, and
  two-stage strong-stability-preserving steps (Shu and Osher 1988);
* ``weno5``: fifth-order weighted reconstruction (Jiang and Shu 1996), the same flux, three-stage steps;
* ``unfixed``: first order with the upwind flux of the jump's own speed (Murman 1974; Roe 1981) and no entropy
  fix. It is wrong on purpose: it keeps expansion shocks, which a judge of solutions should notice.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import NamedTuple

import numpy as np
from numba import njit
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]

#: Courant numbers used where none is given: the limits of the maximum principle, less a little.
COURANT = {"godunov": 0.9, "limited": 0.5, "weno5": 0.5, "unfixed": 0.9}
GHOSTS = 3
SPEED_SAMPLES = 4097
#: Jiang and Shu's guard against division by zero.
WENO_GUARD = 1e-6


class CellFlux(NamedTuple):
    """f and f' compiled (one float in, one out), and the states at which f' vanishes."""

    flux: Callable[[float], float]
    derivative: Callable[[float], float]
    extrema: Array


@njit
def _burgers(u: float) -> float:
    return 0.5 * u * u


@njit
def _identity(u: float) -> float:
    return u


BURGERS = CellFlux(_burgers, _identity, np.array([0.0]))


def displacement(viscosity_ratio: float) -> CellFlux:
    """Return s^2 / (s^2 + M (1 - s)^2) (Buckley and Leverett 1942 with quadratic Corey curves)."""
    m = float(viscosity_ratio)

    @njit
    def flux(s: float) -> float:
        return s * s / (s * s + m * (1.0 - s) * (1.0 - s))

    @njit
    def derivative(s: float) -> float:
        below = s * s + m * (1.0 - s) * (1.0 - s)
        return 2.0 * m * s * (1.0 - s) / (below * below)

    return CellFlux(flux, derivative, np.zeros(0))


@njit
def _cubic(u: float) -> float:
    return u * u * u


@njit
def _cubic_slope(u: float) -> float:
    return 3.0 * u * u


CUBIC = CellFlux(_cubic, _cubic_slope, np.zeros(0))


def solve(
    law: CellFlux,
    averages: ArrayLike,
    dx: float,
    t: float,
    cfl: float | None = None,
    boundary: str = "outflow",
    scheme: str = "godunov",
) -> Array:
    """Return the cell averages at time t.

    Parameters
    ----------
    law : CellFlux
    averages : array_like, shape (n,)
        Cell averages at time 0, n at least 3.
    dx, t : float
        Width of the cells and time.
    cfl : float, optional
        Courant number; the scheme's own limit where not given.
    boundary : {"outflow", "periodic"}
    scheme : {"godunov", "limited", "weno5", "unfixed"}

    Returns
    -------
    ndarray, shape (n,)
    """
    start = np.array(averages, dtype=float)
    sampled = np.linspace(start.min(), start.max(), SPEED_SAMPLES)
    top = _top_speed(law.derivative, sampled)
    if t <= 0.0 or top == 0.0:
        return start
    steps = max(1, math.ceil(t * top / ((cfl or COURANT[scheme]) * dx)))
    periodic = {"outflow": False, "periodic": True}[boundary]
    run = {"godunov": _first_order, "unfixed": _unfixed, "limited": _limited, "weno5": _weno5}[scheme]
    padded = np.concatenate((np.zeros(GHOSTS), start, np.zeros(GHOSTS)))
    return run(law.flux, law.extrema, padded, t / steps / dx, steps, periodic)


@njit
def _top_speed(derivative: Callable[[float], float], sampled: Array) -> float:
    top = 0.0
    for u in sampled:
        top = max(top, abs(derivative(u)))
    return top


@njit
def godunov_flux(f: Callable[[float], float], extrema: Array, left: float, right: float) -> float:
    """Return the flux of the exact solution: least f over [left, right], or greatest (Osher 1984)."""
    a, b = f(left), f(right)
    if left <= right:
        best = min(a, b)
        for u in extrema:
            if left < u < right:
                best = min(best, f(u))
        return best
    best = max(a, b)
    for u in extrema:
        if right < u < left:
            best = max(best, f(u))
    return best


@njit
def _fill(u: Array, periodic: bool) -> None:
    """Set the ghost cells."""
    n = len(u) - 2 * GHOSTS
    for k in range(GHOSTS):
        u[k] = u[n + k] if periodic else u[GHOSTS]
        u[GHOSTS + n + k] = u[GHOSTS + k] if periodic else u[GHOSTS + n - 1]


@njit
def _first_order(
    f: Callable[[float], float], extrema: Array, u: Array, ratio: float, steps: int, periodic: bool
) -> Array:
    n = len(u) - 2 * GHOSTS
    for _ in range(steps):
        _fill(u, periodic)
        before = godunov_flux(f, extrema, u[GHOSTS - 1], u[GHOSTS])
        for i in range(GHOSTS, GHOSTS + n):
            after = godunov_flux(f, extrema, u[i], u[i + 1])
            u[i] -= ratio * (after - before)
            before = after
    return u[GHOSTS : GHOSTS + n].copy()


@njit
def _upwind_flux(f: Callable[[float], float], left: float, right: float) -> float:
    """Return the flux from upwind of the jump's own speed."""
    a, b = f(left), f(right)
    return a if (b - a) * (right - left) >= 0.0 else b


@njit
def _unfixed(f: Callable[[float], float], extrema: Array, u: Array, ratio: float, steps: int, periodic: bool) -> Array:
    n = len(u) - 2 * GHOSTS
    for _ in range(steps):
        _fill(u, periodic)
        before = _upwind_flux(f, u[GHOSTS - 1], u[GHOSTS])
        for i in range(GHOSTS, GHOSTS + n):
            after = _upwind_flux(f, u[i], u[i + 1])
            u[i] -= ratio * (after - before)
            before = after
    return u[GHOSTS : GHOSTS + n].copy()


@njit
def _minmod(a: float, b: float) -> float:
    if a * b <= 0.0:
        return 0.0
    return a if abs(a) < abs(b) else b


@njit
def _limited_change(
    f: Callable[[float], float], extrema: Array, u: Array, ratio: float, change: Array, periodic: bool
) -> None:
    """Fill `change` with what one forward step adds to each cell."""
    n = len(u) - 2 * GHOSTS
    _fill(u, periodic)
    before = 0.0
    slope = _minmod(u[GHOSTS - 1] - u[GHOSTS - 2], u[GHOSTS] - u[GHOSTS - 1])
    for i in range(GHOSTS - 1, GHOSTS + n):
        following = _minmod(u[i + 1] - u[i], u[i + 2] - u[i + 1])
        after = godunov_flux(f, extrema, u[i] + 0.5 * slope, u[i + 1] - 0.5 * following)
        change[i] = -ratio * (after - before)
        before, slope = after, following


@njit
def _limited(f: Callable[[float], float], extrema: Array, u: Array, ratio: float, steps: int, periodic: bool) -> Array:
    n = len(u) - 2 * GHOSTS
    first, change = u.copy(), np.zeros(len(u))
    for _ in range(steps):
        _limited_change(f, extrema, u, ratio, change, periodic)
        for i in range(GHOSTS, GHOSTS + n):
            first[i] = u[i] + change[i]
        _limited_change(f, extrema, first, ratio, change, periodic)
        for i in range(GHOSTS, GHOSTS + n):
            u[i] = 0.5 * (u[i] + first[i] + change[i])
    return u[GHOSTS : GHOSTS + n].copy()


@njit
def _weno_value(a: float, b: float, c: float, d: float, e: float) -> float:
    """Return the value at the right end of the third of five cells, from their averages."""
    rough0 = 13.0 / 12.0 * (a - 2.0 * b + c) ** 2 + 0.25 * (a - 4.0 * b + 3.0 * c) ** 2
    rough1 = 13.0 / 12.0 * (b - 2.0 * c + d) ** 2 + 0.25 * (b - d) ** 2
    rough2 = 13.0 / 12.0 * (c - 2.0 * d + e) ** 2 + 0.25 * (3.0 * c - 4.0 * d + e) ** 2
    weight0 = 0.1 / (WENO_GUARD + rough0) ** 2
    weight1 = 0.6 / (WENO_GUARD + rough1) ** 2
    weight2 = 0.3 / (WENO_GUARD + rough2) ** 2
    value0 = (2.0 * a - 7.0 * b + 11.0 * c) / 6.0
    value1 = (-b + 5.0 * c + 2.0 * d) / 6.0
    value2 = (2.0 * c + 5.0 * d - e) / 6.0
    return (weight0 * value0 + weight1 * value1 + weight2 * value2) / (weight0 + weight1 + weight2)


@njit
def _weno_change(
    f: Callable[[float], float], extrema: Array, u: Array, ratio: float, change: Array, periodic: bool
) -> None:
    """Fill `change` with what one forward step adds to each cell."""
    n = len(u) - 2 * GHOSTS
    _fill(u, periodic)
    before = 0.0
    for i in range(GHOSTS - 1, GHOSTS + n):
        left = _weno_value(u[i - 2], u[i - 1], u[i], u[i + 1], u[i + 2])
        right = _weno_value(u[i + 3], u[i + 2], u[i + 1], u[i], u[i - 1])
        after = godunov_flux(f, extrema, left, right)
        change[i] = -ratio * (after - before)
        before = after


@njit
def _weno5(f: Callable[[float], float], extrema: Array, u: Array, ratio: float, steps: int, periodic: bool) -> Array:
    n = len(u) - 2 * GHOSTS
    stage, change = u.copy(), np.zeros(len(u))
    for _ in range(steps):
        _weno_change(f, extrema, u, ratio, change, periodic)
        for i in range(GHOSTS, GHOSTS + n):
            stage[i] = u[i] + change[i]
        _weno_change(f, extrema, stage, ratio, change, periodic)
        for i in range(GHOSTS, GHOSTS + n):
            stage[i] = 0.75 * u[i] + 0.25 * (stage[i] + change[i])
        _weno_change(f, extrema, stage, ratio, change, periodic)
        for i in range(GHOSTS, GHOSTS + n):
            u[i] = (u[i] + 2.0 * (stage[i] + change[i])) / 3.0
    return u[GHOSTS : GHOSTS + n].copy()
