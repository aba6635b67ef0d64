"""How fronts move and meet: the few lines of arithmetic that both loops share.

Plain Python on purpose, like `wavekin.envelope`: the compiled loop compiles the same text.
"""

from __future__ import annotations

import math

#: Two places closer than this many ulp of their own size, and of the way the fastest front makes in the time
#: so far, are one place. The rounding of a birth point, a path and a meeting time is half an ulp each and grows
#: through earlier collisions; merging within it moves mass by round-off only.
SAME_PLACE_ULPS = 64.0
EPSILON = 2.0**-52


def same_place(x: float, t: float, top_speed: float) -> float:
    """Return the distance within which two fronts at place x and time t are at one point."""
    return SAME_PLACE_ULPS * EPSILON * (abs(x) + top_speed * abs(t))


def position(birth_t: float, birth_x: float, speed: float, t: float) -> float:
    """Return the place at time t of a front, always from its birth point."""
    return birth_x + speed * (t - birth_t)


def meeting_time(
    left_t: float, left_x: float, left_speed: float, right_t: float, right_x: float, right_speed: float, now: float
) -> float:
    """Return the time, not before `now`, at which two neighbours meet; infinity where they never do."""
    closing = left_speed - right_speed
    if closing <= 0.0:
        return math.inf
    start = max(left_t, right_t)
    gap = position(right_t, right_x, right_speed, start) - position(left_t, left_x, left_speed, start)
    if gap <= 0.0:
        return max(start, now)
    return max(start + gap / closing, now)
