"""The adaptive part: breakpoints placed so that few fronts keep the proven bound within a budget.

With spacing h(u), a history whose fan fronts live W(u) in total at state u, and whose fans are split R(u)
times there, costs integral R / h du fronts and has the bound integral (W |f''| + data) h / 4 du, where `data`
is the length of x per unit of state that the data spend at u if they have to be moved to breakpoints. The
fewest fronts within the budget have h proportional to sqrt(R / (W |f''| + data)). A first run on a coarse
polygon supplies W and R; |f''| is taken from the departures of the cells, so no derivative is needed.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from wavekin.errors import InputError
from wavekin.polygon import Polygon, polygon_of
from wavekin.profile import Profile
from wavekin.records import FAN

if TYPE_CHECKING:
    from wavekin.history import History
    from wavekin.laws.law import Law

#: Breakpoints of the first, coarse run.
PILOT_LEVELS = 33
#: Data with more different states than this are moved to breakpoints, others are breakpoints themselves.
EXACT_STATES = 1024
#: Part of the budget at which the first refinement aims; each later one aims lower by the ratio it missed by.
AIM = 0.9
#: Most parts into which one refinement cuts a cell: the weights of a coarse run are only that good.
MOST_PARTS = 4096


class Plan:
    """Breakpoints for a budget, made better by every run.

    Parameters
    ----------
    law : Law
    start : Profile
        The data; its own defect is taken off the budget first.
    error : float
        L1 budget at `until`.
    until : float
    max_fronts : int
        A refinement that needs more fronts than this is refused before it runs.
    """

    def __init__(self, law: Law, start: Profile, error: float, until: float, max_fronts: int) -> None:
        if start.defect >= error:
            raise InputError(
                f"must exceed the defect {start.defect:.3g} that the data already have",
                key="error",
                value=error,
                mend=f"set error = {2.0 * start.defect:.2g} or project the data more finely",
            )
        self.law, self.start, self.until, self.max_fronts = law, start, until, max_fronts
        self.error = error
        self.aim = AIM
        self.on_line = len(start.values) > len(start.edges)
        self.states = np.unique(start.values)
        self.exact = len(self.states) <= EXACT_STATES
        self.polygon = self._polygon(np.linspace(self.states[0], self.states[-1], PILOT_LEVELS))

    def _polygon(self, grid: NDArray[np.float64]) -> Polygon:
        states = self.states if self.exact else self.states[[0, -1]]
        outer = self.start.values[[0, -1]] if self.on_line else self.states[:0]
        return polygon_of(self.law, grid, states, outer)

    def refine(self, history: History) -> None:
        """Place the breakpoints anew from the lives and splits of the fans in a finished run."""
        width = np.diff(self.polygon.u)
        life, splits = self._fans(history, len(width))
        bend = 4.0 * self.polygon.cell_departure / width**2
        weight = life * bend + self._data_length(len(width)) / width
        bound = history.error_bound(self.until) - self.start.defect
        splits = np.maximum(splits, 0.01 * max(float(splits.max(initial=0.0)), 1.0))
        modelled = 0.25 * float(np.sum(weight * width**2))
        if modelled <= 0.0:
            parts = np.full(len(width), 2)
        else:
            target = self.aim * (self.error - self.start.defect) * min(1.0, modelled / bound)
            root = np.sqrt(splits * weight)
            step = np.full(len(width), np.inf)
            used = weight > 0.0
            scale = 4.0 * target / float(np.sum(root * width))
            step[used] = scale * np.sqrt(splits[used] / weight[used])
            wanted = np.maximum(width / step, 1.0)
            self._refuse_too_many(float(np.sum(splits * wanted)))
            parts = np.ceil(np.minimum(wanted, MOST_PARTS)).astype(int)
        self.aim *= 0.9
        inner = [
            np.linspace(a, b, n + 1)[1:] for a, b, n in zip(self.polygon.u, self.polygon.u[1:], parts, strict=False)
        ]
        self.polygon = self._polygon(np.concatenate([self.polygon.u[:1], *inner]))

    def _fans(self, history: History, cells: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Return the total life of fan fronts and the number of fan fronts born in each cell.

        A chord across several cells that departs does so in the cells next to its ends; it counts there with
        the life that a fan front would need for the same departure.
        """
        departing = history.fronts[history.fronts["departure"] > 0.0]
        left, right = (np.searchsorted(self.polygon.u, departing[side]) for side in ("left", "right"))
        lived = np.minimum(departing["death_t"], self.until) - departing["birth_t"]
        fan = departing["kind"] == FAN
        cell = np.minimum(left, right)[fan]
        life: NDArray[np.float64] = np.bincount(cell, lived[fan], cells).astype(float)
        splits = np.bincount(cell, minlength=cells).astype(float)
        side = np.where(left < right, 1, -1)
        for end in (np.where(left < right, left, left - 1)[~fan], np.where(left < right, right - 1, right)[~fan]):
            opens = (self.polygon.bend[end] == side[~fan]) & (self.polygon.cell_departure[end] > 0.0)
            booked = departing["departure"][~fan][opens] * lived[~fan][opens]
            life += np.bincount(end[opens], booked / self.polygon.cell_departure[end[opens]], cells)
        return life, splits

    def _data_length(self, cells: int) -> NDArray[np.float64]:
        """Return the length of x that the data spend in each cell and that is moved to its ends; 0 if none is."""
        if self.exact:
            return np.zeros(cells)
        edges, values = self.start.edges, self.start.values
        if self.on_line:
            widths, values = np.diff(edges), values[1:-1]
        else:
            widths, values = np.diff(edges, append=edges[-1]), values
            widths[-1] = widths[:-1].mean() if len(widths) > 1 else 0.0
        cell = (np.searchsorted(self.polygon.u, values, side="right") - 1).clip(0, cells - 1)
        return np.bincount(cell, widths, cells).astype(float)

    def _refuse_too_many(self, fronts: float) -> None:
        if fronts > self.max_fronts:
            reachable = self.error * fronts / self.max_fronts
            raise InputError(
                f"would take about {fronts:.2g} fronts, more than max_fronts = {self.max_fronts}; "
                f"about {reachable:.2g} is within reach",
                key="error",
                value=self.error,
                mend=f"set error = {1.2 * reachable:.2g} or raise max_fronts",
            )
