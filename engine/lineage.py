"""Who fed a front, and whom it fed: walks through the graph of fronts and collisions."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from wavekin.errors import InputError
from wavekin.records import FAN, SHOCK

if TYPE_CHECKING:
    from wavekin.history import History

Interval = tuple[float, float]


@dataclass(frozen=True)
class Lineage:
    """The story of one front.

    Attributes
    ----------
    front : int
        Its row.
    ancestors, descendants : ndarray of int
        Rows of all fronts that fed it and that it fed, in order of birth.
    collisions : ndarray of int
        Rows of the collisions among its ancestors, its own birth included.
    sources : ndarray of int
        Rows of the initial fronts among its ancestors (itself, if it is one).
    shares : ndarray, shape of `sources`
        Part of the front's jump that each of these contributed; they sum to the jump. At a collision the states
        between the outer ones belong each to one front born there; a front that ends contributes the states that
        it crosses itself, with its sign, so that what is cancelled counts negative.
    lost_fan : tuple of float or None
        Time and place of the last collision on its main line (back through the strongest parent) at which a
        fan front ended; None if there was none.
    """

    front: int
    ancestors: NDArray[np.int64]
    descendants: NDArray[np.int64]
    collisions: NDArray[np.int64]
    sources: NDArray[np.int64]
    shares: NDArray[np.float64]
    lost_fan: tuple[float, float] | None


class Graph:
    """The fronts that end at each collision, found once for many walks; O(n log n)."""

    def __init__(self, history: History) -> None:
        self.history = history
        fronts, count = history.fronts, len(history.collisions)
        self.born_at, self.ended_at = fronts["born_at"].astype(np.int64), fronts["ended_at"].astype(np.int64)
        self._by_end = np.argsort(self.ended_at, kind="stable")
        self._ends = np.searchsorted(self.ended_at[self._by_end], np.arange(count + 1))
        self._births = np.searchsorted(self.born_at, np.arange(count + 1))

    def ended(self, collisions: NDArray[np.int64]) -> NDArray[np.int64]:
        """Return the rows of all fronts that end at some collisions."""
        return self._by_end[_ranges(self._ends[collisions], self._ends[collisions + 1])]

    def born(self, collisions: NDArray[np.int64]) -> NDArray[np.int64]:
        """Return the rows of all fronts born at some collisions."""
        return _ranges(self._births[collisions], self._births[collisions + 1])

    def ancestors(self, front: int) -> NDArray[np.int64]:
        """Return the rows of all fronts that fed one, in order of birth."""
        return self._walk(front, self.born_at, self.ended)

    def descendants(self, front: int) -> NDArray[np.int64]:
        """Return the rows of all fronts that one fed, in order of birth."""
        return self._walk(front, self.ended_at, self.born)

    def _walk(self, front, towards, reached):  # type: ignore[no-untyped-def]
        seen = np.zeros(len(self.born_at), dtype=bool)
        met = np.zeros(len(self.history.collisions) + 1, dtype=bool)
        edge = np.array([front])
        while len(edge):
            collisions = np.unique(towards[edge])
            collisions = collisions[(collisions >= 0) & ~met[collisions]]
            met[collisions] = True
            edge = reached(collisions)
            seen[edge] = True
        return np.flatnonzero(seen)


def lineage(history: History, front: int, graph: Graph | None = None) -> Lineage:
    """Return the story of a front.

    Raises
    ------
    InputError
        Where there is no front of that number.
    """
    if not 0 <= front < len(history.fronts):
        raise InputError(
            f"must be the row of one of {len(history.fronts)} fronts", key="front", value=front, mend="choose another"
        )
    graph = graph or Graph(history)
    ancestors = graph.ancestors(front)
    collisions = np.unique(graph.born_at[np.append(ancestors, front)])
    collisions = collisions[collisions >= 0]
    sources, shares = _shares(history, graph, front, collisions)
    return Lineage(
        front, ancestors, graph.descendants(front), collisions, sources, shares, _lost_fan(history, graph, front)
    )


def _shares(
    history: History, graph: Graph, front: int, collisions: NDArray[np.int64]
) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Return the initial fronts behind one and what each contributed to its jump."""
    left, right = history.fronts["left"], history.fronts["right"]
    kept: dict[int, list[Interval]] = {front: [_interval(left[front], right[front])]}
    found: dict[int, float] = {}
    for collision in collisions[::-1].tolist():
        at = np.array([collision])
        wanted = sorted(part for row in graph.born(at).tolist() for part in kept.pop(row, ()))
        for row in graph.ended(at).tolist():
            low, high = _interval(left[row], right[row])
            parts = [(max(low, a), min(high, b)) for a, b in wanted if a < high and b > low]
            if parts:
                kept[row] = parts
    for row, parts in kept.items():
        found[row] = float(np.sign(right[row] - left[row])) * sum(b - a for a, b in parts)
    rows = np.array(sorted(found), dtype=np.int64)
    return rows, np.array([found[row] for row in rows.tolist()])


def _interval(a: float, b: float) -> Interval:
    return (float(a), float(b)) if a < b else (float(b), float(a))


def _lost_fan(history: History, graph: Graph, front: int) -> tuple[float, float] | None:
    fronts, row = history.fronts, front
    while (collision := int(graph.born_at[row])) >= 0:
        parents = graph.ended(np.array([collision]))
        if np.any(fronts["kind"][parents] == FAN) and fronts["kind"][row] != FAN:
            entry = history.collisions[collision]
            return float(entry["t"]), float(entry["x"])
        row = int(parents[np.argmax(np.abs(fronts["right"][parents] - fronts["left"][parents]))])
    return None


def front_at(history: History, t: float, x: float) -> int:
    """Return the row of the front nearest to a place at a time."""
    rows = history.alive(t)
    if not len(rows):
        raise InputError("is a time without any front", key="t", value=t, mend="choose an earlier one")
    distance = np.abs(history.positions(rows, t) - x)
    if history.ring is not None:
        length = history.ring[1] - history.ring[0]
        distance = np.minimum(distance, length - distance)
    return int(rows[np.argmin(distance)])


def strongest(history: History) -> int:
    """Return the row of the strongest front alive at the end; of equals the last shock."""
    rows = history.alive(history.until)
    if not len(rows):
        raise InputError("has no front alive at the end", key="history", mend="name a front by its row")
    fronts = history.fronts[rows]
    strength = np.abs(fronts["right"] - fronts["left"])
    return int(rows[np.lexsort((fronts["kind"] == SHOCK, strength))[-1]])


def _ranges(starts: NDArray[np.int64], stops: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return all whole numbers of several half-open ranges, one after the other."""
    counts = stops - starts
    return np.repeat(starts - (np.cumsum(counts) - counts), counts) + np.arange(int(counts.sum()))
