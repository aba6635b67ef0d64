"""The oracles against closed forms: nothing here knows of the engine."""

from __future__ import annotations

import math
import random
from fractions import Fraction as F
from itertools import pairwise

import numpy as np
import pytest
from oracles import quadrature as quad
from oracles.hopf_lax import BURGERS, ConvexLaw, HopfLax, mirrored
from oracles.rational_tracker import hull, track


def burgers_polygon(low: int, high: int, parts: int) -> list[tuple[F, F]]:
    us = [F(low) + F(k, parts) for k in range((high - low) * parts + 1)]
    return [(u, u * u / 2) for u in us]


def mass(positions: list[F], values: list[F], a: F, b: F) -> F:
    inside = pairwise([a, *positions, b])
    return sum((v * (q - p) for v, (p, q) in zip(values, inside, strict=True)), F(0))


# The rational tracker


@pytest.mark.parametrize("parts", [1, 2, 4, 5, 10])
def test_box_of_height_one_has_its_closed_event_list(parts: int) -> None:
    """The fan of the box in M steps: k-th event at t_k = 2 M^2 / ((M-k)(M-k+1)), x_k = (M-k+1/2) t_k / M."""
    out = track(burgers_polygon(0, 1, parts), [F(0), F(1)], [F(0), F(1), F(0)], F(10**6))
    m = parts
    times = [F(2 * m * m, (m - k) * (m - k + 1)) for k in range(1, m)]
    assert [c.t for c in out.collisions] == times
    assert [c.x for c in out.collisions] == [
        F(2 * (m - k) + 1, 2 * m) * t for k, t in zip(range(1, m), times, strict=True)
    ]
    assert all((c.fronts_in, c.fronts_out) == (2, 1) for c in out.collisions)
    assert [front.speed for front in out.fronts] == [F(1, 2 * m)] * 2


def test_three_shocks_that_meet_at_one_point_are_one_collision() -> None:
    """States 3, 2, 1, 0 with shocks of speeds 5/2, 3/2, 1/2 from 0, 1, 2: all meet at t = 1, x = 5/2."""
    out = track(burgers_polygon(0, 3, 1), [F(0), F(1), F(2)], [F(3), F(2), F(1), F(0)], F(5))
    assert out.collisions == [(F(1), F(5, 2), 3, 1, F(3), F(0))]
    assert out.positions == [F(5, 2) + F(3, 2) * 4]


@pytest.mark.parametrize("on_ring", [False, True])
def test_fronts_between_equal_states_leave_nothing(on_ring: bool) -> None:
    """On f = |u| the jumps 0 | 1 | -1 | 0 move at 1, 0, -1: from 0, 1, 2 they meet at (1, 1) and are gone."""
    polygon = [(F(-1), F(1)), (F(0), F(0)), (F(1), F(1))]
    values = [F(0), F(1), F(-1), F(0)]
    ring = (F(0), F(5)) if on_ring else None
    out = track(polygon, [F(0), F(1), F(2)], values[on_ring:], F(10), ring)
    assert out.collisions == [(1, 1, 3, 0, 0, 0)]
    assert (out.positions, out.values) == ([], [0])


def test_shock_and_fan_front_make_one_front() -> None:
    """On a roof: 0 | 2 stands, 2 | 0 opens at -1 and 1; the first meets the standing shock at (2, 0)."""
    polygon = [(F(0), F(0)), (F(1), F(1)), (F(2), F(0))]
    out = track(polygon, [F(0), F(2)], [F(0), F(2), F(0)], F(10))
    assert out.collisions == [(2, 0, 2, 1, 0, 1)]
    assert out.positions == [8, 12]


def test_collinear_breakpoints_are_no_corners() -> None:
    polygon = [(F(k), F(k)) for k in range(4)] + [(F(4), F(6))]
    assert hull(polygon, F(0), F(4)) == [(F(0), F(0)), (F(3), F(3)), (F(4), F(6))]
    assert hull(polygon, F(4), F(0)) == [(F(4), F(6)), (F(0), F(0))]


@pytest.mark.parametrize("on_ring", [False, True])
def test_tracker_keeps_mass_variation_and_order(on_ring: bool) -> None:
    draw = random.Random(7)
    for _ in range(30):
        us = sorted(draw.sample(range(-6, 7), 6))
        polygon = [(F(u), F(draw.randint(-8, 8), draw.randint(1, 3))) for u in us]
        n = draw.randint(2, 8)
        edges = sorted(F(k, 2) for k in draw.sample(range(20), n))
        values = [F(draw.choice(us)) for _ in range(n if on_ring else n + 1)]
        ring = (F(0), F(10)) if on_ring else None
        until = F(draw.randint(1, 60), 7)
        out = track(polygon, edges, values, until, ring)
        assert out.positions == sorted(out.positions)
        jumps = sum(abs(f.right - f.left) for f in out.fronts)
        if on_ring:
            assert ring is not None
            begin = mass(edges, [values[-1], *values], *ring)
            end = mass(out.positions, [out.values[-1], *out.values[: len(out.positions)]], *ring)
            assert begin == end
            assert jumps <= sum(abs(values[i] - values[i - 1]) for i in range(n))
        else:
            flux = dict(polygon)
            a, b = F(-1000), F(1000)
            inflow = until * (flux[values[0]] - flux[values[-1]])
            assert mass(out.positions, out.values, a, b) == mass(edges, values, a, b) + inflow
            assert jumps <= sum(abs(q - p) for p, q in pairwise(values))


def test_ring_and_line_agree_before_the_seam_is_felt() -> None:
    polygon = burgers_polygon(0, 1, 4)
    line = track(polygon, [F(1), F(2)], [F(0), F(1), F(0)], F(16))
    ring = track(polygon, [F(1), F(2)], [F(1), F(0)], F(16), (F(0), F(100)))
    assert ring.collisions == line.collisions and ring.positions == line.positions


def test_jumps_on_a_flat_piece_stand_for_ever() -> None:
    polygon = [(F(0), F(0)), (F(1), F(0)), (F(2), F(1))]
    out = track(polygon, [F(0), F(1)], [F(1), F(0)], F(100), (F(0), F(3)))
    assert not out.collisions


# Hopf-Lax


def box_exact(x: np.ndarray, t: float) -> np.ndarray:
    """Burgers box of height 1 on [0, 1] (Whitham 1974, from memory; worked out anew)."""
    if t <= 2.0:
        return np.where((x < 0) | (x > 1 + t / 2), 0.0, np.where(x < t, x / t, 1.0))
    return np.where((x < 0) | (x > math.sqrt(2 * t)), 0.0, x / t)


@pytest.mark.parametrize("t", [0.3, 1.0, 2.0, 4.0, 8.0, 50.0])
def test_burgers_box_in_closed_form(t: float) -> None:
    solution = HopfLax(BURGERS, [0.0, 1.0], [0.0, 1.0, 0.0])
    x = np.linspace(-1.0, 12.0, 1711)
    off = np.abs(x - (1 + t / 2 if t <= 2 else math.sqrt(2 * t))) > 1e-9
    assert np.abs(solution.state(x, t) - box_exact(x, t))[off].max() < 1e-14
    assert solution.cumulative(1000.0, t) == pytest.approx(1.0, abs=1e-13)


def test_fan_against_its_steps_has_the_closed_distance() -> None:
    """M equal chords of Burgers' fan stand t (uR - uL)^2 / (4 M) from it."""
    solution = HopfLax(BURGERS, [0.0], [-1.0, 2.0])
    for m in (1, 2, 8, 30):
        u = np.linspace(-1.0, 2.0, m + 1)
        places = 0.5 * (u[1:] + u[:-1]) * 3.0
        assert solution.distance(places, u, 3.0, (-10.0, 10.0)) == pytest.approx(6.75 / m, rel=1e-12)


def test_distance_of_the_solution_from_itself_and_from_a_shifted_shock() -> None:
    solution = HopfLax(BURGERS, [0.0], [1.0, 0.0])
    assert solution.distance([1.0], [1.0, 0.0], 2.0, (-3.0, 5.0)) < 1e-14
    assert solution.distance([1.25], [1.0, 0.0], 2.0, (-3.0, 5.0)) == pytest.approx(0.25, abs=1e-14)
    assert solution.distance([], [0.5], 2.0, (-3.0, 5.0)) == pytest.approx(4.0, abs=1e-13)


def test_distance_agrees_with_brute_sampling() -> None:
    generator = np.random.default_rng(5)
    edges = np.sort(generator.uniform(0, 10, 12))
    values = generator.uniform(-1, 1, 13)
    solution = HopfLax(BURGERS, edges, values)
    places = np.linspace(-1, 11, 40)
    states = generator.uniform(-1, 1, 41)
    x = np.linspace(-5, 15, 400_001)[:-1] + 2.5e-5
    sampled = np.abs(solution.state(x, 1.7) - states[np.searchsorted(places, x)]).mean() * 20.0
    assert solution.distance(places, states, 1.7, (-5.0, 15.0)) == pytest.approx(sampled, abs=5e-4)


def test_quartic_law_satisfies_its_equation_in_the_mean() -> None:
    """Any strictly convex flux: amounts in a window change by what flows through its ends in the time."""
    law = ConvexLaw(lambda u: u**4 / 4 + u**2 / 2, lambda u: u**3 + u, _inverse_cubic)
    solution = HopfLax(law, [0.0, 1.0, 2.5], [0.4, 1.2, -0.7, 0.1])
    t, weights = np.polynomial.legendre.leggauss(200)
    t, weights = 0.5 * (t + 1.0), 0.5 * weights
    a, b = -1.5, 4.5
    flow = np.array([law.flux(solution.state(np.array([a, b]), float(s))) for s in t])
    change = np.diff(solution.cumulative([a, b], 1.0)) - np.diff(solution.cumulative([a, b], 1e-9))
    assert change[0] == pytest.approx(float(weights @ (flow[:, 0] - flow[:, 1])), abs=2e-3)


def _inverse_cubic(p: np.ndarray) -> np.ndarray:
    """The real root of u^3 + u = p."""
    p = np.asarray(p, float)
    return 2.0 / math.sqrt(3.0) * np.sinh(np.arcsinh(1.5 * math.sqrt(3.0) * p) / 3.0)


def test_concave_law_by_turning_the_line_round() -> None:
    """Greenshields' queue: 0.2 | 1 moves at -0.2; its discharge 1 | 0 is the fan (1 - x/t) / 2."""
    law = mirrored(lambda k: k * (1 - k), lambda k: 1 - 2 * k, lambda p: (1 - p) / 2)
    queue = HopfLax(law, [0.0], [1.0, 0.2])  # turned round: right and left change places
    assert queue.state([0.199, 0.201], 1.0) == pytest.approx([1.0, 0.2])
    green = HopfLax(law, [0.0], [0.0, 1.0])
    assert green.state([-0.5, 0.0, 0.5], 1.0) == pytest.approx([0.25, 0.5, 0.75])


# Quadrature


def test_departure_of_burgers_is_a_quarter_of_the_square() -> None:
    for left, right in ((0.0, 1.0), (-0.3, 0.1)):
        exact = (right - left) ** 2 / 4
        assert quad.departure_by_sampling(lambda u: u * u / 2, left, right) == pytest.approx(exact, rel=1e-8)
        by_quad = quad.departure_of_fan(lambda u: u * u / 2, lambda u: u, left, right)
        assert by_quad == pytest.approx(exact, rel=1e-12)
    assert quad.departure_by_sampling(lambda u: u * u / 2, 1.0, 0.0) == 0.0


@pytest.mark.parametrize("m", [0.2, 0.5, 1.0, 2.0])
def test_displacement_by_two_routes(m: float) -> None:
    def flux(s: float) -> float:
        return s * s / (s * s + m * (1 - s) ** 2)

    def derivative(s: float) -> float:
        return 2 * m * s * (1 - s) / (s * s + m * (1 - s) ** 2) ** 2

    tangent = quad.tangency(flux, derivative, 0.0, (0.2, 0.999))
    assert tangent == pytest.approx(math.sqrt(m / (1 + m)), rel=1e-12)  # closed form of Welge's tangent
    by_quad = quad.departure_of_compound(flux, derivative, 1.0, 0.0, tangent)
    sampled = quad.departure_by_sampling(lambda s: s * s / (s * s + m * (1 - s) ** 2), 1.0, 0.0)
    assert sampled == pytest.approx(by_quad, rel=1e-7)
