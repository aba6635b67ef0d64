"""The judgement of somebody else's solution, with the proven bound of the reference carried along.

The reference is the history with stepped fans, to which the bounds apply. If b bounds the reference's error in
some measure, a measured difference e means a true error in [e - b, e + b].
"""

from __future__ import annotations

from dataclasses import dataclass, field
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from wavekin.errors import InputError
from wavekin.probing import traces
from wavekin.records import FAN
from wavekin.sampling import Snapshot, averages

if TYPE_CHECKING:
    from wavekin.history import History

#: Fronts stronger than this share of the data's span are matched one by one.
MAJOR = 0.1
#: Cells on each side of a major front that belong to it.
REACH = 12
#: Cells on each side of a front that do not count as away from fronts.
NEAR = 3
#: Constants of the entropies |u - k|, as shares of the data's span.
ENTROPY_SHARES = np.linspace(0.1, 0.9, 9)
#: An entropy defect counts from this many cells times the data's span on: a front displaced by a cell may show one.
ENTROPY_CELLS = 4.0
#: A front displaced by more than this part of a cell, and not smeared over more than `SHARP` cells, is out of place.
DISPLACED, SHARP = 0.5, 2.0
#: An order is stated where its interval is narrower than this.
DECIDED = 0.5


@dataclass(frozen=True)
class Interval:
    """A measured value and the interval in which the true one lies."""

    value: float
    low: float
    high: float

    @staticmethod
    def around(value: float, bound: float, floor: float = 0.0) -> Interval:
        """Return [value - bound, value + bound], cut off below at `floor`."""
        return Interval(value, max(value - bound, floor), value + bound)

    def __str__(self) -> str:
        return f"{self.value:.4g} [{self.low:.4g}, {self.high:.4g}]"


@dataclass(frozen=True)
class FrontScore:
    """How a candidate renders one major front.

    Attributes
    ----------
    x, left, right : float
        Place and states of the front.
    displacement : Interval
        How far right of it the candidate's front stands, by equal areas (unit of x).
    smeared : float
        Width over which the candidate passes from one state to the other, in cells; below 1 for a sharp one.
    verdict : str
        ``in place``, ``out of place`` or ``smeared``.
    """

    x: float
    left: float
    right: float
    displacement: Interval
    smeared: float
    verdict: str


@dataclass(frozen=True)
class Score:
    """The judgement of one candidate at one time.

    Attributes
    ----------
    t, width : float
        Time and mean width of its cells.
    l1, l2, wasserstein : Interval
        Errors of the cell averages; the last is the L1 distance of the cumulative integrals from the left end.
    away : Interval
        Largest error at least three cells away from every jump.
    mass_drift : Interval
        Amount in the window less that of the reference.
    overshoot, undershoot : float
        How far the candidate passes the range of the data; certain, by the maximum principle.
    variation_excess : float
        Variation above that of the data; certain where positive.
    entropy_defect : float
        Largest production of an entropy |u - k| since time 0 (Kruzkov 1970); 0 or less for the true solution.
    entropy_violated : bool
        Whether that is more than misplaced fronts can explain.
    fronts : tuple of FrontScore
    """

    t: float
    width: float
    l1: Interval
    l2: Interval
    wasserstein: Interval
    away: Interval
    mass_drift: Interval
    overshoot: float
    undershoot: float
    variation_excess: float
    entropy_defect: float
    entropy_violated: bool
    fronts: tuple[FrontScore, ...] = field(default=())


def score(history: History, cells: NDArray[np.float64], t: float, values: NDArray[np.float64]) -> Score:
    """Judge cell averages of another code at one time.

    Parameters
    ----------
    history : History
        The reference.
    cells : ndarray, shape (n + 1,)
        Edges of the candidate's cells.
    t : float
    values : ndarray, shape (n,)
        Its averages.

    Raises
    ------
    InputError
        For lengths that do not fit, values that are not finite, a time outside the run or cells outside a ring.
    """
    cells, values = np.asarray(cells, dtype=float), np.asarray(values, dtype=float)
    if values.shape != (len(cells) - 1,):
        raise InputError(
            f"must hold {len(cells) - 1} values", key="values", value=values.shape, mend="one for each cell"
        )
    bad = np.flatnonzero(~np.isfinite(values))
    if bad.size:
        raise InputError(
            "must be finite", key=f"values[{bad[0]}]", value=float(values[bad[0]]), mend="mend the candidate"
        )
    reference = averages(history, cells, t, "steps")[0]
    widths = np.diff(cells)
    difference = values - reference
    l1_bound = history.error_bound(t)
    twice = min(2.0 * history.cumulative_bound(t), l1_bound)  # of the amount in any one cell
    l1_bound = min(l1_bound, twice * len(values))
    each = twice / widths
    cumulative = np.cumsum(difference * widths)
    data = history.start.values
    defect = _entropy_defect(history, cells, t, values)
    span = float(np.ptp(data))
    fronts = _fronts(history, cells, t, values, difference, twice)
    far = _away(history, cells, t)
    return Score(
        t=float(t),
        width=float(widths.mean()),
        l1=Interval.around(float(np.abs(difference) @ widths), l1_bound),
        l2=Interval.around(float(np.sqrt(difference**2 @ widths)), float(np.sqrt(each.max() * l1_bound))),
        wasserstein=Interval.around(float(np.abs(cumulative) @ widths), twice * float(cells[-1] - cells[0])),
        away=Interval.around(float(np.abs(difference[far]).max(initial=0.0)), float(each[far].max(initial=0.0))),
        mass_drift=Interval.around(float(cumulative[-1]), twice, -np.inf),
        overshoot=max(float(values.max() - data.max()), 0.0),
        undershoot=max(float(data.min() - values.min()), 0.0),
        variation_excess=float(np.abs(np.diff(values)).sum() - _data_variation(history)),
        entropy_defect=defect,
        entropy_violated=defect > ENTROPY_CELLS * float(widths.max()) * span,
        fronts=fronts,
    )


def _data_variation(history: History) -> float:
    data = history.start.values
    closing = abs(float(data[0] - data[-1])) if history.ring is not None else 0.0
    return float(np.abs(np.diff(data)).sum()) + closing


def _away(history: History, cells: NDArray[np.float64], t: float) -> NDArray[np.bool_]:
    """Return which cells are at least `NEAR` cells from every front that is no part of a fan."""
    rows = history.alive(t)
    jumps = history.positions(rows[history.fronts["kind"][rows] != FAN], t)
    far = np.ones(len(cells) - 1, dtype=bool)
    for at in np.searchsorted(cells, jumps) - 1:
        far[max(at - NEAR, 0) : max(at + NEAR + 1, 0)] = False
    return far


def _fronts(
    history: History,
    cells: NDArray[np.float64],
    t: float,
    values: NDArray[np.float64],
    difference: NDArray[np.float64],
    twice: float,
) -> tuple[FrontScore, ...]:
    """Return the scores of the major fronts in the window."""
    rows = history.alive(t)
    fronts = history.fronts[rows]
    strength = np.abs(fronts["right"] - fronts["left"])
    major = (strength > MAJOR * np.ptp(history.start.values)) & (fronts["kind"] != FAN)
    places = history.positions(rows, t)[major]
    widths = np.diff(cells)
    found = []
    for k, (x, front) in enumerate(zip(places, fronts[major], strict=True)):
        at = int(np.searchsorted(cells, x, side="right")) - 1
        if not 0 <= at < len(values):
            continue
        low, high = max(at - REACH, 0), min(at + REACH + 1, len(values))
        if k > 0:
            low = max(low, int(np.searchsorted(cells, 0.5 * (x + places[k - 1]))))
        if k + 1 < len(places):
            high = min(high, max(int(np.searchsorted(cells, 0.5 * (x + places[k + 1]))) - 1, at + 1))
        jump = float(front["left"] - front["right"])
        part = slice(low, high)
        shift = float(difference[part] @ widths[part]) / jump
        passed = np.clip((values[part] - front["right"]) / jump, 0.0, 1.0)
        smeared = float(4.0 * (passed * (1.0 - passed)).sum())
        step = float(widths[at])
        verdict = "in place"
        if smeared > SHARP:
            verdict = "smeared"
        elif abs(shift) > DISPLACED * step + twice / abs(jump):
            verdict = "out of place"
        displacement = Interval.around(shift, twice / abs(jump), -np.inf)
        found.append(FrontScore(float(x), float(front["left"]), float(front["right"]), displacement, smeared, verdict))
    return tuple(found)


def _entropy_defect(history: History, cells: NDArray[np.float64], t: float, values: NDArray[np.float64]) -> float:
    """Return the largest production of |u - k| in the window from time 0 to t.

    The entropy at t is taken from the averages, which only lowers it (Jensen), that at 0 and what crosses the
    window's ends from the reference, exactly.
    """
    low, high = float(history.start.values.min()), float(history.start.values.max())
    widths, ends = np.diff(cells), traces(history, cells[[0, -1]])
    start = Snapshot(history, 0.0, "steps")
    corners = np.concatenate([cells[:1], start.edges[(start.edges > cells[0]) & (start.edges < cells[-1])], cells[-1:]])
    states = start.value(0.5 * (corners[1:] + corners[:-1]), "right")
    worst = -np.inf
    for k in low + (high - low) * ENTROPY_SHARES:
        level = float(np.interp(k, history.levels, history.level_fluxes))
        crossed = []
        for trace in ends:
            flux = np.sign(trace.states - k) * (trace.fluxes - level)
            until = np.minimum(np.append(trace.times[1:], trace.until), t)
            crossed.append(float(flux @ np.maximum(until - trace.times, 0.0)))
        grown = float(np.abs(values - k) @ widths) - float(np.abs(states - k) @ np.diff(corners))
        worst = max(worst, grown + crossed[1] - crossed[0])
    return worst


@dataclass(frozen=True)
class Order:
    """An observed order of accuracy between two widths, or fitted over all; `advice` where it is not decided."""

    coarse: float
    fine: float
    order: Interval
    decided: bool
    advice: str


def orders(scores: list[Score]) -> list[Order]:
    """Return the observed L1 orders of candidates of several widths: pairwise, then fitted over all.

    With errors in [e - b, e + b] the order lies between the logarithms of the extreme ratios. Where that interval
    is wider than a half, the advice names the error budget that would decide it.
    """
    ranked = sorted(scores, key=lambda one: -one.width)
    groups = [[a, b] for a, b in pairwise(ranked) if a.width > b.width]
    if len(groups) > 1:
        groups.append(ranked)
    return [_order(group) for group in groups]


def _order(scores: list[Score]) -> Order:
    """Return the slope of log error over log width by least squares; for two scores the line through them.

    The slope is a weighted sum of the logarithms, so its extremes take each error at the end that its sign asks for.
    """
    widths = np.log([score.width for score in scores])
    weights = (widths - widths.mean()) / np.sum((widths - widths.mean()) ** 2)
    errors = np.array([[score.l1.low, score.l1.value, score.l1.high] for score in scores])
    with np.errstate(divide="ignore"):
        logs = np.log(errors)
    low = float(np.sum(weights * np.where(weights > 0.0, logs[:, 0], logs[:, 2])))
    high = float(np.sum(weights * np.where(weights > 0.0, logs[:, 2], logs[:, 0])))
    value = float(weights @ logs[:, 1]) if np.all(errors[:, 1] > 0.0) else float("nan")
    decided = high - low <= DECIDED
    needed = 0.1 * float(widths[0] - widths[-1]) * scores[-1].l1.value
    advice = "" if decided else f"cannot be decided with this reference: re-run it with error = {needed:.1g}"
    return Order(scores[0].width, scores[-1].width, Interval(value, low, high), decided, advice)


def verdicts(scores: list[Score]) -> list[str]:
    """Return what the scores of one code, coarse to fine, amount to, in sentences."""
    ranked = sorted(scores, key=lambda one: -one.width)
    said = []
    if all(one.entropy_violated for one in ranked):
        trend = orders(ranked)
        stuck = len(ranked) > 1 and trend[-1].order.high < DECIDED
        said.append(
            "converges to a solution that violates the entropy condition"
            if stuck
            else "violates the entropy condition: some jump should be a fan"
        )
    finest = ranked[-1]
    displaced = [front for front in finest.fronts if front.verdict == "out of place"]
    if displaced:
        worst = max(displaced, key=lambda front: abs(front.displacement.value))
        side = "right" if worst.displacement.value > 0.0 else "left"
        cells = abs(worst.displacement.value) / finest.width
        said.append(
            f"fronts are sharp but out of place: the one at {worst.x:.6g} stands {cells:.2g} cells too far {side}"
        )
    smeared = [front for front in finest.fronts if front.verdict == "smeared"]
    if smeared:
        said.append(f"{len(smeared)} of {len(finest.fronts)} major fronts are smeared over more than {SHARP:g} cells")
    if max(finest.overshoot, finest.undershoot) > 1e-12 * max(1.0, abs(finest.overshoot)):
        said.append(f"passes the range of the data by {max(finest.overshoot, finest.undershoot):.3g}")
    if finest.mass_drift.low > 0.0 or finest.mass_drift.high < 0.0:
        said.append(f"mass differs by {finest.mass_drift.value:.3g}, more than the reference can")
    return said or ["no fault found beyond the errors listed"]
