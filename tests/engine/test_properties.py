"""What every solution must obey (Kruzkov 1970; Dafermos 1972), on random data, for every named law."""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from inspect import signature

import numpy as np
import pytest
import wavekin as wk
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray
from wavekin.laws import NAMED

Array = NDArray[np.float64]

#: Parameters of named laws that have no defaults; a law not listed gets 1.5 for each.
PARAMETERS = {
    "brooks_corey": {"saturated": 0.4},
    "corey": {"viscosity_ratio": 0.5},
    "greenshields": {"free_speed": 2.0, "jam_density": 1.0},
    "smulders": {"critical_density": 0.5},
    "triangular": {"free_speed": 2.0, "jam_density": 1.0, "capacity": 0.5},
}
#: Widest span of states taken from a law's range.
SPAN = 2.0
LENGTH = 16.0
RING = (0.0, LENGTH)
#: Rounding allowed in an L1 distance over a length of 16 and states of order 1 with some hundred collisions.
ROUNDING = 1e-10

many = settings(max_examples=40, deadline=None, derandomize=True)
few = settings(many, max_examples=15)
both_loops = pytest.mark.parametrize("on_ring", [False, True], ids=["line", "ring"])


def named(name: str) -> wk.Law:
    needed = [key for key, item in signature(NAMED[name]).parameters.items() if item.default is item.empty]
    return NAMED[name](**(dict.fromkeys(needed, 1.5) | PARAMETERS.get(name, {})))


def span_of(law: wk.Law) -> tuple[float, float]:
    """Return some admissible states: the middle of the range where that is wide."""
    a, b = law.range
    if b - a <= SPAN:
        return a, b
    middle = min(max(0.0, a + SPAN / 2), b - SPAN / 2)
    return middle - SPAN / 2, middle + SPAN / 2


@dataclass(frozen=True)
class Data:
    """Random steps: edges in [0, 16), states as shares of the law's span."""

    edges: list[float]
    shares: list[float]
    on_ring: bool

    def profile(self, law: wk.Law, shares: list[float] | None = None) -> wk.Profile:
        low, high = span_of(law)
        states = low + (high - low) * np.array(shares or self.shares)
        return wk.Profile(self.edges, states.clip(low, high))


@st.composite
def steps(draw: st.DrawFn, on_ring: bool) -> Data:
    """Edges and states on lattices (ties everywhere) or anywhere."""
    if draw(st.booleans()):
        edges = draw(st.lists(st.integers(0, 63), min_size=2, max_size=14, unique=True))
        places = sorted(k / 4.0 for k in edges)
        share = st.integers(0, 8).map(lambda k: k / 8.0)
    else:
        fine = st.floats(0.0, 15.99).map(lambda x: round(x, 9))
        places = sorted(draw(st.lists(fine, min_size=2, max_size=14, unique=True)))
        share = st.floats(0.0, 1.0)
    count = len(places) + (not on_ring)
    return Data(places, draw(st.lists(share, min_size=count, max_size=count)), on_ring)


@st.composite
def polygons(draw: st.DrawFn) -> wk.Law:
    """Any polygon over [0, 1] with breakpoints on eighths; or that of a named law."""
    u = np.arange(9) / 8.0
    if draw(st.booleans()):
        f = np.array(draw(st.lists(st.integers(-4, 4), min_size=9, max_size=9))) / 4.0
    else:
        law = named(draw(st.sampled_from(sorted(NAMED))))
        low, high = span_of(law)
        f = np.asarray(law.flux(low + (high - low) * u), dtype=float)
    return wk.table_law(u, f)


def track(law: wk.Law, start: wk.Profile, until: float, on_ring: bool, **options: object) -> wk.History:
    ring = RING if on_ring else None
    return wk.track(law, start, until, ring=ring, **({"loop": "queue", "keyframes": 3} | options))  # type: ignore[arg-type]


def l1(first: wk.Profile, second: wk.Profile, a: float, b: float) -> float:
    """Return the exact L1 distance of two profiles over [a, b]."""
    cuts = np.unique(np.concatenate([[a, b], first.edges, second.edges]).clip(a, b))
    middle = 0.5 * (cuts[:-1] + cuts[1:])
    return float(np.abs(first(middle) - second(middle)) @ np.diff(cuts))


def window(on_ring: bool) -> tuple[float, float]:
    return RING if on_ring else (-1e4, 1e4)


def top_speed(law: wk.Law) -> float:
    assert law.polygon is not None
    u, f = law.polygon
    return float(np.abs(np.diff(f) / np.diff(u)).max())


# One meaning, two loops


@both_loops
@pytest.mark.parametrize("name", sorted(NAMED))
def test_loops_write_the_same_history_to_the_last_bit(name: str, on_ring: bool) -> None:
    law = named(name)

    @few
    @given(steps(on_ring), st.integers(2, 40), st.floats(0.01, 30.0))
    def check(data: Data, levels: int, until: float) -> None:
        start = data.profile(law)
        first, second = (track(law, start, until, on_ring, levels=levels, loop=loop) for loop in ("queue", "compiled"))
        for rows in ("fronts", "collisions"):
            one, other = getattr(first, rows), getattr(second, rows)
            assert len(one) == len(other)
            for column in one.dtype.names:
                assert one[column].tobytes() == other[column].tobytes(), (rows, column)
        assert first.keyframe_ids.tobytes() == second.keyframe_ids.tobytes()

    check()


@pytest.mark.slow
@both_loops
@pytest.mark.parametrize("name", sorted(NAMED))
def test_loops_write_the_same_long_history_to_the_last_bit(name: str, on_ring: bool) -> None:
    """4,000 jumps, anywhere and on a lattice: many blocks of fronts, many ties."""
    law = named(name)
    low, high = span_of(law)
    generator = np.random.default_rng(17)
    count = 4_000
    for lattice in (False, True):
        edges = np.arange(count) / 4.0 if lattice else np.sort(generator.random(count)) * count
        values = (low + (high - low) * generator.integers(0, 9, count + (not on_ring)) / 8.0).clip(low, high)
        ring = (0.0, float(count)) if on_ring else None
        first, second = (
            wk.track(law, wk.Profile(edges, values), 20.0, levels=9, ring=ring, loop=loop, keyframes=0)
            for loop in ("queue", "compiled")
        )
        for rows in ("fronts", "collisions"):
            one, other = getattr(first, rows), getattr(second, rows)
            assert len(one) == len(other)
            for column in one.dtype.names:
                assert one[column].tobytes() == other[column].tobytes(), (rows, column)


@both_loops
@pytest.mark.parametrize("name", sorted(NAMED))
def test_audit_holds(name: str, on_ring: bool) -> None:
    law = named(name)

    @few
    @given(steps(on_ring), st.integers(2, 40), st.floats(0.01, 30.0))
    def check(data: Data, levels: int, until: float) -> None:
        audit = wk.audit(track(law, data.profile(law), until, on_ring, levels=levels))
        assert audit.holds, [item for item in audit.checks if not item.holds]

    check()


# What the solution operator keeps


@both_loops
def test_distance_of_two_solutions_never_grows(on_ring: bool) -> None:
    @many
    @given(polygons(), steps(on_ring), st.floats(0.01, 20.0), st.data())
    def check(law: wk.Law, data: Data, until: float, more: st.DataObject) -> None:
        other = other_shares(data, more)
        pair = [track(law, data.profile(law, shares), until, on_ring) for shares in (data.shares, other)]
        before = l1(pair[0].start, pair[1].start, *window(on_ring))
        for t in (until / 3.0, until):
            now = l1(pair[0].at(t), pair[1].at(t), *window(on_ring))
            assert now <= before + ROUNDING
            before = now

    check()


@both_loops
def test_order_of_two_solutions_is_kept(on_ring: bool) -> None:
    @many
    @given(polygons(), steps(on_ring), st.floats(0.01, 20.0), st.data())
    def check(law: wk.Law, data: Data, until: float, more: st.DataObject) -> None:
        other = other_shares(data, more, same_ends=False)
        upper = np.maximum(data.shares, other).tolist()
        below, above = (track(law, data.profile(law, part), until, on_ring) for part in (data.shares, upper))
        low, high = below.at(until), above.at(until)
        cuts = np.unique(np.concatenate([low.edges, high.edges, [-1e3, 1e3]]))
        wide = np.diff(cuts) > 1e-9
        middle = (0.5 * (cuts[:-1] + cuts[1:]))[wide]
        assert (low(middle) <= high(middle)).all()

    check()


def other_shares(data: Data, more: st.DataObject, same_ends: bool = True) -> list[float]:
    """Return other states on the same edges, alike at both ends of the open line."""
    count = len(data.shares)
    shares = more.draw(st.lists(st.integers(0, 8).map(lambda k: k / 8.0), min_size=count, max_size=count))
    if same_ends and not data.on_ring:
        shares[0], shares[-1] = data.shares[0], data.shares[-1]
    return shares


@both_loops
def test_variation_never_grows_and_mass_stays(on_ring: bool) -> None:
    @many
    @given(polygons(), steps(on_ring), st.floats(0.01, 40.0))
    def check(law: wk.Law, data: Data, until: float) -> None:
        history = track(law, data.profile(law), until, on_ring)
        times = np.linspace(0.0, until, 9)
        variation = [history.total_variation(t) for t in times]
        assert all(b <= a + 1e-12 for a, b in itertools.pairwise(variation))
        mass = [history.mass(t) for t in times]
        assert mass == pytest.approx([mass[0]] * 9, abs=1e-12 * LENGTH * (1.0 + top_speed(law) * until))

    check()


@both_loops
def test_news_travels_no_faster_than_the_steepest_slope(on_ring: bool) -> None:
    """Data that agree on [4, 12] give solutions that agree on [4 + S t, 12 - S t]."""

    @many
    @given(polygons(), steps(on_ring), st.floats(0.0, 0.9), st.data())
    def check(law: wk.Law, data: Data, share: float, more: st.DataObject) -> None:
        edges = np.array(data.edges)
        shares, other = np.array(data.shares), np.array(other_shares(data, more, same_ends=False))
        begins = edges if on_ring else np.concatenate(([-np.inf], edges))
        ends = np.concatenate((edges[1:], [edges[0] + LENGTH if on_ring else np.inf]))
        if not on_ring:
            ends = np.concatenate((edges[:1], ends))
        touches = (begins < 12.0) & (ends > 4.0)
        if on_ring:  # the last piece runs through the seam
            touches |= (begins - LENGTH < 12.0) & (ends - LENGTH > 4.0)
        other[touches] = shares[touches]
        speed = top_speed(law)
        until = share * 4.0 / speed if speed > 0.0 else 1.0
        if until <= 0.0:
            return
        pair = [track(law, data.profile(law, part.tolist()), until, on_ring) for part in (shares, other)]
        reach = speed * until
        assert l1(pair[0].at(until), pair[1].at(until), 4.0 + reach, 12.0 - reach) <= ROUNDING

    check()


@both_loops
def test_a_run_can_be_taken_up_where_it_stopped(on_ring: bool) -> None:
    @many
    @given(polygons(), steps(on_ring), st.floats(0.01, 10.0), st.floats(0.01, 10.0))
    def check(law: wk.Law, data: Data, first: float, second: float) -> None:
        whole = track(law, data.profile(law), first + second, on_ring)
        part = track(law, data.profile(law), first, on_ring)
        rest = track(law, part.at(first), second, on_ring)
        assert l1(whole.at(whole.until), rest.at(second), *window(on_ring)) <= ROUNDING

    check()


# Symmetry and independence of how the input is written


@both_loops
def test_mirror_images_stay_mirror_images(on_ring: bool) -> None:
    """With f also u(-x) under -f and -u(x) under -f(-u) are solutions."""

    @many
    @given(polygons(), steps(on_ring), st.floats(0.01, 20.0))
    def check(law: wk.Law, data: Data, until: float) -> None:
        assert law.polygon is not None
        u, f = law.polygon
        start = data.profile(law)
        end = track(law, start, until, on_ring).at(until)
        ring = (-LENGTH, 0.0) if on_ring else None
        turned_start = turned(start, on_ring)
        if not on_ring or (turned_start.edges[0] >= -LENGTH and turned_start.edges[-1] < 0.0):
            back = wk.track(wk.table_law(u, -f), turned_start, until, ring=ring, loop="queue").at(until)
            assert l1(turned(back, on_ring), end, *window(on_ring)) <= ROUNDING
        negative = wk.table_law(-u[::-1], -f[::-1])
        low = track(negative, wk.Profile(start.edges, -start.values), until, on_ring).at(until)
        assert l1(wk.Profile(low.edges, -low.values), end, *window(on_ring)) <= ROUNDING

    check()


def turned(profile: wk.Profile, on_ring: bool) -> wk.Profile:
    """Return the profile with x turned round; on a ring the value left of an edge is then right of it."""
    values = np.roll(profile.values, 1) if on_ring else profile.values
    return wk.Profile(-profile.edges[::-1], values[::-1])


@both_loops
def test_edges_without_a_jump_and_the_type_of_numbers_do_not_matter(on_ring: bool) -> None:
    @many
    @given(polygons(), steps(on_ring), st.floats(0.01, 20.0), st.integers(0, 13))
    def check(law: wk.Law, data: Data, until: float, where: int) -> None:
        start = data.profile(law)
        k = where % (len(start.edges) - 1)
        extra = 0.5 * (start.edges[k] + start.edges[k + 1])
        value = start.values[k if on_ring else k + 1]
        if not start.edges[k] < extra < start.edges[k + 1]:
            return
        longer = wk.Profile(
            [*start.edges[: k + 1].tolist(), extra, *start.edges[k + 1 :].tolist()],
            np.insert(start.values, k + 1 + (not on_ring), value).tolist(),
        )
        one, other = track(law, start, until, on_ring), track(law, longer, until, on_ring)
        assert one.fronts.tobytes() == other.fronts.tobytes()
        assert one.collisions.tobytes() == other.collisions.tobytes()

    check()


def test_the_seam_of_a_ring_may_lie_anywhere() -> None:
    @many
    @given(polygons(), steps(True), st.floats(0.01, 20.0), st.integers(1, 63))
    def check(law: wk.Law, data: Data, until: float, quarters: int) -> None:
        start, shift = data.profile(law), quarters / 4.0
        places = np.array(data.edges) + np.where(np.array(data.edges) < shift, LENGTH, 0.0)
        order = np.argsort(places)
        ring = (shift, shift + LENGTH)
        moved = wk.track(law, wk.Profile(places[order], start.values[order]), until, ring=ring, loop="queue")
        end = track(law, start, until, True).at(until)
        cuts = np.unique(np.concatenate([end.edges, moved.at(until).edges, np.arange(65) / 4.0]) % LENGTH)
        cuts = np.unique(np.concatenate([cuts, [0.0, LENGTH]]))
        middle = 0.5 * (cuts[:-1] + cuts[1:])
        seen = moved.at(until)(np.where(middle < shift, middle + LENGTH, middle))
        assert np.abs(end(middle) - seen) @ np.diff(cuts) <= ROUNDING

    check()
