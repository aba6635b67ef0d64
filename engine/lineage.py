"""Who fed a front, and whom it fed: walks through the graph of fronts and collisions."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

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
        Rows of the initial fronts that contributed to its jump (itself, if it is one).
    shares : ndarray, shape of `sources`
        Part of the front's jump that each of these contributed (unit of state); they sum to the jump. Every
        state u between the front's two states is followed back in time: at a collision it is handed to each of
        the fronts ending there that cross u, one more of them with the front's own sign than with the other.
        A source's share is the length of the states handed to it, with the sign of its own jump, so that what
        opposite jumps cancelled counts negative.
    feeders : ndarray of int
        Rows of all initial fronts among its ancestors: `sources`, and those that were cancelled on the way.
    cancelled : float
        Variation that was lost in its collisions (unit of state).
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
    feeders: NDArray[np.int64]
    cancelled: float
    lost_fan: tuple[float, float] | None


class Graph:
    """Which fronts end and are born at each collision, found once for many walks: O(n log n)."""

    def __init__(self, history: History) -> None:
        self.history = history
        fronts, count = history.fronts, len(history.collisions)
        self.born_at, self.ended_at = fronts["born_at"].astype(np.int64), fronts["ended_at"].astype(np.int64)
        self.strength = np.abs(fronts["right"] - fronts["left"])
        self._by_end = np.argsort(self.ended_at, kind="stable")
        self._ends = np.searchsorted(self.ended_at[self._by_end], np.arange(count + 1))
        self._births = np.searchsorted(self.born_at, np.arange(count + 1))

    def ended(self, collisions: NDArray[np.int64]) -> NDArray[np.int64]:
        """Return the rows of all fronts that end at some collisions."""
        return self._by_end[_ranges(self._ends[collisions], self._ends[collisions + 1])]

    def born(self, collisions: NDArray[np.int64]) -> NDArray[np.int64]:
        """Return the rows of all fronts born at some collisions."""
        return _ranges(self._births[collisions], self._births[collisions + 1])

    def before(self, front: int) -> NDArray[np.int64]:
        """Return the rows of all collisions that fed a front, its own birth included, in order of time."""
        return _reached(self._backward, int(self.born_at[front]))

    def after(self, front: int) -> NDArray[np.int64]:
        """Return the rows of all collisions that a front fed, its own end included, in order of time."""
        return _reached(self._forward, int(self.ended_at[front]))

    def ancestors(self, front: int) -> NDArray[np.int64]:
        """Return the rows of all fronts that fed one, in order of birth."""
        return np.sort(self.ended(self.before(front)))

    def descendants(self, front: int) -> NDArray[np.int64]:
        """Return the rows of all fronts that one fed, in order of birth."""
        return self.born(self.after(front))

    @cached_property
    def _forward(self) -> Any:
        return _links(self.ended_at[self._births[0] :], self._births - self._births[0])

    @cached_property
    def _backward(self) -> Any:
        return _links(self.born_at[self._by_end[self._ends[0] :]], self._ends - self._ends[0])

    @cached_property
    def main_parent(self) -> NDArray[np.int64]:
        """The strongest front that ends at each collision; of equals the first."""
        main = np.full(len(self.history.collisions), -1, dtype=np.int64)
        order = self._by_end[self._ends[0] :]
        order = order[np.lexsort((order, -self.strength[order], self.ended_at[order]))][::-1]
        main[self.ended_at[order]] = order
        return main


def _links(neighbours: NDArray[np.int64], starts: NDArray[np.int64]) -> Any:
    """Return collisions as a sparse graph; starts[c] to starts[c + 1] are the neighbours of c, -1 is none."""
    from scipy.sparse import csr_array

    real = neighbours >= 0
    starts = np.concatenate(([0], np.cumsum(real)))[starts]
    count = len(starts) - 1
    return csr_array((np.ones(int(real.sum())), neighbours[real], starts), shape=(count, count))


def _reached(links: Any, collision: int) -> NDArray[np.int64]:
    from scipy.sparse.csgraph import breadth_first_order

    if collision < 0:
        return np.zeros(0, dtype=np.int64)
    return np.sort(breadth_first_order(links, collision, return_predecessors=False).astype(np.int64))


def lineage_of(history: History, front: int, graph: Graph | None = None) -> Lineage:
    """Return the story of a front.

    Parameters
    ----------
    history : History
    front : int
        Row of the front; see `front_at` and `strongest`.
    graph : Graph, optional
        That of the history, where many fronts are asked for.

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
    collisions = graph.before(front)
    enders = graph.ended(collisions)
    sources, shares = _shares(history, graph, front, collisions, enders)
    ancestors = np.sort(enders)
    fed = np.append(ancestors, front)
    return Lineage(
        front=front,
        ancestors=ancestors,
        descendants=graph.descendants(front),
        collisions=collisions,
        sources=sources,
        shares=shares,
        feeders=fed[graph.born_at[fed] < 0],
        cancelled=_cancelled(graph, collisions, enders),
        lost_fan=_lost_fan(history, graph, front),
    )


def _shares(
    history: History, graph: Graph, front: int, collisions: NDArray[np.int64], enders: NDArray[np.int64]
) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Return the initial fronts behind one and what each contributed to its jump.

    Collisions are taken latest first, so that all that is wanted of one is known when its turn comes.
    """
    left, right = history.fronts["left"], history.fronts["right"]
    row, born = enders.tolist(), graph.born_at[enders].tolist()
    low, high = (side(left[enders], right[enders]).tolist() for side in (np.minimum, np.maximum))
    # `enders` holds those of one collision after those of another, as `collisions` does
    first = np.searchsorted(graph.ended_at[enders], collisions).tolist()
    jump = sorted((float(left[front]), float(right[front])))
    wanted: dict[int, list[Interval]] = {int(graph.born_at[front]): [(jump[0], jump[1])]}
    found = {} if len(collisions) else {front: jump[1] - jump[0]}
    stop = len(row)
    for collision, start in zip(collisions[::-1].tolist(), first[::-1], strict=True):
        whole = _united(wanted.pop(collision, []))
        for i in range(start, stop) if whole else ():
            bottom, top = low[i], high[i]
            parts = [(max(bottom, a), min(top, b)) for a, b in whole if a < top and b > bottom]
            if parts and born[i] >= 0:
                wanted.setdefault(born[i], []).extend(parts)
            elif parts:
                found[row[i]] = sum(b - a for a, b in parts)
        stop = start
    rows = np.array(sorted(found), dtype=np.int64)
    lengths = np.array([found[row] for row in rows.tolist()])
    return rows, np.sign(right[rows] - left[rows]) * lengths


def _united(parts: list[Interval]) -> list[Interval]:
    """Return sorted parts with those that touch made one."""
    if len(parts) < 2:
        return parts
    parts.sort()
    united = [parts[0]]
    for low, high in parts[1:]:
        if low == united[-1][1]:
            united[-1] = (united[-1][0], high)
        else:
            united.append((low, high))
    return united


def _cancelled(graph: Graph, collisions: NDArray[np.int64], enders: NDArray[np.int64]) -> float:
    gone, come = graph.strength[enders].sum(), graph.strength[graph.born(collisions)].sum()
    return max(float(gone - come), 0.0)


def _lost_fan(history: History, graph: Graph, front: int) -> tuple[float, float] | None:
    kind = history.fronts["kind"]
    ended = graph.ended_at >= 0
    fed_by_fan = np.zeros(len(history.collisions), dtype=bool)
    fed_by_fan[graph.ended_at[ended & (kind == FAN)]] = True
    row = front
    while (collision := int(graph.born_at[row])) >= 0:
        if fed_by_fan[collision] and kind[row] != FAN:
            entry = history.collisions[collision]
            return float(entry["t"]), float(entry["x"])
        row = int(graph.main_parent[collision])
    return None


def front_at(history: History, t: float, x: float) -> int:
    """Return the row of the front nearest to a place at a time."""
    if not np.isfinite(x):
        raise InputError("must be finite", key="x", value=x, mend="give a plain number")
    rows = history.alive(t)
    if not len(rows):
        raise InputError("is a time without any front", key="t", value=t, mend="choose an earlier one")
    distance = np.abs(history.positions(rows, t) - x)
    if history.ring is not None:
        length = history.ring[1] - history.ring[0]
        distance = np.mod(distance, length)
        distance = np.minimum(distance, length - distance)
    return int(rows[np.argmin(distance)])


def strongest(history: History) -> int:
    """Return the row of the strongest front alive at the end; of equals a shock, and the rightmost."""
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
