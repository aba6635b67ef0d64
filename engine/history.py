"""The history of a run: every front as an edge, every collision as a vertex of one planar graph."""

from __future__ import annotations

from functools import cached_property, cmp_to_key
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from wavekin.errors import InputError
from wavekin.profile import Profile
from wavekin.records import FAN

if TYPE_CHECKING:
    from wavekin.laws.law import Law

#: Most entries that the keyframes of a history hold for each of its fronts.
KEYFRAME_SHARE = 4


class History:
    """Everything that happened between time 0 and `until`.

    Attributes
    ----------
    fronts : structured ndarray
        One row a front in order of birth; columns in `wavekin.records.FRONT_COLUMNS`.
    collisions : structured ndarray
        One row a collision in order of time, then place; columns in `wavekin.records.COLLISION_COLUMNS`.
        The initial data are no collision.
    law : Law or None
        The true law; None where a history was read back whose law was a bare Python function.
    start : Profile
        The data that were tracked (the given ones, or these on the polygon's breakpoints).
    until : float
        End of the run (unit of t).
    ring : tuple of float or None
        Ends of the ring; None on the open line.
    levels, level_fluxes : ndarray, shape (m,)
        Breakpoints of the polygon and its fluxes there.
    smooth : ndarray of bool, shape (m,)
        Breakpoints at which the true flux has no kink.
    initial_defect : float
        L1 distance between the true data and `start` (unit of state times unit of x).
    initial_cumulative_defect : float
        Largest difference of the two cumulative data (same unit).
    flux_gap : float
        max |f - f_d| (unit of flux).
    keyframe_times, keyframe_starts, keyframe_ids : ndarray
        Rows of the fronts alive at chosen times, in order of place: those at ``keyframe_times[k]`` are
        ``keyframe_ids[keyframe_starts[k]:keyframe_starts[k + 1]]``.
    run : dict
        Facts of the run: loop, budget, budget loops, version, ...
    """

    def __init__(
        self,
        *,
        fronts: NDArray[np.void],
        collisions: NDArray[np.void],
        start: Profile,
        until: float,
        ring: tuple[float, float] | None,
        levels: NDArray[np.float64],
        level_fluxes: NDArray[np.float64],
        smooth: NDArray[np.bool_],
        initial_defect: float = 0.0,
        initial_cumulative_defect: float = 0.0,
        flux_gap: float = 0.0,
        law: Law | None = None,
        run: dict[str, Any] | None = None,
        keyframe_times: NDArray[np.float64] | None = None,
        keyframe_starts: NDArray[np.int64] | None = None,
        keyframe_ids: NDArray[np.int64] | None = None,
    ) -> None:
        self.fronts, self.collisions = fronts, collisions
        self.start, self.until, self.ring = start, float(until), ring
        self.levels, self.level_fluxes, self.smooth = levels, level_fluxes, smooth
        self.initial_defect, self.initial_cumulative_defect = float(initial_defect), float(initial_cumulative_defect)
        self.flux_gap = float(flux_gap)
        self.law = law
        self.run = dict(run or {})
        if keyframe_times is None or keyframe_starts is None or keyframe_ids is None:
            keyframe_times, keyframe_starts, keyframe_ids = np.zeros(0), np.zeros(1, np.int64), np.zeros(0, np.int32)
        self.keyframe_times, self.keyframe_starts, self.keyframe_ids = keyframe_times, keyframe_starts, keyframe_ids

    def __repr__(self) -> str:
        name = self.law.name if self.law is not None and self.law.name else "law"
        return (
            f"History({name}, until {self.until:g}: {len(self.fronts)} fronts, "
            f"{len(self.collisions)} collisions, L1 bound {self.error_bound(self.until):.3g})"
        )

    def _repr_html_(self) -> str:
        """Return a small diagram and the facts, as notebooks show them."""
        from wavekin.io.notebook import diagram

        return diagram(self)

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, History):
            return NotImplemented
        arrays = (
            "fronts", "collisions", "levels", "level_fluxes", "smooth",
            "keyframe_times", "keyframe_starts", "keyframe_ids",
        )  # fmt: skip
        scalars = ("until", "ring", "initial_defect", "initial_cumulative_defect", "flux_gap", "run")
        return (
            all(_same(getattr(self, name), getattr(other, name)) for name in arrays)
            and all(getattr(self, name) == getattr(other, name) for name in scalars)
            and _same(self.start.edges, other.start.edges)
            and _same(self.start.values, other.start.values)
        )

    __hash__ = None  # type: ignore[assignment]

    # The state at a time

    def alive(self, t: float) -> NDArray[np.int64]:
        """Return the rows of the fronts alive at time t (born at or before it, ended after it), by place.

        Costs a search for the last keyframe and the fronts born since.
        """
        t = self._time(t)
        k = int(np.searchsorted(self.keyframe_times, t, side="right")) - 1
        births = self.fronts["birth_t"]
        stop = int(np.searchsorted(births, t, side="right"))
        if k < 0:
            rows = np.arange(stop)
        else:
            known = self.keyframe_ids[self.keyframe_starts[k] : self.keyframe_starts[k + 1]]
            first = int(np.searchsorted(births, self.keyframe_times[k], side="right"))
            rows = np.concatenate([known, np.arange(first, stop)])
        return self._by_place(rows[self.fronts["death_t"][rows] > t], t)

    def positions(self, rows: NDArray[np.int64], t: float) -> NDArray[np.float64]:
        """Return the places at time t of fronts, shape of `rows`; on a ring within its ends."""
        fronts = self.fronts[rows]
        x = fronts["birth_x"] + fronts["speed"] * (t - fronts["birth_t"])
        if self.ring is None:
            return x
        a, b = self.ring
        return x - np.floor((x - a) / (b - a)) * (b - a)

    def at(self, t: float) -> Profile:
        """Return the solution of the polygonal law at time t, right-continuous in t.

        A ring without fronts has one edge, at its start, and one value.
        """
        rows = self.alive(t)
        if not len(rows):
            if self.ring is None:
                return Profile([], self._left_end(t))
            return Profile([self.ring[0]], self._left_end(t))
        x = self._apart(self.positions(rows, t))
        left, right = self.fronts["left"][rows], self.fronts["right"][rows]
        if self.ring is not None:
            return Profile(x, right).without_zero_jumps(ring=True)
        return Profile(x, np.concatenate([left[:1], right]))

    def _left_end(self, t: float) -> NDArray[np.float64]:
        """Return the one state, shape (1,), of a solution without fronts."""
        if self.ring is None or not len(self.collisions):
            return self.start.values[:1]
        ended = self.collisions[self.collisions["fronts_out"] == 0]
        return ended["left"][ended["t"] <= t][-1:]

    def _time(self, t: float) -> float:
        t = float(t)
        if not 0.0 <= t <= self.until:
            raise InputError(
                f"must lie between 0 and {self.until!r}", key="t", value=t, mend="choose a time of the run"
            )
        return t

    def _by_place(self, rows: NDArray[np.int64], t: float) -> NDArray[np.int64]:
        """Return rows sorted by place at t.

        Neighbours share a state. Where sorted neighbours do not, fronts stand within rounding of each other
        and are put in the order they have in the middle of their common life.
        """
        x = self.positions(rows, t)
        order = np.lexsort((rows, self.fronts["speed"][rows], x))
        rows, x = rows[order], x[order]
        parted = self.fronts["right"][rows[:-1]] != self.fronts["left"][rows[1:]]
        broken = np.flatnonzero(parted if parted.ndim == 1 else parted.any(axis=1))
        if not broken.size:
            return rows
        scale = 64.0 * np.finfo(float).eps * max(float(np.abs(x).max()), abs(t) * self._top_speed)
        for i in broken:
            start, stop = np.searchsorted(x, [x[i] - scale, x[i] + scale])
            rows[start:stop] = sorted(rows[start:stop].tolist(), key=cmp_to_key(self._order))
        return rows

    @cached_property
    def _top_speed(self) -> float:
        return float(np.abs(self.fronts["speed"]).max(initial=0.0))

    def _order(self, a: int, b: int) -> int:
        """Return -1 where front a stands left of front b throughout their common life."""
        first, second = self.fronts[a], self.fronts[b]
        begin = max(first["birth_t"], second["birth_t"])
        middle = 0.5 * (begin + min(first["death_t"], second["death_t"], self.until))
        between = (first["birth_x"] + first["speed"] * (middle - first["birth_t"])) - (
            second["birth_x"] + second["speed"] * (middle - second["birth_t"])
        )
        if self.ring is not None:
            length = self.ring[1] - self.ring[0]
            between -= np.round(between / length) * length
        return int(np.sign(between) or np.sign(first["speed"] - second["speed"]))

    def _apart(self, x: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return places that increase strictly: fronts just born at one point are moved apart by single ulp."""
        if len(x) > 1 and np.any(np.diff(x) <= 0.0):
            x = x.copy()
            for i in range(1, len(x)):
                if x[i] <= x[i - 1]:
                    x[i] = np.nextafter(x[i - 1], np.inf)
        return x

    # Error bounds

    def error_bound(self, t: float) -> float:
        """Return the proven bound of the L1 distance to the true solution at time t.

        Data defect + sum over fronts of departure times life up to t (Kruzkov 1970; Bressan 2000, section 2.3).
        Rounding, about 1e-16 of the solution a collision, is not part of it.
        """
        return self.initial_defect + self._lived(self._time(t))

    def _lived(self, t: float) -> float:
        """Return the sum over fronts of departure times life up to t."""
        births, deaths, birth_sums, death_sums = self._departure_sums
        i, j = np.searchsorted(births, t, side="right"), np.searchsorted(deaths, t, side="right")
        grown = t * birth_sums[0, i] - birth_sums[1, i]
        return max(float(grown - (t * death_sums[0, j] - death_sums[1, j])), 0.0)

    @cached_property
    def _departure_sums(self) -> tuple[NDArray, NDArray, NDArray, NDArray]:
        """Times of birth and death, and running sums of (departure, departure * time), of the fronts that depart."""
        fronts = self.fronts[["birth_t", "death_t", "departure"]][self.fronts["departure"] > 0.0]
        rate, births = fronts["departure"], fronts["birth_t"]
        ended = np.isfinite(fronts["death_t"])
        order = np.argsort(fronts["death_t"][ended], kind="stable")
        deaths, death_rate = fronts["death_t"][ended][order], rate[ended][order]

        def sums(rates: NDArray, times: NDArray) -> NDArray:
            return np.stack([np.concatenate(([0.0], np.cumsum(part))) for part in (rates, rates * times)])

        return births.copy(), deaths, sums(rate, births), sums(death_rate, deaths)

    def cumulative_bound(self, t: float) -> float:
        """Return the proven bound at time t of the error of any amount between two places, or past a place.

        Largest difference of the cumulative data + t * max |f - f_d| (Crandall and Lions 1983), or the L1 bound
        where that is smaller.
        """
        return min(self.initial_cumulative_defect + self._time(t) * self.flux_gap, self.error_bound(t))

    # Functionals in time

    def total_variation(self, t: float) -> float:
        """Return the total variation of the solution at time t (unit of state)."""
        rows = self.alive(t)
        return float(np.abs(self.fronts["right"][rows] - self.fronts["left"][rows]).sum())

    def front_count(self, t: float) -> int:
        """Return the number of fronts at time t."""
        return len(self.alive(t))

    def mass(self, t: float) -> float:
        """Return the conserved total at time t (unit of state times unit of x).

        On a ring the integral over it. On the open line the integral of u(x, t) less the data's outer states
        (the left one left of x = 0, the right one right of it), with what flows in from both ends taken off,
        so that it stays the same for ever.
        """
        profile = self.at(t)
        edges, values = profile.edges, profile.values
        if self.ring is not None:
            widths = np.diff(edges, append=edges[0] + (self.ring[1] - self.ring[0])) if len(edges) else None
            return float(np.dot(values, widths)) if widths is not None else 0.0
        flux = self.level_fluxes[np.searchsorted(self.levels, [values[0], values[-1]])]
        moment = float(np.dot(edges, values[:-1] - values[1:])) if len(edges) else 0.0
        return moment - t * float(flux[0] - flux[1])

    def fan_share(self, t: float) -> float:
        """Return the share of the variation at time t that stands in fans."""
        fronts = self.fronts[self.alive(t)]
        strength = np.abs(fronts["right"] - fronts["left"])
        total = float(strength.sum())
        return float(strength[fronts["kind"] == FAN].sum()) / total if total > 0.0 else 0.0

    # Answers

    def averages(self, cells: ArrayLike, times: ArrayLike | float, fans: str = "joined") -> NDArray[np.float64]:
        """Return exact cell averages, shape (times, cells - 1).

        Parameters
        ----------
        cells : array_like, shape (n + 1,)
            Edges of the cells, increasing.
        times : array_like or float
            Times within the run.
        fans : {"joined", "steps"}
            "steps" integrates the polygonal solution itself, to which the proven bounds apply; "joined" puts
            straight lines through the plateaus inside fans, second order in the spacing of the breakpoints.
        """
        from wavekin.sampling import averages

        return averages(self, cells, times, fans)

    @property
    def memory(self) -> int:
        """Bytes held by the rows of fronts and collisions."""
        return int(self.fronts.nbytes + self.collisions.nbytes)


def keyframes(history: History, times: NDArray[np.float64]) -> None:
    """Store the fronts alive at increasing times in a history, each list made from the one before.

    Times are left out, every other one at a go, until the lists hold at most `KEYFRAME_SHARE` entries a front.
    """
    fronts, collisions = history.fronts, history.collisions
    ended = np.concatenate(([0], np.cumsum(collisions["fronts_in"], dtype=np.int64)))
    alive = np.searchsorted(fronts["birth_t"], times, side="right")
    alive = alive - ended[np.searchsorted(collisions["t"], times, side="right")]
    while len(times) > 1 and alive.sum() > KEYFRAME_SHARE * len(fronts):
        times, alive = times[::2], alive[::2]
    lists = []
    rows: NDArray[Any] = np.zeros(0, dtype=np.int32)
    first = 0
    for t in times:
        stop = int(np.searchsorted(fronts["birth_t"], t, side="right"))
        rows = np.concatenate([rows, np.arange(first, stop, dtype=np.int32)])
        rows = history._by_place(rows[fronts["death_t"][rows] > t], float(t))
        first = stop
        lists.append(rows)
    history.keyframe_times = np.asarray(times, dtype=float)
    history.keyframe_starts = np.concatenate(([0], np.cumsum([len(part) for part in lists]))).astype(np.int64)
    history.keyframe_ids = np.concatenate([*lists, np.zeros(0, dtype=np.int32)]).astype(np.int32)


def _same(a: NDArray, b: NDArray) -> bool:
    """Return whether two arrays hold the same bits, NaN included."""
    if a.dtype != b.dtype or a.shape != b.shape:
        return False
    if a.dtype.names:
        return all(_same(a[name], b[name]) for name in a.dtype.names)
    return a.tobytes() == b.tobytes()
