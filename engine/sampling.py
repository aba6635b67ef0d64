"""Exact answers on a grid: integrals of a piecewise-constant or piecewise-linear function, no quadrature."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray
from wavekin.errors import InputError
from wavekin.records import FAN

if TYPE_CHECKING:
    from wavekin.history import History

FANS = ("joined", "steps")


class Snapshot:
    """The solution of a history at one time as pieces with a state and a slope each.

    Attributes
    ----------
    edges : ndarray, shape (n,)
        Places of the fronts, non-decreasing.
    values : ndarray, shape (n + 1,)
        Mean of each piece; on a ring the first and last piece are the two parts of one plateau.
    slopes : ndarray, shape (n + 1,)
        Slope of each piece: 0 outside joined fans.
    """

    def __init__(self, history: History, t: float, fans: str = "joined") -> None:
        if fans not in FANS:
            raise InputError('must be "joined" or "steps"', key="fans", value=fans, mend='leave it out for "joined"')
        rows = history.alive(t)
        fronts = history.fronts[rows]
        self.edges = np.maximum.accumulate(history.positions(rows, t)) if len(rows) else np.zeros(0)
        if len(rows):
            self.values = np.concatenate([fronts["left"][:1], fronts["right"]])
        else:
            self.values = history.at(t).values[:1]
        self.slopes = np.zeros(len(self.values))
        if fans == "joined" and len(rows) > 1:
            self._join(history, fronts)

    def _join(self, history: History, fronts: NDArray[np.void]) -> None:
        """Lay lines through the plateaus between two fan fronts, with the plateau's mean kept.

        The line's slope is that between the middle states of the two fronts at their places; it is held
        flatter where it would pass the neighbouring states.
        """
        inside = (fronts["kind"][:-1] == FAN) & (fronts["kind"][1:] == FAN) & (fronts["opened"][:-1] == 1)
        inside &= history.smooth[np.searchsorted(history.levels, fronts["right"][:-1])]
        width = np.diff(self.edges)
        inside &= width > 0.0
        left, middle, right = self.values[:-2][inside], self.values[1:-1][inside], self.values[2:][inside]
        rise = 0.5 * (right - left)
        limit = 2.0 * np.minimum(np.abs(middle - left), np.abs(right - middle))
        self.slopes[1:-1][inside] = np.sign(rise) * np.minimum(np.abs(rise), limit) / width[inside]

    def value(self, x: NDArray[np.float64], side: str) -> NDArray[np.float64]:
        """Return the solution at places, on the "left" or "right" of a front that sits there."""
        piece = np.searchsorted(self.edges, x, side="right" if side == "right" else "left")
        if not len(self.edges):
            return self.values[piece]
        low = self.edges[np.maximum(piece - 1, 0)]
        high = self.edges[np.minimum(piece, len(self.edges) - 1)]
        return self.values[piece] + self.slopes[piece] * (x - 0.5 * (low + high))

    def primitive(self, x: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the integral of the solution from a fixed place up to each place in `x`."""
        if not len(self.edges):
            return self.values[0] * x
        edges, values, slopes = self.edges, self.values, self.slopes
        piece = np.searchsorted(edges, x, side="right")
        sums = np.concatenate(([0.0], np.cumsum(values[1:-1] * np.diff(edges))))
        base = edges[np.maximum(piece - 1, 0)]
        begun = np.where(piece > 0, sums[np.maximum(piece - 1, 0)], 0.0)
        middle = 0.5 * (base + edges[np.minimum(piece, len(edges) - 1)])
        along = x - base
        return begun + along * (values[piece] + slopes[piece] * (0.5 * (x + base) - middle))


def points(
    history: History, x: ArrayLike, times: ArrayLike | float, fans: str = "joined"
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the solution left and right of places, each of shape (times, places); they differ where a front sits.

    Parameters
    ----------
    x : array_like, shape (k,)
        Places; on a ring within it.
    times : array_like or float
    fans : {"joined", "steps"}
    """
    x = np.atleast_1d(np.asarray(x, dtype=float))
    if not np.all(np.isfinite(x)):
        raise InputError("must be finite", key="points", value=x, mend="give plain numbers")
    times = np.atleast_1d(np.asarray(times, dtype=float))
    left, right = np.empty((len(times), len(x))), np.empty((len(times), len(x)))
    for k, t in enumerate(times):
        snapshot = Snapshot(history, float(t), fans)
        left[k], right[k] = snapshot.value(x, "left"), snapshot.value(x, "right")
    return left, right


@dataclass(frozen=True)
class Sample:
    """Cell averages of a history at times, with what is proven about them.

    Attributes
    ----------
    cells : ndarray, shape (n + 1,)
    times : ndarray, shape (k,)
    averages : ndarray, shape (k, n)
    l1_bound : ndarray, shape (k,)
        Proven L1 error of the solution with stepped fans (unit of state times unit of x).
    cumulative_bound : ndarray, shape (k,)
        Proven error of any amount between one place and minus infinity or the ring's start.
    average_bound : ndarray, shape (k, n)
        Proven error of each average of stepped fans: the smaller of the L1 bound and twice the cumulative bound,
        over the cell's width. (The error's integral over a cell is at most its L1 norm, and is the difference of
        two cumulative errors.)
    """

    cells: NDArray[np.float64]
    times: NDArray[np.float64]
    averages: NDArray[np.float64]
    l1_bound: NDArray[np.float64]
    cumulative_bound: NDArray[np.float64]
    average_bound: NDArray[np.float64]


def sample(history: History, cells: ArrayLike, times: ArrayLike | float, fans: str = "joined") -> Sample:
    """Return exact cell averages with their bounds; see `History.averages` for the arguments."""
    edges, at = np.asarray(cells, dtype=float), np.atleast_1d(np.asarray(times, dtype=float))
    values = averages(history, edges, at, fans)
    l1 = np.array([history.error_bound(t) for t in at])
    cumulative = np.array([history.cumulative_bound(t) for t in at])
    return Sample(edges, at, values, l1, cumulative, np.minimum(l1, 2.0 * cumulative)[:, None] / np.diff(edges))


def averages(history: History, cells: ArrayLike, times: ArrayLike | float, fans: str = "joined") -> NDArray[np.float64]:
    """Return exact cell averages of a history; see `History.averages`."""
    edges = np.asarray(cells, dtype=float)
    if edges.ndim != 1 or len(edges) < 2 or not np.all(np.isfinite(edges)) or np.any(np.diff(edges) <= 0.0):
        raise InputError(
            "must be at least two finite cell edges in increasing order", key="cells", value=cells, mend="sort them"
        )
    if history.ring is not None and (edges[0] < history.ring[0] or edges[-1] > history.ring[1]):
        raise InputError(
            f"must lie within the ring from {history.ring[0]!r} to {history.ring[1]!r}",
            key="cells",
            value=[float(edges[0]), float(edges[-1])],
            mend="choose cells inside it",
        )
    result = np.empty((np.size(times), len(edges) - 1))
    for row, t in zip(result, np.atleast_1d(np.asarray(times, dtype=float)), strict=True):
        row[:] = np.diff(Snapshot(history, float(t), fans).primitive(edges)) / np.diff(edges)
    return result
