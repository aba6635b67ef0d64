"""The one call: arguments, budgets, long times, damage-free extremes."""

from __future__ import annotations

import math
import tomllib
from pathlib import Path

import numpy as np
import pytest
import wavekin as wk

BOX = wk.Profile([0.0, 1.0], [0.0, 1.0, 0.0])


@pytest.mark.parametrize(
    "change, words",
    [
        ({"until": 0.0}, ["until", "above 0", "0.0"]),
        ({"until": math.inf}, ["until", "finite", "inf"]),
        ({"error": 0.0}, ["error", "above 0"]),
        ({"error": -1.0}, ["error", "above 0", "-1.0"]),
        ({"error": 1e-3, "levels": 5}, ["error", "levels", "one of the two"]),
        ({"levels": 1}, ["levels", "whole number", "1"]),
        ({"levels": 2.5}, ["levels", "whole number", "2.5"]),
        ({"loop": "fast"}, ["loop", "auto", "fast"]),
        ({"ring": (1.0, 0.0)}, ["ring", "in order"]),
        ({"ring": (0.0, 2.0)}, ["values", "2 states", "got 3"]),
        ({"keyframes": -1}, ["keyframes", "-1"]),
        ({"start": wk.Profile([0.0], [0.0, 1.5]), "law": wk.corey(viscosity_ratio=1.0)}, ["values", "1.5"]),
        ({"start": wk.Profile([0.0, 1.0], [0.0, 1.0]), "ring": (0.0, 1.0)}, ["edges", "within the ring"]),
        ({"start": wk.Profile([0.0, 1.0], [0.0, 1.0])}, ["values", "3 states", "got 2"]),
    ],
)
def test_bad_arguments_get_one_sentence(change: dict, words: list[str]) -> None:
    arguments = {"law": wk.burgers(), "start": BOX, "until": 1.0} | change
    with pytest.raises(wk.InputError) as caught:
        wk.track(**arguments)
    for word in words:
        assert word in str(caught.value), str(caught.value)


def test_unreachable_budget_says_what_is_reachable_before_it_takes_the_time() -> None:
    with pytest.raises(wk.InputError, match=r"would take about .* fronts.*within reach"):
        wk.track(wk.burgers(), BOX, 4.0, error=1e-12)


def test_too_many_fronts_stop_the_run() -> None:
    with pytest.raises(wk.InputError, match="max_fronts"):
        wk.track(wk.burgers(), BOX, 4.0, levels=5001, max_fronts=1000)


@pytest.mark.parametrize("error", [1e-1, 1e-2, 1e-3, 1e-4])
@pytest.mark.parametrize("law", [wk.burgers(), wk.corey(viscosity_ratio=0.5)], ids=["burgers", "corey"])
def test_budget_is_met_by_the_reported_bound(law: wk.Law, error: float) -> None:
    history = wk.track(law, BOX, 2.0, error=error)
    assert history.error_bound(2.0) <= error
    if history.run["budget_loops"] > 1:  # the coarse first run may be good enough already
        assert history.error_bound(2.0) > 0.4 * error
    assert history.run["budget"] == error
    assert wk.audit(history).holds


def test_budget_is_met_for_many_different_states_by_moving_them() -> None:
    rng = np.random.default_rng(8)
    start = wk.Profile(np.sort(rng.random(3000)), rng.random(3000))
    history = wk.track(wk.burgers(), start, 1.0, error=5e-3, ring=(0.0, 1.0))
    assert 0.0 < history.initial_defect < history.error_bound(1.0) <= 5e-3
    moved = np.abs(history.start.values - start.values) @ np.diff(start.edges, append=start.edges[0] + 1.0)
    assert history.initial_defect == pytest.approx(moved, rel=1e-12)


def test_adaptive_breakpoints_beat_even_ones() -> None:
    """Two boxes, one of which meets its shock early: fewer fronts than evenly spread breakpoints for the bound."""
    start = wk.Profile([0.0, 0.05, 1.0, 3.0], [0.0, 1.0, 0.0, 0.25, 0.0])
    adapted = wk.track(wk.burgers(), start, 6.0, error=2e-3)
    levels = 33
    while (even := wk.track(wk.burgers(), start, 6.0, levels=levels)).error_bound(6.0) > adapted.error_bound(6.0):
        levels = int(levels * 1.2)
    assert len(adapted.fronts) < 0.85 * len(even.fronts)


def test_bound_grows_with_time_and_starts_at_the_data_defect() -> None:
    history = wk.track(wk.burgers(), BOX, 4.0, levels=17)
    bounds = [history.error_bound(t) for t in np.linspace(0.0, 4.0, 9)]
    assert bounds[0] == history.initial_defect == 0.0
    assert np.all(np.diff(bounds) >= 0.0)


def test_a_million_time_units_on_a_ring_lose_no_digit_that_matters() -> None:
    rng = np.random.default_rng(11)
    start = wk.Profile(np.arange(64) / 64.0, rng.integers(0, 33, 64) / 32.0)
    history = wk.track(wk.burgers(), start, 1e6, levels=33, ring=(0.0, 1.0))
    assert abs(history.mass(1e6) - history.mass(0.0)) <= 1e-12 * history.mass(0.0)
    found = wk.audit(history)
    assert found.holds, str(found)


def test_mirror_image_gives_the_mirrored_answer() -> None:
    """Burgers is unchanged by x -> -x, u -> -u; a symmetric start must stay symmetric."""
    edges = np.array([-3.0, -2.0, -1.0, 1.0, 2.0, 3.0])
    values = np.array([0.5, -1.0, 2.0, 0.0, -2.0, 1.0, -0.5])
    history = wk.track(wk.burgers(), wk.Profile(edges, values), 9.0, levels=13)
    for t in (0.5, 1.0, 3.0, 9.0):
        profile = history.at(t)
        assert np.allclose(profile.edges, -profile.edges[::-1], atol=1e-13)
        assert np.array_equal(profile.values, -profile.values[::-1])


def test_splitting_a_piece_changes_nothing() -> None:
    law = wk.corey(viscosity_ratio=0.5)
    once = wk.track(law, BOX, 2.0, levels=33)
    twice = wk.track(law, wk.Profile([-5.0, 0.0, 0.5, 1.0, 7.0], [0.0, 0.0, 1.0, 1.0, 0.0, 0.0]), 2.0, levels=33)
    assert once == twice


def test_constant_data_and_whole_ring_meetings_end_quietly() -> None:
    still = wk.track(wk.burgers(), wk.Profile([], [0.3]), 1.0)
    assert len(still.fronts) == 0 and still.at(1.0).values.tolist() == [0.3]
    assert wk.audit(still).holds
    ring = wk.track(wk.burgers(), wk.Profile([0.0], [0.3]), 1.0, ring=(0.0, 1.0))
    assert ring.at(0.5).values.tolist() == [0.3] and ring.mass(1.0) == pytest.approx(0.3)
    two = wk.track(wk.burgers(), wk.Profile([0.0, 0.5], [1.0, 0.0]), 10.0, levels=2, ring=(0.0, 1.0))
    assert wk.audit(two).holds


def test_memory_is_within_150_bytes_a_front() -> None:
    rng = np.random.default_rng(5)
    start = wk.Profile(np.sort(rng.random(2000)), rng.random(2001))
    history = wk.track(wk.burgers(), start, 0.1, levels=65)
    held = history.memory + history.keyframe_ids.nbytes + history.keyframe_starts.nbytes
    assert held <= 150 * len(history.fronts)


def test_version_is_the_same_everywhere() -> None:
    project = tomllib.loads((Path(__file__).parents[2] / "pyproject.toml").read_text())
    assert project["project"]["version"] == wk.__version__
