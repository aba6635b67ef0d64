"""Exact front tracker in fractions: every quantity is a rational number and nothing is ever rounded.

Written from the definition of the entropy solution of a polygonal law (Dafermos 1972; Holden, Holden and
Hoegh-Krohn 1988) and by brute force: at each step the meeting times of all neighbours are worked out anew,
and all points that meet at the earliest time are resolved, each by the hull between its outer states.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import pairwise
from typing import NamedTuple

Point = tuple[Fraction, Fraction]


class Collision(NamedTuple):
    """One meeting of fronts: when, where, how many came and went, and the states outside of them."""

    t: Fraction
    x: Fraction
    fronts_in: int
    fronts_out: int
    left: Fraction
    right: Fraction


class Front(NamedTuple):
    """A jump that moves from (t, x) at constant speed; on a ring x is not wrapped."""

    t: Fraction
    x: Fraction
    speed: Fraction
    left: Fraction
    right: Fraction

    def at(self, t: Fraction) -> Fraction:
        """Return the place at time t."""
        return self.x + self.speed * (t - self.t)


@dataclass(frozen=True)
class Outcome:
    """All collisions up to the end, ordered by time and then place, and the fronts at the end by place."""

    collisions: list[Collision]
    fronts: list[Front]
    positions: list[Fraction]
    values: list[Fraction]
    """States at the end: one more than positions on the line; right of each position on a ring."""


def hull(polygon: Sequence[Point], left: Fraction, right: Fraction) -> list[Point]:
    """Return the corners of the lower hull from left up to right, or the upper one from left down to right.

    Points on an edge of the hull are not corners: a straight edge is one front.
    """
    lower = left < right
    low, high = min(left, right), max(left, right)
    corners: list[Point] = []
    for u, f in (point for point in polygon if low <= point[0] <= high):
        while len(corners) >= 2:
            (u0, f0), (u1, f1) = corners[-2], corners[-1]
            turn = (u1 - u0) * (f - f0) - (f1 - f0) * (u - u0)  # above 0: a left turn, the corner is convex
            if (turn > 0) if lower else (turn < 0):
                break
            corners.pop()
        corners.append((u, f))
    return corners if lower else corners[::-1]


def resolve(polygon: Sequence[Point], t: Fraction, x: Fraction, left: Fraction, right: Fraction) -> list[Front]:
    """Return the fronts of the jump from left to right at (t, x), slowest first; none if equal."""
    if left == right:
        return []
    corners = hull(polygon, left, right)
    return [Front(t, x, (f1 - f0) / (u1 - u0), u0, u1) for (u0, f0), (u1, f1) in pairwise(corners)]


def track(
    polygon: Sequence[Point],
    edges: Sequence[Fraction],
    values: Sequence[Fraction],
    until: Fraction,
    ring: tuple[Fraction, Fraction] | None = None,
) -> Outcome:
    """Follow all fronts of a polygonal law up to and including the time `until`.

    Parameters
    ----------
    polygon : sequence of (u, f)
        Breakpoints by increasing u. Every value of the data is one of them.
    edges, values : sequences of Fraction
        Data: one value more than edges on the line; the value right of each edge on a ring.
    until : Fraction
        Last time.
    ring : (Fraction, Fraction), optional
        Ends of the ring; collisions are reported in [a, b).
    """
    assert {*values} <= {u for u, _ in polygon}, "the data must stand on breakpoints"
    around = values if ring is None else [values[-1], *values]
    pairs = list(pairwise(around))[: len(edges)]
    fronts = [
        front
        for x, (left, right) in zip(edges, pairs, strict=True)
        for front in resolve(polygon, Fraction(0), x, left, right)
    ]
    length = None if ring is None else ring[1] - ring[0]
    collisions: list[Collision] = []
    now = Fraction(0)
    while (then := _next_meeting(fronts, now, length)) is not None and then <= until:
        now = then
        met, fronts = _resolve_all(polygon, fronts, now, length)
        if ring is not None:
            met = [hit._replace(x=_wrapped(hit.x, ring)) for hit in met]
        collisions += sorted(met, key=lambda hit: hit.x)
    return _outcome(collisions, fronts, until, values, ring)


def _next_meeting(fronts: list[Front], now: Fraction, length: Fraction | None) -> Fraction | None:
    """Return the earliest time after `now` at which neighbours meet, None where none do."""
    places = [front.at(now) for front in fronts]
    best: Fraction | None = None
    for i in range(len(fronts) - (length is None)):
        j = i + 1
        if j < len(fronts):
            gap, closing = places[j] - places[i], fronts[i].speed - fronts[j].speed
        else:
            assert length is not None
            gap, closing = places[0] + length - places[i], fronts[i].speed - fronts[0].speed
        if closing > 0:
            assert gap > 0, "neighbours at one place must part"
            when = now + gap / closing
            if best is None or when < best:
                best = when
    return best


def _resolve_all(
    polygon: Sequence[Point], fronts: list[Front], t: Fraction, length: Fraction | None
) -> tuple[list[Collision], list[Front]]:
    """Return the collisions at time t, and all fronts after them in order."""
    if length is not None:
        fronts = _begin_after_gap(fronts, t, length)
    groups: list[list[Front]] = []
    for front in fronts:
        if groups and groups[-1][0].at(t) == front.at(t):
            groups[-1].append(front)
        else:
            groups.append([front])
    collisions: list[Collision] = []
    after: list[Front] = []
    for group in groups:
        if len(group) == 1:
            after += group
            continue
        x, left, right = group[0].at(t), group[0].left, group[-1].right
        out = resolve(polygon, t, x, left, right)
        collisions.append(Collision(t, x, len(group), len(out), left, right))
        after += out
    return collisions, after


def _begin_after_gap(fronts: list[Front], t: Fraction, length: Fraction) -> list[Front]:
    """Return the fronts of a ring, turned so that the first does not stand where the last does."""
    if fronts[-1].at(t) < fronts[0].at(t) + length:
        return fronts
    k = next(i for i in range(1, len(fronts)) if fronts[i - 1].at(t) < fronts[i].at(t))
    return fronts[k:] + [front._replace(x=front.x + length) for front in fronts[:k]]


def _wrapped(x: Fraction, ring: tuple[Fraction, Fraction]) -> Fraction:
    a, b = ring
    return a + (x - a) % (b - a)


def _outcome(
    collisions: list[Collision],
    fronts: list[Front],
    until: Fraction,
    values: Sequence[Fraction],
    ring: tuple[Fraction, Fraction] | None,
) -> Outcome:
    """Return what is known at the end, on a ring with places in [a, b) and in their order."""
    if ring is None:
        places = [front.at(until) for front in fronts]
        states = [fronts[0].left, *(front.right for front in fronts)] if fronts else [values[0]]
        return Outcome(collisions, fronts, places, states)
    if not fronts:
        state = collisions[-1].left if collisions else values[0]
        return Outcome(collisions, [], [], [state])
    places = [_wrapped(front.at(until), ring) for front in fronts]
    first = min(range(len(fronts)), key=lambda i: (places[i], i))
    while first and places[first - 1] == places[first]:
        first -= 1
    order = [*range(first, len(fronts)), *range(first)]
    return Outcome(collisions, [fronts[i] for i in order], [places[i] for i in order], [fronts[i].right for i in order])
