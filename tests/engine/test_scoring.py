"""Scores of candidates that were spoilt on purpose, against what can be said by hand."""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
import pytest
import wavekin as wk
from wavekin.scoring import Score, orders, verdicts

sys.path.insert(0, str(Path(__file__).parents[1] / "benchmarks"))

from finite_volume import BURGERS, solve

UNTIL = 1.0
CELLS = np.linspace(-1.0, 3.0, 401)


@pytest.fixture(scope="module")
def history() -> wk.History:
    """A single shock 1 | 0 from x = 0: at t = 1 it stands at 1/2 (Rankine-Hugoniot); the bound is 0."""
    return wk.track(wk.burgers(), wk.Profile([0.0], [1.0, 0.0]), UNTIL, levels=2)


def judged(history: wk.History, change: np.ndarray) -> Score:
    return wk.score(history, CELLS, UNTIL, history.averages(CELLS, UNTIL)[0] + change)


def test_the_reference_itself_is_without_fault(history: wk.History) -> None:
    found = judged(history, np.zeros(400))
    assert found.l1.value == found.l2.value == found.wasserstein.value == found.away.value == 0.0
    assert found.fronts[0].verdict == "in place" and not found.entropy_violated
    assert verdicts([found]) == ["no fault found beyond the errors listed"]


@pytest.mark.parametrize("cells", [1, -1, 3])
def test_shift_is_told_as_a_position_error(history: wk.History, cells: int) -> None:
    """Shift by k cells of width 0.01: L1 = 0.01 |k|, displacement 0.01 k, Wasserstein = sum of its cumulative steps."""
    found = wk.score(history, CELLS, UNTIL, history.averages(CELLS - 0.01 * cells, UNTIL)[0])
    assert found.l1.value == pytest.approx(0.01 * abs(cells))
    assert found.fronts[0].displacement.value == pytest.approx(0.01 * cells)
    assert found.fronts[0].verdict == "out of place"
    assert found.mass_drift.value == pytest.approx(0.01 * cells)
    assert "out of place" in verdicts([found])[0] and "smeared" not in " ".join(verdicts([found]))


def test_smearing_is_told_as_smearing(history: wk.History) -> None:
    """A linear ramp over 2 w in place of the step: L1 = w / 2, no displacement, no drift (by hand)."""
    w = 0.08
    middles = 0.5 * (CELLS[1:] + CELLS[:-1])
    ramp = np.clip(0.5 - (middles - 0.5) / (2 * w), 0.0, 1.0)
    found = wk.score(history, CELLS, UNTIL, ramp)
    assert found.l1.value == pytest.approx(w / 2, rel=0.01)
    assert found.fronts[0].displacement.value == pytest.approx(0.0, abs=1e-12)
    assert found.fronts[0].verdict == "smeared"
    assert found.mass_drift.value == pytest.approx(0.0, abs=1e-12)


def test_scaling_shows_as_drift_and_overshoot(history: wk.History) -> None:
    """Scaled by 1.1: L1 = 0.1 x 1.5 over the window left of the shock, overshoot 0.1 (by hand)."""
    found = judged(history, 0.1 * history.averages(CELLS, UNTIL)[0])
    assert found.l1.value == pytest.approx(0.15) and found.mass_drift.value == pytest.approx(0.15)
    assert found.overshoot == pytest.approx(0.1) and found.undershoot == 0.0
    assert found.away.value == pytest.approx(0.1)
    assert found.variation_excess == pytest.approx(0.1)


def by_cells(scheme: str, start: wk.Profile, count: int, t: float) -> tuple[np.ndarray, np.ndarray]:
    edges = np.linspace(-2.0, 2.0, count + 1)
    exact = wk.track(wk.burgers(), start, 1e-6, levels=2).averages(edges, 0.0)[0]
    return edges, np.asarray(solve(BURGERS, exact, 4.0 / count, t, scheme=scheme))


def test_entropy_violating_scheme_is_caught_and_named() -> None:
    """An expansion shock -1 | 1 kept by an upwind flux without entropy fix; the true solution is a fan."""
    start = wk.Profile([0.0], [-1.0, 1.0])
    history = wk.track(wk.burgers(), start, 1.0, error=2e-3)
    wrong = [
        wk.score(history, edges, 1.0, u) for edges, u in (by_cells("unfixed", start, n, 1.0) for n in (50, 100, 200))
    ]
    assert "converges to a solution that violates the entropy condition" in verdicts(wrong)
    right = [
        wk.score(history, edges, 1.0, u) for edges, u in (by_cells("godunov", start, n, 1.0) for n in (50, 100, 200))
    ]
    assert not any("entropy" in said for said in verdicts(right))


def test_orders_are_intervals_and_say_when_they_cannot_be_decided() -> None:
    start = wk.Profile([-1.0, 0.0], [0.0, 1.0, 0.0])
    fine = wk.track(wk.burgers(), start, 1.0, error=1e-4)
    coarse = wk.track(wk.burgers(), start, 1.0, error=5e-2)
    candidates = [by_cells("godunov", start, n, 1.0) for n in (50, 100, 200)]
    decided = orders([wk.score(fine, edges, 1.0, u) for edges, u in candidates])
    assert all(order.decided and order.order.low <= order.order.value <= order.order.high for order in decided)
    assert 0.5 < decided[-1].order.value < 1.1
    vague = orders([wk.score(coarse, edges, 1.0, u) for edges, u in candidates])
    assert not vague[-1].decided and "re-run it with error = " in vague[-1].advice


def test_interval_holds_the_true_error() -> None:
    """Godunov on the Burgers box at t = 4: true averages in closed form (Lax 1957; Whitham 1974, from memory)."""
    start = wk.Profile([0.0, 1.0], [0.0, 1.0, 0.0])
    history = wk.track(wk.burgers(), start, 4.0, error=5e-2)
    cells = np.linspace(-1.0, 4.0, 201)
    candidate = np.asarray(solve(BURGERS, history.averages(cells, 0.0)[0], 5.0 / 200, 4.0))
    true = np.diff(np.clip(cells, 0.0, np.sqrt(8.0)) ** 2 / 8.0) / np.diff(cells)
    error = np.abs(candidate - true) @ np.diff(cells)
    found = wk.score(history, cells, 4.0, candidate)
    assert found.l1.low <= error <= found.l1.high


@pytest.mark.parametrize("values", [np.zeros(3), np.full(400, np.nan)])
def test_bad_candidates_are_refused(history: wk.History, values: np.ndarray) -> None:
    with pytest.raises(wk.InputError, match="values"):
        wk.score(history, CELLS, UNTIL, values)
