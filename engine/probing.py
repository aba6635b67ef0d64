"""What a detector at a fixed place sees: states, fluxes, amounts passed, first arrivals. All exact.

The state at a place changes only when a front crosses it, and a front's way is straight, so every change is
known to rounding; between changes everything is constant and its integral linear.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray
from wavekin.errors import InputError
from wavekin.sampling import Snapshot

if TYPE_CHECKING:
    from wavekin.history import History


@dataclass(frozen=True)
class Trace:
    """The state at one place over time (right of the place, where a front sits on it).

    Attributes
    ----------
    place : float
    times : ndarray, shape (n,)
        0 and the times at which the state changes.
    states, fluxes : ndarray, shape (n,)
        State and flux from each of these times to the next.
    until : float
        End of the run.
    fronts : ndarray of int, shape (n,)
        Row of the front that crosses at each time; -1 for the start.
    """

    place: float
    times: NDArray[np.float64]
    states: NDArray[np.float64]
    fluxes: NDArray[np.float64]
    until: float
    fronts: NDArray[np.int64]

    def at(self, times: ArrayLike) -> NDArray[np.float64]:
        """Return the states at times, right-continuous."""
        return self.states[self._piece(times)]

    def passed(self, times: ArrayLike) -> NDArray[np.float64]:
        """Return the amount that has passed the place since time 0 (flux integrated, unit of flux times t).

        Its error is at most twice the defect of the cumulative data plus t max |f - f_d|; see `passed_bound`.
        """
        begun = np.concatenate(([0.0], np.cumsum(self.fluxes[:-1] * np.diff(self.times))))
        piece = self._piece(times)
        return begun[piece] + self.fluxes[piece] * (np.asarray(times, dtype=float) - self.times[piece])

    def arrival(self, state: float) -> float:
        """Return the first time at which the state reaches or passes a given one; NaN where it never does."""
        side = np.sign(self.states - state)
        there = np.flatnonzero((side == 0.0) | (side != side[0]))
        return float(self.times[there[0]]) if there.size else float("nan")

    def _piece(self, times: ArrayLike) -> NDArray[np.int64]:
        times = np.asarray(times, dtype=float)
        if np.any((times < 0.0) | (times > self.until) | ~np.isfinite(times)):
            raise InputError(f"must lie between 0 and {self.until!r}", key="times", value=times, mend="choose others")
        return np.searchsorted(self.times, times, side="right") - 1


def traces(history: History, places: ArrayLike) -> list[Trace]:
    """Return the trace at each place.

    Parameters
    ----------
    history : History
    places : array_like, shape (k,)
        On a ring within it.

    Raises
    ------
    InputError
        For places that are not finite or lie outside the ring.
    """
    places = np.atleast_1d(np.asarray(places, dtype=float))
    for x in places:
        inside = history.ring is None or history.ring[0] <= x <= history.ring[1]
        if not (np.isfinite(x) and inside):
            raise InputError("must be a place of the domain", key="places", value=float(x), mend="choose another")
    return [_trace(history, float(x)) for x in places]


def _trace(history: History, place: float) -> Trace:
    times, rows = _crossings(history, place)
    fronts = history.fronts[rows]
    right_going = fronts["speed"] > 0.0
    before = np.where(right_going, fronts["right"], fronts["left"])
    after = np.where(right_going, fronts["left"], fronts["right"])
    first = before[0] if len(rows) else history.at(0.0)(place)
    last_of_time = np.concatenate((times[1:] != times[:-1], [True])) if len(rows) else np.zeros(0, dtype=bool)
    # where several cross at once (a collision at the place) the state afterwards is what the next one finds
    following = np.concatenate((before[1:], after[-1:])) if len(rows) else after
    states = np.concatenate(([first], following[last_of_time]))
    times, rows = np.concatenate(([0.0], times[last_of_time])), np.concatenate(([-1], rows[last_of_time]))
    if len(times) > 1 and times[1] == 0.0:
        times, rows, states = times[1:], rows[1:], states[1:]
    fluxes = history.level_fluxes[np.searchsorted(history.levels, states)]
    return Trace(place, times, states, fluxes, history.until, rows)


def _crossings(history: History, place: float) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
    """Return times and rows of all crossings of a place, in order of time.

    A front counts where it leaves the place behind: one that goes right from birth_x <= x < end, one that goes
    left from birth_x > x >= end, so that no crossing is lost or doubled at a collision on the place.
    """
    fronts = history.fronts
    life_end = np.minimum(fronts["death_t"], history.until)
    begin, speed = fronts["birth_x"], fronts["speed"]
    end = begin + speed * (life_end - fronts["birth_t"])
    if history.ring is None:
        right = (speed > 0.0) & (begin <= place) & (place < end)
        left = (speed < 0.0) & (begin > place) & (place >= end)
        rows = np.flatnonzero(right | left)
        seen = np.full(len(rows), place)
    else:
        rows, seen = _laps(history, begin, end, speed, place)
    times = fronts["birth_t"][rows] + (seen - begin[rows]) / speed[rows]
    times = np.clip(times, fronts["birth_t"][rows], life_end[rows])
    order = np.lexsort((rows, times))
    return times[order], rows[order]


def _laps(
    history: History, begin: NDArray[np.float64], end: NDArray[np.float64], speed: NDArray[np.float64], place: float
) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Return rows and unrolled places of all crossings on a ring; a front crosses once a lap."""
    assert history.ring is not None
    length = history.ring[1] - history.ring[0]
    first = np.where(speed > 0.0, np.ceil((begin - place) / length), np.ceil((end - place) / length))
    last = np.where(speed > 0.0, np.ceil((end - place) / length), np.ceil((begin - place) / length)) - 1.0
    count = np.where(speed != 0.0, np.maximum(last - first + 1.0, 0.0), 0.0).astype(np.int64)
    rows: NDArray[np.int64] = np.repeat(np.arange(len(begin)), count)
    lap = first[rows] + np.arange(len(rows)) - np.repeat(np.cumsum(count) - count, count)
    return rows, np.asarray(place + lap * length, dtype=float)


def passed_bound(history: History, t: float) -> float:
    """Return the proven bound of `Trace.passed` at time t.

    The amount passed is the cumulative data less the cumulative solution at the place (Crandall and Lions 1983).
    """
    return history.initial_cumulative_defect + history.cumulative_bound(t)


def stored(history: History, low: float, high: float, times: ArrayLike, fans: str = "joined") -> NDArray[np.float64]:
    """Return the amount between two places at times, shape of `times` (unit of state times unit of x).

    Its error is at most twice `History.cumulative_bound`.
    """
    if not low < high:
        raise InputError("must be two places in order", key="between", value=[low, high], mend="swap them")
    ends = np.array([low, high])
    return np.array(
        [float(np.diff(Snapshot(history, float(t), fans).primitive(ends))[0]) for t in np.atleast_1d(times)]
    )
