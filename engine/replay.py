"""A second pass over a finished history that rebuilds which fronts are neighbours, apart from either loop."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    from wavekin.history import History

#: Histories with more fronts than this are replayed by the compiled text of `replay_gaps`.
COMPILED_FROM = 20_000


class Replay(NamedTuple):
    """What a replay found."""

    narrowest: float
    """Least width of any gap between neighbours at its beginning or end (unit of x); gaps are linear in time."""
    widest_meeting: float
    """Largest distance between neighbours that are recorded as meeting in one point (unit of x)."""
    broken: int
    """Collisions whose fronts were not neighbours, or neighbours that do not share a state."""


def replay(history: History) -> Replay:
    """Rebuild all neighbourhoods from the records alone and measure every gap where it begins and ends.

    Fronts move straight, so a gap that is not negative at both ends was never negative between: where
    `narrowest` is zero to rounding, no front passed another at any time.
    """
    fronts, collisions = history.fronts, history.collisions
    order = np.argsort(fronts["ended_at"], kind="stable")
    first_ended = (
        order[np.searchsorted(fronts["ended_at"][order], np.arange(len(collisions)))] if len(fronts) else order
    )
    first_born = np.searchsorted(fronts["born_at"], np.arange(len(collisions)))
    length = 0.0 if history.ring is None else history.ring[1] - history.ring[0]
    initial = int(np.searchsorted(fronts["born_at"], 0))
    scratch = (
        np.full(len(fronts), -1, dtype=np.int64), np.full(len(fronts), -1, dtype=np.int64), np.zeros(len(fronts)),
    )  # fmt: skip
    run: Any = replay_gaps
    if len(fronts) > COMPILED_FROM:
        from numba import njit
        from numba.extending import register_jitable
        from wavekin.compilation import use_own_cache

        use_own_cache()
        register_jitable(gap_at)
        run = njit(cache=True)(replay_gaps)
    return Replay(*run(fronts, collisions, first_ended, first_born, initial, length, history.until, *scratch))


def gap_at(
    birth_t: NDArray[np.float64],
    birth_x: NDArray[np.float64],
    speed: NDArray[np.float64],
    left: int,
    right: int,
    t: float,
    length: float,
    width: float,
    begun: float,
) -> float:
    """Return the gap at time t between two neighbours from their birth points, with a ring's laps by its growth."""
    gap = birth_x[right] + speed[right] * (t - birth_t[right]) - (birth_x[left] + speed[left] * (t - birth_t[left]))
    if length > 0.0:
        expected = width + (speed[right] - speed[left]) * (t - begun)
        gap += np.round((expected - gap) / length) * length
    return gap


def replay_gaps(
    fronts: NDArray[np.void],
    collisions: NDArray[np.void],
    first_ended: NDArray[np.int64],
    first_born: NDArray[np.int64],
    initial: int,
    length: float,
    until: float,
    before: NDArray[np.int64],
    after: NDArray[np.int64],
    width: NDArray[np.float64],
) -> tuple[float, float, int]:
    """Return the three figures of `Replay`.

    `width` holds for each front the gap to its right neighbour where the gap began, `length` the ring's or 0.
    """
    narrowest, widest, broken = 0.0, 0.0, 0
    birth_t, birth_x, speed = fronts["birth_t"], fronts["birth_x"], fronts["speed"]
    left, right, ended_at = fronts["left"], fronts["right"], fronts["ended_at"]
    collision_t, fronts_in, fronts_out = collisions["t"], collisions["fronts_in"], collisions["fronts_out"]
    begun = np.zeros(len(fronts))
    for i in range(initial):
        if i + 1 < initial:
            after[i], before[i + 1] = i + 1, i
            width[i] = birth_x[i + 1] - birth_x[i]
            broken += right[i] != left[i + 1]
    if length > 0.0 and initial > 0:
        after[initial - 1], before[0] = 0, initial - 1
        width[initial - 1] = birth_x[0] - birth_x[initial - 1] + length
        broken += right[initial - 1] != left[0]
    for c in range(len(collisions)):
        t = collision_t[c]
        first = first_ended[c]
        members = 1
        while before[first] >= 0 and ended_at[before[first]] == c and members <= fronts_in[c]:
            first = before[first]
            members += 1
        if members > fronts_in[c]:  # a whole ring met: its row begins behind the gap that is a lap wide
            for _ in range(fronts_in[c]):
                i = before[first]
                if i < 0 or gap_at(birth_t, birth_x, speed, i, first, t, length, width[i], begun[i]) > 0.5 * length:
                    break
                first = i
        last = first
        members = 1
        while after[last] >= 0 and ended_at[after[last]] == c and after[last] != first:
            gap = gap_at(birth_t, birth_x, speed, last, after[last], t, length, width[last], begun[last])
            narrowest, widest = min(narrowest, gap), max(widest, abs(gap))
            last = after[last]
            members += 1
        broken += members != fronts_in[c]
        outer_left, outer_right = before[first], after[last]
        if outer_left == last:
            outer_left = outer_right = -1
        left_width = right_width = 0.0
        if outer_left >= 0:
            i = outer_left
            left_width = gap_at(birth_t, birth_x, speed, i, first, t, length, width[i], begun[i])
        if outer_right >= 0:
            right_width = gap_at(birth_t, birth_x, speed, last, outer_right, t, length, width[last], begun[last])
        narrowest = min(narrowest, left_width, right_width)
        born = fronts_out[c]
        head = first_born[c]
        tail = head + born - 1
        for i in range(head, tail):
            after[i], before[i + 1] = i + 1, i
            width[i], begun[i] = 0.0, t
            broken += right[i] != left[i + 1]
        if born == 0:
            head, tail = outer_right, outer_left
            left_width += right_width
        if outer_left >= 0 and head >= 0:
            after[outer_left], before[head] = head, outer_left
            width[outer_left], begun[outer_left] = left_width, t
            broken += right[outer_left] != left[head]
        if born > 0 and outer_right >= 0:
            after[tail], before[outer_right] = outer_right, tail
            width[tail], begun[tail] = right_width, t
            broken += right[tail] != left[outer_right]
        if born == 0 and outer_left < 0 and outer_right >= 0:
            before[outer_right] = -1
        if born == 0 and outer_right < 0 and outer_left >= 0:
            after[outer_left] = -1
    for i in range(len(fronts)):
        if ended_at[i] < 0 and after[i] >= 0:
            gap = gap_at(birth_t, birth_x, speed, i, after[i], until, length, width[i], begun[i])
            narrowest = min(narrowest, gap)
    return narrowest, widest, broken
