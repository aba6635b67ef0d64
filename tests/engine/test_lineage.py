"""Lineage and statistics: worked by hand, conserved, and against closed forms."""

from __future__ import annotations

import numpy as np
import pytest
import wavekin as wk
from wavekin.lineage import Graph, front_at, lineage_of, strongest
from wavekin.statistics import collision_kinds, decay, series


def test_two_shocks_merge_and_share_their_jump() -> None:
    """Burgers 3 | 1 | 0 with jumps at 0 and 1: speeds 2 and 1/2 meet at t = 2/3, x = 4/3 (by hand)."""
    history = wk.track(wk.burgers(), wk.Profile([0.0, 1.0], [3.0, 1.0, 0.0]), 2.0, levels=4)
    merged = strongest(history)
    line = lineage_of(history, merged)
    assert line.ancestors.tolist() == [0, 1] and line.collisions.tolist() == [0]
    assert line.sources.tolist() == [0, 1] and line.shares.tolist() == [-2.0, -1.0]
    assert history.collisions[0]["t"] == pytest.approx(2 / 3) and history.collisions[0]["x"] == pytest.approx(4 / 3)
    assert lineage_of(history, 0).descendants.tolist() == [merged]
    assert line.lost_fan is None
    assert front_at(history, 1.0, 1.9) == merged


def test_shock_that_eats_a_fan_counts_it_negative_and_tells_the_last_bite() -> None:
    """Box on M = 4 steps: event k is at t = 2 M^2 / ((M - k)(M - k + 1)) (computed, by brute force in fractions)."""
    history = wk.track(wk.burgers(), wk.Profile([0.0, 1.0], [0.0, 1.0, 0.0]), 20.0, levels=5)
    line = lineage_of(history, strongest(history))
    assert len(line.collisions) == 3
    assert line.lost_fan == pytest.approx((16.0, 6.0))
    assert line.shares.sum() == pytest.approx(-0.25)
    assert line.sources[-1] == 4 and line.shares[-1] == pytest.approx(-0.25)
    assert line.feeders.tolist() == [1, 2, 3, 4] and line.cancelled == pytest.approx(1.5)
    kinds = collision_kinds(history)
    assert kinds == {
        "shock-shock": 0, "shock-fan": 3, "fan-fan": 0, "with contact": 0, "fan-cancel": 3, "vanished": 0, "split": 0,
    }  # fmt: skip


def test_two_equal_jumps_that_cancel_leave_nothing() -> None:
    """An N-wave of equal halves on a ring dies; every share of an ancestor of nothing is asked of no front."""
    history = wk.track(wk.burgers(), wk.Profile([0.0, 0.5], [1.0, -1.0]), 60.0, levels=3, ring=(0.0, 1.0))
    assert collision_kinds(history)["vanished"] == 1
    with pytest.raises(wk.InputError, match="no front alive"):
        strongest(history)


def test_deep_chains_of_collisions_are_walked() -> None:
    """A shock that eats 4,000 fan fronts one by one: mass is kept, so what is left is sqrt(2 / t) high."""
    history = wk.track(wk.burgers(), wk.Profile([0.0, 1.0], [0.0, 1.0, 0.0]), 1e3, levels=4001, loop="queue")
    line = lineage_of(history, strongest(history))
    height = np.abs(line.shares.sum())
    assert height == pytest.approx(np.sqrt(2.0 / 1e3), rel=1e-2)
    assert line.cancelled == pytest.approx(2.0 * (1.0 - height)) and len(line.collisions) > 3800


@pytest.mark.parametrize("law", [wk.burgers(), wk.corey(viscosity_ratio=0.5)], ids=["burgers", "corey"])
def test_shares_sum_to_the_jump_of_every_front(law: wk.Law) -> None:
    rng = np.random.default_rng(2)
    history = wk.track(
        law, wk.Profile(np.sort(rng.random(30)), rng.integers(0, 9, 30) / 8.0), 3.0, levels=17, ring=(0.0, 1.0)
    )
    graph = Graph(history)
    for row in range(0, len(history.fronts), 7):
        line = lineage_of(history, row, graph)
        assert line.shares.sum() == pytest.approx(history.fronts["right"][row] - history.fronts["left"][row], abs=1e-12)
        assert np.all(history.fronts["born_at"][line.sources] == -1)


def test_series_are_those_of_the_history() -> None:
    rng = np.random.default_rng(2)
    history = wk.track(wk.burgers(), wk.Profile(np.sort(rng.random(40)), rng.random(41)), 3.0, levels=17)
    times = np.linspace(0.0, 3.0, 13)
    counts, variation = series(history, times)
    assert counts.tolist() == [history.front_count(t) for t in times]
    assert variation == pytest.approx([history.total_variation(t) for t in times])
    kinds = collision_kinds(history)
    assert kinds["shock-shock"] + kinds["shock-fan"] + kinds["fan-fan"] + kinds["with contact"] == len(
        history.collisions
    )


def test_decay_exponents_on_line_and_ring() -> None:
    """Variation falls as t^(-1/2) for an N-wave on the line and as 1 / t on a ring (Lax 1957)."""
    box = wk.track(wk.burgers(), wk.Profile([0.0, 1.0], [0.0, 1.0, 0.0]), 2000.0, levels=2049)
    fit = decay(box)
    assert fit.exponent == pytest.approx(-0.5, abs=0.01) and fit.low < -0.5 + 0.01
    ring = wk.track(wk.burgers(), wk.Profile([0.0, 0.5], [1.0, -1.0]), 60.0, levels=2049, ring=(0.0, 1.0))
    assert decay(ring).exponent == pytest.approx(-1.0, abs=0.02)


@pytest.mark.slow
def test_a_million_fronts_can_be_walked() -> None:
    rng = np.random.default_rng(9)
    n = 50_000
    history = wk.track(wk.burgers(), wk.Profile(np.sort(rng.random(n)) * n, rng.random(n + 1)), 2000.0, levels=65)
    assert len(history.fronts) > 1_000_000
    line = lineage_of(history, strongest(history))
    assert sum(collision_kinds(history).values()) >= len(history.collisions)
    assert decay(history).exponent < 0.0
    jump = history.fronts["right"][line.front] - history.fronts["left"][line.front]
    assert len(line.ancestors) > 100 and line.shares.sum() == pytest.approx(jump, abs=1e-9)
