"""Averages, points, traces: against quadrature of the pointwise answer and closed forms."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
import wavekin as wk
from scipy.integrate import quad


@pytest.fixture(scope="module", params=["line", "ring"])
def history(request: pytest.FixtureRequest) -> wk.History:
    rng = np.random.default_rng(6)
    if request.param == "line":
        return wk.track(
            wk.corey(viscosity_ratio=0.5), wk.Profile(np.sort(rng.random(12)), rng.random(13)), 2.0, levels=33
        )
    start = wk.Profile(np.sort(rng.random(12)), rng.uniform(-0.3, 1.0, 12))
    return wk.track(wk.burgers(), start, 3.0, levels=33, ring=(0.0, 1.0))


@pytest.mark.parametrize("fans", ["joined", "steps"])
def test_averages_are_the_integral_of_the_points(history: wk.History, fans: str) -> None:
    cells = np.linspace(0.0, 1.0, 8)
    t = 0.3 * history.until
    got = history.averages(cells, [t], fans)[0]
    edges = history.at(t).edges
    for low, high, mean in zip(cells[:-1], cells[1:], got, strict=True):
        corners = [low, *edges[(edges > low) & (edges < high)], high]
        whole = sum(
            quad(lambda x: wk.points(history, x, t, fans)[1][0, 0], a, b)[0] for a, b in itertools.pairwise(corners)
        )
        assert mean == pytest.approx(whole / (high - low), abs=1e-9)


def test_joined_fans_keep_the_mass_of_the_steps(history: wk.History) -> None:
    cells = np.array([-3.0, 6.0]) if history.ring is None else np.array([0.0, 1.0])
    for t in np.linspace(0.0, history.until, 7):
        steps, joined = (history.averages(cells, t, fans)[0, 0] for fans in ("steps", "joined"))
        assert joined == pytest.approx(steps, abs=1e-13)


def test_sum_of_averages_is_the_integral(history: wk.History) -> None:
    cells = np.linspace(0.0, 1.0, 1001)
    whole = history.averages(cells[[0, -1]], [1.0])[0, 0]
    assert history.averages(cells, [1.0])[0] @ np.diff(cells) == pytest.approx(whole, abs=1e-13)


def test_trace_is_the_solution_at_its_place(history: wk.History) -> None:
    for place in (0.1, 0.5, 0.93):
        trace = wk.traces(history, place)[0]
        for t in np.random.default_rng(1).uniform(0.0, history.until, 60):
            assert trace.at(t) == history.at(t)(place)
        assert np.all(np.diff(trace.times) > 0.0)


def test_what_passes_two_places_is_what_is_stored_between(history: wk.History) -> None:
    """Conservation: the change of the amount between two places is what passed the one less the other."""
    first, second = wk.traces(history, [0.2, 0.7])
    times = np.linspace(0.0, history.until, 9)
    inside = wk.stored(history, 0.2, 0.7, times, "steps")
    assert inside - inside[0] == pytest.approx(first.passed(times) - second.passed(times), abs=1e-12)


def test_breakthrough_of_a_displacement_is_at_welges_time() -> None:
    """Front speed (1 + sqrt(1 + 1 / M)) / 2 by Welge's tangent (1952), closed form; M = 1/3 gives 3/2."""
    history = wk.track(wk.corey(viscosity_ratio=1.0 / 3.0), wk.Profile([0.0], [1.0, 0.0]), 1.0, error=1e-3)
    trace = wk.traces(history, 1.0)[0]
    assert trace.arrival(0.25) == pytest.approx(2.0 / 3.0, rel=1e-5)
    # nothing came before, then the fractional flow of the states behind the front: f(1/2) = 3/4
    assert trace.passed(2.0 / 3.0) == pytest.approx(0.0, abs=1e-4)
    assert np.isnan(trace.arrival(1.5))


def test_cell_averages_keep_within_their_bound() -> None:
    """Burgers box at t = 4: shock at sqrt(8), u = x / t behind it (Lax 1957; Whitham 1974, from memory)."""
    history = wk.track(wk.burgers(), wk.Profile([0.0, 1.0], [0.0, 1.0, 0.0]), 4.0, levels=65)
    cells = np.linspace(-1.0, 4.0, 101)
    found = wk.sample(history, cells, 4.0, "steps")
    inside = np.clip(cells, 0.0, np.sqrt(8.0)) ** 2 / 8.0
    error = np.abs(found.averages[0] - np.diff(inside) / np.diff(cells))
    assert np.all(error <= found.average_bound[0])
    assert error.max() > 0.0


def test_left_and_right_limits_differ_at_a_front_only() -> None:
    history = wk.track(wk.burgers(), wk.Profile([0.0], [1.0, 0.0]), 2.0, levels=2)
    left, right = wk.points(history, [0.5, 0.4], [1.0])
    assert left.tolist() == [[1.0, 1.0]] and right.tolist() == [[0.0, 1.0]]


@pytest.mark.parametrize("cells", [[0.0], [1.0, 0.0], [0.0, np.nan], [-0.5, 0.5]])
def test_bad_cells_are_refused(cells: list[float]) -> None:
    history = wk.track(wk.burgers(), wk.Profile([0.1, 0.5], [1.0, 0.0]), 1.0, ring=(0.0, 1.0), levels=3)
    with pytest.raises(wk.InputError, match="cells"):
        history.averages(cells, [0.5])
