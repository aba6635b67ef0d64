"""From a law and its data to a history: the one call that runs everything."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from wavekin.bound import complete
from wavekin.budget import Plan
from wavekin.errors import InputError
from wavekin.history import History
from wavekin.history import keyframes as store_keyframes
from wavekin.ordering import in_order
from wavekin.polygon import Polygon, polygon_of
from wavekin.profile import Profile
from wavekin.tracker import Progress, Tracker
from wavekin.version import __version__

if TYPE_CHECKING:
    from wavekin.kernel import Kernel
    from wavekin.laws.law import Law

#: Breakpoints over the data's span where neither `error` nor `levels` is given.
DEFAULT_LEVELS = 257
#: The data's states are made breakpoints while there are at most this many for each breakpoint asked for.
STATES_PER_LEVEL = 4
#: Runs that start with more fronts than this are worth the start-up time of the compiled loop.
COMPILED_FROM = 8000
#: Budget loops after which the last bound is what can be had.
MAX_BUDGET_LOOPS = 8
MAX_FRONTS = 20_000_000

LOOPS = ("auto", "queue", "compiled")


def track(
    law: Law,
    start: Profile,
    until: float,
    *,
    error: float | None = None,
    levels: int | None = None,
    ring: tuple[float, float] | None = None,
    loop: str = "auto",
    keyframes: int = 50,
    max_fronts: int = MAX_FRONTS,
    progress: Progress | None = None,
) -> History:
    """Follow every front of a scalar conservation law u_t + f(u)_x = 0 from given data.

    Parameters
    ----------
    law : Law
        The flux f.
    start : Profile
        Data at time 0: n edges with n + 1 values on the line, n values on a ring.
    until : float
        Time at which to stop (unit of t), above 0.
    error : float, optional
        Budget for the L1 error at `until` (unit of state times unit of x); the breakpoints are chosen so that
        the proven bound stays within it.
    levels : int, optional
        Number of breakpoints over the span of the data, at least 2; the alternative to `error`. 257 where
        neither is given.
    ring : tuple of float, optional
        Ends of a periodic domain; None for the open line.

    Other Parameters
    ----------------
    loop : {"auto", "queue", "compiled"}
        Which loop runs; they give identical histories. "auto" compiles where many fronts start.
    keyframes : int
        Number of times, evenly spread, at which the list of fronts alive is stored.
    max_fronts : int
        Stop with an error where more fronts than this would be needed.
    progress : callable, optional
        Called now and then with the time reached, the fronts alive and the collisions so far.

    Returns
    -------
    History

    Raises
    ------
    InputError
        Where an argument cannot be used, or the budget or the number of fronts is out of reach.
    """
    check_arguments(law, start, until, error, levels, ring, loop, keyframes, max_fronts)
    start = start.without_zero_jumps(ring is not None)
    runner = _Runner(law, start, float(until), ring, loop, int(max_fronts), progress)
    if error is None:
        history = runner.run(runner.uniform(levels or DEFAULT_LEVELS))
    else:
        history = _within_budget(runner, float(error))
    history.run |= {"version": __version__}
    if keyframes:
        store_keyframes(history, np.linspace(0.0, history.until, keyframes))
    return history


def _within_budget(runner: _Runner, error: float) -> History:
    """Run with ever better placed breakpoints until the proven bound is within the budget."""
    plan = Plan(runner.law, runner.start, error, runner.until, runner.max_fronts)
    history = runner.run(plan.polygon)
    loops = 1
    while history.error_bound(runner.until) > error and loops < MAX_BUDGET_LOOPS:
        plan.refine(history)
        history = runner.run(plan.polygon)
        loops += 1
    bound = history.error_bound(runner.until)
    if bound > error:
        raise InputError(
            f"cannot be met: {loops} refinements reach {bound:.3g}",
            key="error",
            value=error,
            mend=f"set error = {1.1 * bound:.2g}",
        )
    history.run |= {"budget": error, "budget_loops": loops}
    return history


class _Runner:
    """One problem, run on any polygon."""

    def __init__(
        self,
        law: Law,
        start: Profile,
        until: float,
        ring: tuple[float, float] | None,
        loop: str,
        max_fronts: int,
        progress: Progress | None,
    ) -> None:
        self.law, self.start, self.until, self.ring = law, start, until, ring
        self.loop, self.max_fronts, self.progress = loop, max_fronts, progress

    def uniform(self, levels: int) -> Polygon:
        """Return the polygon with evenly spread breakpoints."""
        values = self.start.values
        states = np.unique(values)
        exact = values[:0] if self.ring else values[[0, -1]]
        if len(states) > STATES_PER_LEVEL * levels:
            states = states[[0, -1]]
        share = np.arange(levels) / (levels - 1)
        grid = values.min() * share[::-1] + values.max() * share  # symmetric about the middle to the last bit
        return polygon_of(self.law, grid, states, exact)

    def run(self, polygon: Polygon) -> History:
        """Track the data, put on the polygon's breakpoints, and return the history without keyframes."""
        states = polygon.index(self.start.values)
        snapped = Profile(self.start.edges, polygon.u[states])
        defect, cumulative = _snapping_defect(self.start, snapped, self.ring)
        name, loop = self._loop(polygon, states)
        if not loop.run(self.until, self.max_fronts, self.progress):
            raise InputError(
                f"would take more than max_fronts = {self.max_fronts} fronts",
                key="until",
                value=self.until,
                mend="raise max_fronts or the error budget, lower levels or stop earlier",
            )
        fronts, collisions = in_order(*loop.records())
        complete(fronts, collisions, polygon)
        return History(
            fronts=fronts,
            collisions=collisions,
            start=snapped,
            until=self.until,
            ring=self.ring,
            levels=polygon.u,
            level_fluxes=polygon.f,
            smooth=polygon.smooth,
            initial_defect=self.start.defect + defect,
            initial_cumulative_defect=self.start.cumulative_defect + cumulative,
            flux_gap=polygon.gap,
            law=self.law,
            run={"loop": name, "levels": len(polygon)},
        )

    def _loop(self, polygon: Polygon, states: NDArray[np.int64]) -> tuple[str, Tracker | Kernel]:
        """Return the loop that suits the size of the run, and its name."""
        name = self.loop
        if name == "auto":
            size = int(np.abs(np.diff(states)).sum())
            name = "compiled" if size > COMPILED_FROM else "queue"
        if name == "queue":
            return name, Tracker(polygon, self.start.edges, states, self.ring)
        from wavekin.kernel import Kernel

        return name, Kernel(polygon, self.start.edges, states, self.ring)


def _snapping_defect(start: Profile, snapped: Profile, ring: tuple[float, float] | None) -> tuple[float, float]:
    """Return the L1 distance between two profiles on the same edges, and that of their cumulative integrals."""
    difference = snapped.values - start.values
    edges = start.edges
    if ring is not None:
        widths = np.diff(edges, append=edges[0] + (ring[1] - ring[0])) if len(edges) else np.full(1, ring[1] - ring[0])
    else:
        difference, widths = difference[1:-1], np.diff(edges)  # the outer states are breakpoints
    amounts = difference * widths
    return float(np.abs(amounts).sum()), float(np.abs(np.cumsum(amounts)).max(initial=0.0))


def check_arguments(
    law: Law,
    start: Profile,
    until: float,
    error: float | None = None,
    levels: int | None = None,
    ring: tuple[float, float] | None = None,
    loop: str = "auto",
    keyframes: int = 0,
    max_fronts: int = MAX_FRONTS,
) -> None:
    """Raise InputError for the first argument of `track` that cannot be used."""
    if not (np.isfinite(until) and until > 0.0):
        raise InputError("must be a finite time above 0", key="until", value=until, mend="give the time to run to")
    if error is not None and levels is not None:
        raise InputError("goes without levels", key="error", value=error, mend="give one of the two")
    if error is not None and not (np.isfinite(error) and error > 0.0):
        raise InputError("must be above 0", key="error", value=error, mend="give the L1 error that you can bear")
    if levels is not None and (levels != int(levels) or not 2 <= levels <= 1_000_000):
        raise InputError("must be a whole number from 2 to 1000000", key="levels", value=levels, mend="try 257")
    if loop not in LOOPS:
        raise InputError(f"must be one of {', '.join(LOOPS)}", key="loop", value=loop, mend='leave it out for "auto"')
    if keyframes < 0 or keyframes != int(keyframes):
        raise InputError("must be a whole number from 0", key="keyframes", value=keyframes, mend="try 50")
    if not max_fronts > 0:
        raise InputError("must be above 0", key="max_fronts", value=max_fronts, mend="leave it out")
    law.check_states(start.values, "values")
    pieces, edges = len(start.values), len(start.edges)
    if ring is None:
        if pieces != edges + 1:
            raise InputError(
                f"must hold {edges + 1} states for {edges} edges on the open line", key="values", value=pieces,
                mend="give one state left of the first edge and one right of each edge",
            )  # fmt: skip
        return
    a, b = float(ring[0]), float(ring[1])
    if not (np.isfinite(a) and np.isfinite(b) and a < b):
        raise InputError("must be two finite places in order", key="ring", value=ring, mend="give (from, to)")
    if pieces != max(edges, 1):
        raise InputError(
            f"must hold {max(edges, 1)} states for {edges} edges on a ring", key="values", value=pieces,
            mend="give one state right of each edge; the last runs through the seam to the first edge",
        )  # fmt: skip
    if edges and not (a <= start.edges[0] and start.edges[-1] < b):
        raise InputError(
            f"must lie within the ring from {a!r} up to {b!r}", key="edges",
            value=[float(start.edges[0]), float(start.edges[-1])], mend="move the edges or widen the ring",
        )  # fmt: skip
