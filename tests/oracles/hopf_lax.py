"""Entropy solutions of convex laws by minimisation: no fronts, no collisions, no time steps.

For u_t + f(u)_x = 0 with convex f the cumulative quantity U (U_x = u) is (Hopf 1950; Lax 1957)

    U(x, t) = min over y of U_0(y) + t f*((x - y) / t),      f*(p) = max over v of p v - f(v),

and u(x, t) is the state v at which f* is attained for the minimising y. Where U_0 has constant slope u_i the
function of y is convex with its stationary point at y = x - t f'(u_i), so that each constant piece
of the data contributes one candidate, known exactly: that point, clipped to the piece.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]
Function = Callable[[Array], Array]

#: Halvings of an interval in which the minimiser changes: its ends are then neighbours among the floats.
HALVINGS = 60


@dataclass(frozen=True)
class ConvexLaw:
    """A strictly convex flux, its derivative, and the inverse of that derivative; all vectorised."""

    flux: Function
    derivative: Function
    inverse: Function


BURGERS = ConvexLaw(lambda u: 0.5 * u * u, lambda u: u, lambda p: p)


def mirrored(flux: Function, derivative: Function, inverse: Function) -> ConvexLaw:
    """Return the convex law -f of a concave flux f; its solutions are those of f with x turned round."""
    return ConvexLaw(lambda u: -flux(u), lambda u: -derivative(u), lambda p: inverse(-p))


class Region(NamedTuple):
    """A part of the line whose minimisers lie within one piece of the data, or all upon one edge of them."""

    start: float
    end: float
    kind: int
    """2 i: state `values[i]` throughout; 2 i + 1: fan from `edges[i]`."""


class HopfLax:
    """The solution with piecewise-constant data on the line.

    Parameters
    ----------
    law : ConvexLaw
    edges, values : array_like, shapes (n,) and (n + 1,)
        The data, n at least 1.
    """

    def __init__(self, law: ConvexLaw, edges: ArrayLike, values: ArrayLike) -> None:
        self.law = law
        self.edges, self.values = np.asarray(edges, float), np.asarray(values, float)
        self.low, self.high = float(self.values.min()), float(self.values.max())
        self._amounts = np.concatenate(([0.0], np.cumsum(self.values[1:-1] * np.diff(self.edges))))
        self._speeds = np.asarray(law.derivative(self.values), float)

    def _start(self, y: Array, piece: Array | int) -> Array:
        """Return U_0 at y in the given pieces; U_0 is 0 at the first edge."""
        base = np.maximum(np.asarray(piece) - 1, 0)
        return self._amounts[base] + self.values[piece] * (y - self.edges[base])

    def _state(self, p: Array) -> Array:
        """Return the state at which f*(p) is attained; states outside of those of the data never occur."""
        bottom, top = self.law.derivative(np.array([self.low, self.high]))
        return np.clip(self.law.inverse(np.clip(p, bottom, top)), self.low, self.high)

    def legendre(self, p: Array) -> Array:
        """Return f*(p), the maximum taken over the span of the data."""
        v = self._state(p)
        return np.asarray(p * v - self.law.flux(v))

    def _minimise(self, x: ArrayLike, t: float) -> tuple[Array, Array, Array]:
        """Return U, the minimising y and the kind of region (see `Region`), each of the shape of x."""
        x = np.asarray(x, float)
        best = np.full(x.shape, np.inf)
        where, kind = np.zeros(x.shape), np.zeros(x.shape, int)
        lower = np.concatenate(([-np.inf], self.edges))
        upper = np.concatenate((self.edges, [np.inf]))
        for i in range(len(self.values)):
            free = x - t * self._speeds[i]
            y = np.clip(free, lower[i], upper[i])
            amount = self._start(y, i) + t * self.legendre((x - y) / t)
            better = amount < best
            best, where = np.where(better, amount, best), np.where(better, y, where)
            at = np.where(free <= lower[i], 2 * i - 1, np.where(free >= upper[i], 2 * i + 1, 2 * i))
            kind = np.where(better, at, kind)
        return best, where, kind

    def cumulative(self, x: ArrayLike, t: float) -> Array:
        """Return U(x, t), the integral of u up to x reckoned from 0 at the first edge at time 0."""
        return self._minimise(x, t)[0]

    def state(self, x: ArrayLike, t: float) -> Array:
        """Return u(x, t) at points."""
        x = np.asarray(x, float)
        _, y, kind = self._minimise(x, t)
        return np.where(kind % 2 == 0, self.values[kind // 2], self._state((x - y) / t))

    def averages(self, cells: ArrayLike, t: float) -> Array:
        """Return the averages over cells, exact to the rounding of U divided by the width of a cell."""
        return np.diff(self.cumulative(cells, t)) / np.diff(np.asarray(cells, float))

    def regions(self, a: float, b: float, t: float) -> list[Region]:
        """Return the regions between a and b from left to right.

        The minimiser never moves left as x moves right, so equal kinds at two places mean the same kind
        between them; places where the kind changes are halved down to neighbouring floats.
        """
        cuts = np.array([a, b])
        kinds = self._minimise(cuts, t)[2]
        for _ in range(HALVINGS):
            middle = 0.5 * (cuts[:-1] + cuts[1:])
            split = np.flatnonzero((kinds[:-1] != kinds[1:]) & (cuts[:-1] < middle) & (middle < cuts[1:]))
            if not split.size:
                break
            cuts = np.insert(cuts, split + 1, middle[split])
            kinds = np.insert(kinds, split + 1, self._minimise(middle[split], t)[2])
        starts = np.flatnonzero(np.concatenate(([True], kinds[1:] != kinds[:-1])))
        ends = np.concatenate((starts[1:], [len(cuts) - 1]))
        return [Region(cuts[i], cuts[j], int(kinds[i])) for i, j in zip(starts, ends, strict=True)]

    def distance(self, positions: ArrayLike, states: ArrayLike, t: float, on: tuple[float, float]) -> float:
        """Return the L1 distance over an interval between u(., t) and a piecewise-constant function.

        Within a region u is one state or one monotone fan, and the function one state c between two of its
        jumps; the fan is split where it equals c, and each part is integrated in closed form (the integral of
        a fan is t f*). What remains is rounding: the kinds of two regions are told apart by comparing values
        of U, known to a few 2^-53 max|U|, so a shock of strength d stands right to that over d, and its share
        in the distance is a few 2^-53 max|U| whatever d; each of the parts adds a few 2^-53 t max|f*|. Both
        together stay under 1e-12 for data of order 1 with a few hundred parts.
        """
        jumps, states = np.asarray(positions, float), np.asarray(states, float)
        total = 0.0
        for region in self.regions(*on, t):
            inside = jumps[(jumps > region.start) & (jumps < region.end)]
            cuts = np.concatenate(([region.start], inside, [region.end]))
            against = states[np.searchsorted(jumps, 0.5 * (cuts[:-1] + cuts[1:]))]
            if region.kind % 2 == 0:
                total += float(np.dot(np.abs(self.values[region.kind // 2] - against), np.diff(cuts)))
            else:
                total += self._fan_distance(self.edges[region.kind // 2], cuts, against, t)
        return total

    def _fan_distance(self, origin: float, cuts: Array, against: Array, t: float) -> float:
        """Return the integral of |fan - c| over parts, c being `against` of the part."""
        equal = np.clip(origin + t * self.law.derivative(against), cuts[:-1], cuts[1:])

        def amount(left: Array, right: Array) -> Array:
            fan = t * (self.legendre((right - origin) / t) - self.legendre((left - origin) / t))
            return np.abs(fan - against * (right - left))

        return float((amount(cuts[:-1], equal) + amount(equal, cuts[1:])).sum())
