"""The engine against an exact tracker in fractions: same collisions in the same order, same end."""

from __future__ import annotations

import random
from collections.abc import Callable, Iterator
from fractions import Fraction as F
from itertools import groupby

import numpy as np
import pytest
import wavekin as wk
from oracles.rational_tracker import Collision, Outcome, Point, track

LOOPS = ("queue", "compiled")
#: Agreement asked of times and places: rounding (1e-16) grown through some tens of collisions, each of which
#: divides by a closing speed that is seldom under 1e-2 of the largest speed.
CLOSE = 1e-11
CASES = 150

Case = tuple[list[Point], list[F], list[F], F, tuple[F, F] | None]


# Random rational cases


def lattice(draw: random.Random, on_ring: bool) -> Case:
    """Few whole states, small whole fluxes (collinear now and then), whole edges: ties everywhere."""
    polygon = [(F(u), F(draw.randint(-3, 3))) for u in range(draw.randint(2, 6))]
    edges = [F(x) for x in sorted(draw.sample(range(16), draw.randint(2, 12)))]
    return _case(draw, polygon, edges, on_ring)


def fractional(draw: random.Random, on_ring: bool) -> Case:
    """Any polygon, states, fluxes and edges that floats cannot hold."""
    states = sorted({F(draw.randint(-12, 12), draw.choice([1, 3, 7])) for _ in range(draw.randint(3, 9))})
    states += [states[-1] + 1] if len(states) < 2 else []
    polygon = [(u, F(draw.randint(-20, 20), draw.randint(1, 6))) for u in states]
    edges = sorted({F(draw.randint(0, 40), draw.choice([3, 7, 10])) for _ in range(draw.randint(2, 12))})
    return _case(draw, polygon, edges, on_ring)


def collinear(draw: random.Random, on_ring: bool) -> Case:
    """Straight runs over several breakpoints, with kinks between them; floats hold each state and flux."""
    polygon = [(F(0), F(0))]
    while len(polygon) < 9:
        slope = F(draw.randint(-4, 4), 2)
        for _ in range(draw.randint(1, 4)):
            step = F(draw.randint(1, 3), 4)
            polygon.append((polygon[-1][0] + step, polygon[-1][1] + slope * step))
    edges = [F(x, 3) for x in sorted(draw.sample(range(48), draw.randint(2, 12)))]
    return _case(draw, polygon, edges, on_ring)


def symmetric(draw: random.Random, on_ring: bool) -> Case:
    """An even flux and odd data: every event has its mirror image at the same time."""
    half = [F(draw.randint(-3, 3)) for _ in range(4)]
    polygon = [(F(k), half[abs(k)]) for k in range(-3, 4)]
    right = sorted(draw.sample(range(1, 8), 4))
    edges = [F(8 - x) for x in right[::-1]] + [F(8)] + [F(8 + x) for x in right]
    values = [F(draw.randint(-3, 3)) for _ in range(5)]
    values = [-v for v in values[::-1]] + values
    ring = (F(0), F(16)) if on_ring else None
    if on_ring:
        edges, values = [F(0), *edges], [values[0], *values[1:], values[0]][: len(edges) + 1]
    return polygon, edges, values[: len(edges) + (not on_ring)], _end(draw), ring


def exact_in_floats(draw: random.Random, on_ring: bool) -> Case:
    """Two cells whose three chord speeds differ by powers of two: no float operation rounds."""
    slope, turn = F(draw.randint(-4, 4)), draw.choice([-1, 1]) * F(2) ** draw.randint(-2, 3)
    polygon = [(F(0), F(0)), (F(1), slope), (F(2), 2 * slope + turn)]
    edges = [F(x, 4) for x in sorted(draw.sample(range(64), draw.randint(2, 30)))]
    polygon, edges, values, _, ring = _case(draw, polygon, edges, on_ring)
    return polygon, edges, values, F(draw.randint(4, 400), 4) + F(1, 2**20), ring


def _end(draw: random.Random) -> F:
    return F(draw.randint(100, 4000), 97)


def _case(draw: random.Random, polygon: list[Point], edges: list[F], on_ring: bool) -> Case:
    states = [u for u, _ in polygon]
    values = [draw.choice(states) for _ in range(len(edges) + (not on_ring))]
    return polygon, edges, values, _end(draw), (F(0), F(16)) if on_ring else None


def run(case: Case, loop: str) -> wk.History:
    polygon, edges, values, until, ring = case
    law = wk.table_law([float(u) for u, _ in polygon], [float(f) for _, f in polygon])
    start = wk.Profile([float(x) for x in edges], [float(v) for v in values])
    ends = None if ring is None else (float(ring[0]), float(ring[1]))
    return wk.track(law, start, float(until), ring=ends, loop=loop, keyframes=3)


def apart(x: float, y: float, case: Case) -> float:
    """Return the distance of two places, on a ring the short way round."""
    ring = case[4]
    if ring is None:
        return abs(x - y)
    length = float(ring[1] - ring[0])
    return abs((x - y + length / 2) % length - length / 2)


def same(row: tuple, exact: Collision, case: Case) -> bool:
    """Return whether an engine's row tells of the exact collision."""
    t, x, fronts_in, fronts_out, left, right = row
    return (
        abs(t - exact.t) <= CLOSE * (1 + exact.t)
        and apart(x, float(exact.x), case) <= CLOSE * (16 + float(abs(exact.x)))
        and (fronts_in, fronts_out) == (exact.fronts_in, exact.fronts_out)
        and (left, right) == (float(exact.left), float(exact.right))
    )


def simultaneous(rows: list[tuple], exact: list[Collision]) -> Iterator[tuple[list[tuple], list[Collision]]]:
    """Yield the rows and the exact collisions of one exact time after another."""
    begin = 0
    for _, group in groupby(exact, key=lambda hit: hit.t):
        hits = list(group)
        yield rows[begin : begin + len(hits)], hits
        begin += len(hits)


def check(case: Case, history: wk.History, exact: Outcome) -> None:
    """Same collisions in the same order, same end.

    Events at one exact time may differ in their last bits as floats; the engine then orders them by these, so
    only within one exact time are they compared without regard to order.
    """
    rows = history.collisions.tolist()
    assert len(rows) == len(exact.collisions)
    assert [row[0] for row in rows] == sorted(row[0] for row in rows)
    for found, hits in simultaneous(rows, exact.collisions):
        left_over = list(found)
        for hit in hits:
            match = next((row for row in left_over if same(row, hit, case)), None)
            assert match is not None, (hit, found)
            left_over.remove(match)
    check_end(case, history.at(history.until), exact)


def check_end(case: Case, end: wk.Profile, exact: Outcome) -> None:
    """Same fronts and states at the end; on a ring a front at the seam may be the first or the last one."""
    if not exact.fronts:
        assert end.values.tolist() == [float(exact.values[0])]
        return
    count, shift, values = len(exact.positions), 0, [float(v) for v in exact.values]
    assert len(end.edges) == count
    if case[4] is not None:
        first = float(end.edges[0])
        shift = min((0, 1, -1), key=lambda k: apart(first, float(exact.positions[k % count]), case))
        values = values[shift:] + values[:shift]
    for i, x in enumerate(end.edges):
        place = float(exact.positions[(i + shift) % count])
        assert apart(x, place, case) <= CLOSE * (16 + abs(place))
    assert end.values.tolist() == values


@pytest.mark.parametrize("on_ring", [False, True], ids=["line", "ring"])
@pytest.mark.parametrize("make", [lattice, fractional, collinear, symmetric])
def test_collisions_are_those_of_the_exact_tracker(make: Callable[..., Case], on_ring: bool) -> None:
    total = 0
    for seed in range(CASES):
        case = make(random.Random(seed), on_ring)
        exact = track(*case)
        total += len(exact.collisions)
        for loop in LOOPS:
            check(case, run(case, loop), exact)
    assert total > 2 * CASES


@pytest.mark.parametrize("on_ring", [False, True], ids=["line", "ring"])
def test_collisions_are_exact_to_the_last_bit_where_floats_can_hold_them(on_ring: bool) -> None:
    for seed in range(CASES):
        case = exact_in_floats(random.Random(seed), on_ring)
        expected = [tuple(float(entry) for entry in hit) for hit in track(*case).collisions]
        for loop in LOOPS:
            assert run(case, loop).collisions.tolist() == expected, (seed, loop)


@pytest.mark.parametrize("on_ring", [False, True], ids=["line", "ring"])
@pytest.mark.parametrize("make", [lattice, symmetric])
def test_rows_are_ordered_by_time_and_then_place_within_the_ring(make: Callable[..., Case], on_ring: bool) -> None:
    for seed in range(CASES):
        history = run(make(random.Random(seed), on_ring), "queue")
        rows = history.collisions[["t", "x"]].tolist()
        assert rows == sorted(rows), seed
        if history.ring is not None:
            assert all(history.ring[0] <= x < history.ring[1] for _, x in rows), seed


@pytest.mark.slow
@pytest.mark.parametrize("on_ring", [False, True], ids=["line", "ring"])
def test_crowded_lattices_end_as_the_exact_tracker_says(on_ring: bool) -> None:
    """Up to 60 edges: rounding may part a meeting of several fronts, the solution stays the same."""
    for seed in range(100):
        draw = random.Random(seed)
        polygon = [(F(u), F(draw.randint(-6, 6))) for u in range(draw.randint(2, 12))]
        edges = [F(x, 4) for x in sorted(draw.sample(range(64), draw.randint(20, 60)))]
        case = _case(draw, polygon, edges, on_ring)
        exact = track(*case)
        for loop in LOOPS:
            history = run(case, loop)
            assert abs(len(history.collisions) - len(exact.collisions)) <= 2
            assert distance_to_exact(history, exact) < 1e-10


def distance_to_exact(history: wk.History, exact: Outcome) -> float:
    """Return the L1 distance between the engine's profile at the end and the exact one."""
    places, values = np.array(exact.positions, dtype=float), np.array(exact.values, dtype=float)
    if history.ring is not None:
        reference = wk.Profile(places, values) if len(places) else wk.Profile([0.0], values)
        ends = history.ring
    else:
        reference = wk.Profile(places, values)
        ends = (-1e3, 1e3)
    end = history.at(history.until)
    return l1(end, reference, *ends)


def l1(first: wk.Profile, second: wk.Profile, a: float, b: float) -> float:
    """Return the exact L1 distance of two profiles over [a, b]."""
    cuts = np.unique(np.concatenate([[a, b], first.edges, second.edges]).clip(a, b))
    middle = 0.5 * (cuts[:-1] + cuts[1:])
    return float(np.abs(first(middle) - second(middle)) @ np.diff(cuts))
