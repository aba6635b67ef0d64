"""The audit passes good histories and catches every kind of damage."""

from __future__ import annotations

import copy
from collections.abc import Callable

import numpy as np
import pytest
import wavekin as wk


@pytest.fixture(scope="module")
def history() -> wk.History:
    rng = np.random.default_rng(3)
    start = wk.Profile(np.sort(rng.random(40)), rng.random(40))
    return wk.track(wk.corey(viscosity_ratio=0.5), start, 3.0, levels=33, ring=(0.0, 1.0))


def test_good_history_holds(history: wk.History) -> None:
    assert wk.audit(history).holds, str(wk.audit(history))


def damaged(history: wk.History, damage: Callable[[wk.History], None]) -> wk.History:
    broken = copy.copy(history)
    broken.fronts, broken.collisions = history.fronts.copy(), history.collisions.copy()
    damage(broken)
    return broken


def speed(h: wk.History) -> None:
    h.fronts["speed"][5] *= 1.0 + 1e-9


def place(h: wk.History) -> None:
    h.collisions["x"][10] += 1e-9


def lost_front(h: wk.History) -> None:
    row = int(np.flatnonzero(h.fronts["ended_at"] < 0)[0])
    h.fronts["ended_at"][row], h.fronts["death_t"][row], h.fronts["death_x"][row] = 0, 0.0, 0.0


def state(h: wk.History) -> None:
    row = len(h.fronts) // 2
    h.fronts["right"][row] = h.levels[(np.searchsorted(h.levels, h.fronts["right"][row]) + 1) % len(h.levels)]


def expansion_shock(h: wk.History) -> None:
    h.fronts["departure"] = 0.0


def missed_collision(h: wk.History) -> None:
    """Two fronts pass through each other: the last collision did not happen."""
    last = len(h.collisions) - 1
    ended, born = h.fronts["ended_at"] == last, h.fronts["born_at"] == last
    h.fronts["ended_at"][ended], h.fronts["death_t"][ended], h.fronts["death_x"][ended] = -1, np.inf, np.nan
    h.fronts, h.collisions = h.fronts[~born], h.collisions[:-1]
    later = h.fronts["ended_at"] > last
    assert not later.any()


@pytest.mark.parametrize("damage", [speed, place, lost_front, state, expansion_shock, missed_collision])
def test_damage_is_found(history: wk.History, damage: Callable[[wk.History], None]) -> None:
    broken = damaged(history, damage)
    broken.keyframe_times = np.zeros(0)
    if damage is missed_collision:
        kept = wk.audit(_without_keyframes(broken))
        assert not kept.holds
        assert {check.name for check in kept.checks if not check.holds} & {"order", "neighbours"}
        return
    assert not wk.audit(broken).holds


def _without_keyframes(history: wk.History) -> wk.History:
    history.keyframe_starts, history.keyframe_ids = np.zeros(1, np.int64), np.zeros(0, np.int32)
    return history


def test_a_whole_ring_may_meet_in_one_point() -> None:
    """A fan of two fronts and the shock behind it meet at once, a lap apart the other way round."""
    start = wk.Profile([0.0, 8.0], [0.0, 1.0])
    history = wk.track(wk.cubic(), start, 20.0, ring=(0.0, 16.0), levels=3)
    assert history.collisions["fronts_in"].tolist() == [3]
    assert wk.audit(history).holds
