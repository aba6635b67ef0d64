"""The local solve of a polygonal law: envelopes as walks from breakpoint to breakpoint.

Between a left state l and a right state r the entropy solution follows the lower convex envelope of the
polygon if u[l] < u[r], the upper concave one if u[l] > u[r] (Oleinik 1957; Dafermos 1972). Seen from l, both
are the path to r whose slopes increase strictly, so one walk serves both directions. States are indices of
breakpoints.

The functions are plain Python on purpose: the readable loop calls them as they are, on lists, and the
compiled loop compiles the same text, so that both decide alike to the last bit.
"""

from __future__ import annotations

from collections.abc import MutableSequence, Sequence
from typing import NamedTuple


class Walk(NamedTuple):
    """What the local solve looks up; lists for the readable loop, arrays for the compiled one.

    A *run* is a maximal set of neighbouring cells that lie on one line.
    """

    u: Sequence[float]
    """State of each breakpoint, shape (m,), increasing."""
    f: Sequence[float]
    """Flux of each breakpoint, shape (m,)."""
    run: Sequence[int]
    """Run of each cell, shape (m - 1,); cell i lies between breakpoints i and i + 1."""
    run_slope: Sequence[float]
    """Slope of each run."""
    run_first: Sequence[int]
    """First breakpoint of each run."""
    run_last: Sequence[int]
    """Last breakpoint of each run."""
    convex_before: Sequence[int]
    """Number of breakpoints below each breakpoint at which the polygon turns up, shape (m + 1,)."""
    concave_before: Sequence[int]
    """Number of breakpoints below each breakpoint at which the polygon turns down, shape (m + 1,)."""


def slope(walk: Walk, left: int, right: int) -> float:
    """Return the jump speed between two different states; states on one line share one speed exactly."""
    low, high = (left, right) if left < right else (right, left)
    run = walk.run[low]
    if run == walk.run[high - 1]:
        return walk.run_slope[run]
    return (walk.f[high] - walk.f[low]) / (walk.u[high] - walk.u[low])


#: How the polygon turns between two states: not against the way (one shock), with it all along (one front a
#: run), or both (the envelope has to be scanned).
SINGLE, RUNS, MIXED = 0, 1, 2


def turning(walk: Walk, left: int, right: int) -> int:
    """Return `SINGLE`, `RUNS` or `MIXED` for two different states, O(1)."""
    if left < right:
        opening = walk.convex_before[right] - walk.convex_before[left + 1]
        closing = walk.concave_before[right] - walk.concave_before[left + 1]
    else:
        opening = walk.concave_before[left] - walk.concave_before[right + 1]
        closing = walk.convex_before[left] - walk.convex_before[right + 1]
    if opening == 0:
        return SINGLE
    return RUNS if closing == 0 else MIXED


def next_run_end(walk: Walk, left: int, right: int) -> int:
    """Return the end of the run that leads from `left` towards `right`, or `right` if that comes first."""
    if left < right:
        return min(walk.run_last[walk.run[left]], right)
    return max(walk.run_first[walk.run[left - 1]], right)


def scan(walk: Walk, left: int, right: int, stack: MutableSequence[int], speeds: MutableSequence[float]) -> int:
    """Fill `stack` with the path from `left` (at the index returned) down to `right` (at 0), O(|left - right|).

    The slopes of the path increase strictly from `left` to `right`, in floating point too. `stack` and
    `speeds` have room for as many entries as there are breakpoints.
    """
    step = -1 if left < right else 1
    top = 0
    stack[0] = right
    for state in range(right + step, left + step, step):
        speed = slope(walk, state, stack[top])
        while top > 0 and speed >= speeds[top]:
            top -= 1
            speed = slope(walk, state, stack[top])
        top += 1
        stack[top] = state
        speeds[top] = speed
    return top
