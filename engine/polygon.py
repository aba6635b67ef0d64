"""A flux as a polygon through breakpoints, and how far that polygon's fronts depart from the true law."""

from __future__ import annotations

import itertools
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from wavekin.envelope import MIXED, SINGLE, Walk, next_run_end, scan, turning

if TYPE_CHECKING:
    from wavekin.laws.law import Law

#: Two cells lie on one line where their slopes differ by less than this many roundings of the fluxes.
COLLINEAR_ULPS = 8.0
EPSILON = 2.0**-52
#: States closer than this share of the data's span are one breakpoint; the difference is booked as defect.
SAME_STATE = 1e-12
#: Steps of golden section with which a chord's departure is enclosed: the bracket shrinks to 6e-5 of a cell.
GOLDEN_STEPS = 20
GOLDEN = 0.5 * (5.0**0.5 - 1.0)
#: Pairs of states are told apart through a table while it has at most this many entries, by sorting above.
PAIR_TABLE = 1 << 22


class Polygon:
    """The polygonal flux f_d through breakpoints of a law (Dafermos 1972; Holden, Holden and Hoegh-Krohn 1988).

    Parameters
    ----------
    u : ndarray, shape (m,)
        Breakpoints (unit of state), strictly increasing; the law's kinks and inflections are among them.
    f : ndarray, shape (m,)
        Fluxes there.
    bend : ndarray of int8, shape (m - 1,)
        Bend of the true flux in each cell: 1 convex, -1 concave, 0 linear.
    law : Law, optional
        The true law; without one the polygon itself is taken as true.

    Attributes
    ----------
    walk : Walk of ndarrays
        What the local solve looks up.
    smooth : ndarray of bool, shape (m,)
        Where the true flux has no kink, so that a fan passes through the state without a plateau.
    """

    def __init__(
        self, u: NDArray[np.float64], f: NDArray[np.float64], bend: NDArray[np.int8], law: Law | None = None
    ) -> None:
        self.u, self.f, self.bend, self.law = u, f, bend, law
        self.walk = _walk(u, f)
        self.smooth = np.ones(len(u), dtype=bool)
        if law is not None and len(law.kinks):
            nearest = np.searchsorted(u, law.kinks).clip(0, len(u) - 1)
            self.smooth[nearest] = False

    def __len__(self) -> int:
        return len(self.u)

    @cached_property
    def lists(self) -> Walk:
        """The same look-ups as Python lists, which the readable loop reads faster than arrays."""
        return Walk(*(np.asarray(column).tolist() for column in self.walk))

    @property
    def top_speed(self) -> float:
        """The largest slope in size."""
        slopes = self.walk.run_slope
        return float(np.max(np.abs(slopes))) if len(slopes) else 0.0

    def index(self, states: NDArray[np.float64]) -> NDArray[np.int64]:
        """Return the breakpoint nearest to each state."""
        above = np.searchsorted(self.u, states).clip(1, max(len(self.u) - 1, 1))
        if len(self.u) == 1:
            return np.zeros(np.shape(states), dtype=np.int64)
        below = above - 1
        return np.where(states - self.u[below] <= self.u[above] - states, below, above)

    def waves(self, left: int, right: int) -> list[int]:
        """Return the states right of each front of the local solution between two states, left to right."""
        if left == right:
            return []
        walk = self.lists
        turns = turning(walk, left, right)
        if turns == SINGLE:
            return [right]
        if turns == MIXED:
            stack, speeds = [0] * len(self), [0.0] * len(self)
            return stack[: scan(walk, left, right, stack, speeds)][::-1]
        path = [left]
        while path[-1] != right:
            path.append(next_run_end(walk, path[-1], right))
        return path[1:]

    @cached_property
    def cell_departure(self) -> NDArray[np.float64]:
        """D of the front across each single cell that opens there, shape (m - 1,); see `departures`."""
        cells = np.arange(len(self.u) - 1)
        slopes = np.asarray(self.walk.run_slope)[np.asarray(self.walk.run)] if len(cells) else np.empty(0)
        return 2.0 * self._violation(cells, self.u[:-1], self.f[:-1], slopes)

    @cached_property
    def gap(self) -> float:
        """max |f - f_d| over the breakpoints' span (unit of flux), enclosed from above."""
        return 0.5 * float(self.cell_departure.max(initial=0.0))

    def departures(self, left: NDArray[np.int64], right: NDArray[np.int64]) -> NDArray[np.float64]:
        """Return D, the L1 length per unit time by which each front departs from the true solution, from above.

        D(l, r) is the total variation of (envelope of the true f - chord) over the states between. The
        envelope lies on one side of the chord and has one bend, so D is twice the largest amount by which f
        passes the chord on the wrong side. f can do so only within a cell that bends against the chord, and
        within a stretch of such cells only next to the breakpoint where the stretch comes closest to the
        chord: these cells alone are searched, each by golden section with a secant bound on what the last
        bracket may hide. No derivative of f enters.

        Parameters
        ----------
        left, right : ndarray of int, shape (k,)
            Breakpoints left and right of the fronts; fronts of the polygon's own solution.

        Returns
        -------
        ndarray, shape (k,)
        """
        result = np.zeros(len(left))
        if self.law is None or len(self.u) < 2 or not self.bend.any():
            return result
        single = np.abs(left - right) == 1
        cell = np.minimum(left, right)[single]
        opens = np.where(left[single] < right[single], 1, -1) == self.bend[cell]
        result[single] = np.where(opens, self.cell_departure[cell], 0.0)
        many = np.flatnonzero(~single & (left != right))
        if many.size:
            pairs, back = unique_pairs(left[many], right[many], len(self))
            result[many] = self._chord_departures(*pairs)[back]
        return result

    def _chord_departures(self, left: NDArray[np.int64], right: NDArray[np.int64]) -> NDArray[np.float64]:
        """Return D of chords across several cells, shape (k,)."""
        low, high = np.minimum(left, right), np.maximum(left, right)
        side = np.where(left < right, 1, -1)
        chord = (self.f[high] - self.f[low]) / (self.u[high] - self.u[low])
        worst = np.zeros(len(left))
        for first, last, bend in self._stretches:
            inside = (side == bend) & (low < last) & (high > first)
            index = np.flatnonzero(inside)
            if not index.size:
                continue
            start, stop = np.maximum(low[index], first), np.minimum(high[index], last)
            nearest = first + np.searchsorted(bend * self._cell_slopes[first:last], bend * chord[index])
            nearest = nearest.clip(start, stop)
            for cell in (nearest - 1, nearest):
                valid = (cell >= start) & (cell < stop)
                at = index[valid]
                amount = self._violation(cell[valid], self.u[low[at]], self.f[low[at]], chord[at])
                worst[at] = np.maximum(worst[at], amount)
        return 2.0 * worst

    @cached_property
    def _cell_slopes(self) -> NDArray[np.float64]:
        return np.diff(self.f) / np.diff(self.u)

    @cached_property
    def _stretches(self) -> list[tuple[int, int, int]]:
        """Maximal stretches of cells with one bend that is not 0: first and last breakpoint, bend."""
        changes = np.flatnonzero(np.diff(self.bend)) + 1
        bounds = [0, *changes.tolist(), len(self.bend)]
        kinks = set(np.flatnonzero(~self.smooth).tolist())
        stretches = []
        for first, last in itertools.pairwise(bounds):
            if last > first and self.bend[first]:
                cuts = [first, *sorted(k for k in kinks if first < k < last), last]
                stretches += [(a, b, int(self.bend[first])) for a, b in itertools.pairwise(cuts)]
        return stretches

    def _violation(
        self,
        cell: NDArray[np.int64],
        base_u: NDArray[np.float64],
        base_f: NDArray[np.float64],
        speed: NDArray[np.float64],
    ) -> NDArray[np.float64]:
        """Return from above how far f passes, within each cell, to the side of its bend beyond a line.

        The lines go through (base_u, base_f) with slope `speed`; g = bend * (f - line) is convex in the cell,
        and max(0, -min g) is sought.
        """
        result = np.zeros(len(cell))
        if self.law is None:
            return result
        curved = np.flatnonzero(self.bend[cell])
        if not curved.size:
            return result
        cell, base_u, base_f, speed = cell[curved], base_u[curved], base_f[curved], speed[curved]
        flux, bend = self.law.flux, self.bend[cell].astype(float)
        a, b = self.u[cell], self.u[cell + 1]

        def g(u: NDArray[np.float64]) -> NDArray[np.float64]:
            return bend * (np.asarray(flux(u)) - base_f - speed * (u - base_u))

        left, right = a.copy(), b.copy()
        low, high = b - GOLDEN * (b - a), a + GOLDEN * (b - a)
        g_low, g_high = g(low), g(high)
        for _ in range(GOLDEN_STEPS):
            down = g_low <= g_high  # the least value lies left of `high`
            right = np.where(down, high, right)
            left = np.where(down, left, low)
            new = np.where(down, right - GOLDEN * (right - left), left + GOLDEN * (right - left))
            g_new = g(new)
            low, high = np.where(down, new, high), np.where(down, low, new)
            g_low, g_high = np.where(down, g_new, g_high), np.where(down, g_low, g_new)
        seen = np.minimum(g_low, g_high)
        # A convex function falls no faster inside the bracket than along the secants that lead up to it.
        with np.errstate(invalid="ignore", divide="ignore"):
            from_left = np.where(left > a, np.maximum((g(a) - g(left)) / (left - a), 0.0), np.inf)
            from_right = np.where(right < b, np.maximum((g(b) - g(right)) / (b - right), 0.0), np.inf)
        hidden = np.minimum(from_left, from_right) * (right - left)
        amount = -seen
        result[curved] = np.where(amount > 0.0, amount + hidden, 0.0)
        return result


def _walk(u: NDArray[np.float64], f: NDArray[np.float64]) -> Walk:
    """Return the look-ups of the local solve; neighbouring cells on one line become one run."""
    m = len(u)
    if m == 1:
        none, zero = np.zeros(0, dtype=np.int64), np.zeros(2, dtype=np.int64)
        return Walk(u, f, none, np.zeros(0), none, none, zero, zero)  # type: ignore[arg-type]
    width = np.diff(u)
    slopes = np.diff(f) / width
    size = np.maximum(np.abs(f[:-1]), np.abs(f[1:]))
    with np.errstate(over="ignore"):  # a subnormal width makes one line of everything
        rounding = COLLINEAR_ULPS * EPSILON * (size / width + np.abs(slopes))
    joined = np.abs(np.diff(slopes)) <= np.maximum(rounding[:-1], rounding[1:])
    starts = np.concatenate(([0], np.flatnonzero(~joined) + 1))
    run = np.cumsum(np.concatenate(([0], (~joined).astype(np.int64))))
    first, last = starts, np.concatenate((starts[1:], [m - 1]))
    run_slope = (f[last] - f[first]) / (u[last] - u[first])
    turn = np.zeros(m)
    turn[starts[1:]] = np.diff(run_slope)
    convex = np.concatenate(([0], np.cumsum(turn > 0.0)))
    concave = np.concatenate(([0], np.cumsum(turn < 0.0)))
    return Walk(u, f, run, run_slope, first, last, convex, concave)  # type: ignore[arg-type]


def unique_pairs(
    left: NDArray[np.int64], right: NDArray[np.int64], states: int
) -> tuple[tuple[NDArray[np.int64], NDArray[np.int64]], NDArray[np.int64]]:
    """Return the different pairs among pairs of states numbered below `states`, and where each pair is among them."""
    key = left * states + right
    if states**2 > PAIR_TABLE:
        found, back = np.unique(key, return_inverse=True)
    else:
        back_of = np.zeros(states**2, dtype=np.int64)
        back_of[key] = 1
        found = np.flatnonzero(back_of)
        back_of[found] = np.arange(len(found))
        back = back_of[key]
    return (found // states, found % states), back


def mixed(polygon: Polygon) -> bool:
    """Return whether some local solve of the polygon needs the envelope scanned."""
    last = len(polygon) - 1
    return last > 0 and MIXED in (turning(polygon.walk, 0, last), turning(polygon.walk, last, 0))


def polygon_of(law: Law, grid: NDArray[np.float64], states: NDArray[np.float64], exact: NDArray[np.float64]) -> Polygon:
    """Return the polygon of a law through a grid, the data's states and the law's own special states.

    Parameters
    ----------
    law : Law
    grid : ndarray
        Wanted breakpoints; those that crowd a special or data state give way to it.
    states : ndarray
        States of the data that should be breakpoints (unit of state); doubles within 1e-12 of the span are one.
    exact : ndarray
        States that must be breakpoints as they are: those that extend to infinity.

    Returns
    -------
    Polygon
        Over the span of all the states given. Where the law is itself a polygon its own corners take the
        place of the grid, and D is 0.
    """
    low = min(float(np.min(part)) for part in (states, exact, grid) if len(part))
    high = max(float(np.max(part)) for part in (states, exact, grid) if len(part))
    if law.polygon is not None:
        grid = np.asarray(law.polygon[0])
        special = grid
    else:
        special = np.asarray(law.special)
    special = special[(special > low) & (special < high)]
    close = SAME_STATE * (high - low)
    fixed = _merge(exact, np.concatenate([special, [low, high]]), close)
    fixed = _merge(fixed, states, close)
    spacing = (high - low) / max(len(grid), 2)
    u = _merge(fixed, grid[(grid > low) & (grid < high)], 0.25 * spacing if law.polygon is None else close)
    f = np.asarray(law.flux(u), dtype=float)
    middle = 0.5 * (u[:-1] + u[1:])
    bend = np.zeros(max(len(u) - 1, 0), dtype=np.int8)
    if law.polygon is None:
        for piece in law.pieces:
            bend[(middle > piece.start) & (middle < piece.end)] = piece.bend
    return Polygon(u, f, bend, law if law.polygon is None else None)


def _merge(kept: NDArray[np.float64], more: NDArray[np.float64], close: float) -> NDArray[np.float64]:
    """Return `kept` and those of `more` that are farther than `close` from each other and from all kept, sorted."""
    kept, more = np.unique(kept), np.unique(more)
    if len(kept) and len(more):
        place = np.searchsorted(kept, more)
        below = np.where(place > 0, more - kept[np.maximum(place - 1, 0)], np.inf)
        above = np.where(place < len(kept), kept[np.minimum(place, len(kept) - 1)] - more, np.inf)
        more = more[(below > close) & (above > close)]
    if len(more) > 1 and close > 0.0:
        more = more[np.concatenate(([True], np.diff(more) > close))]
    return np.union1d(kept, more)
