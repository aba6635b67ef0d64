"""The polygon and its local solve, against brute force; the departure, against quadrature of the envelope."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
import wavekin as wk
from scipy.optimize import brentq
from wavekin.polygon import Polygon, polygon_of


def uniform(law: wk.Law, low: float, high: float, count: int) -> Polygon:
    return polygon_of(law, np.linspace(low, high, count), np.array([low, high]), np.zeros(0))


def hull(points: list[tuple[Fraction, Fraction]], side: int) -> list[int]:
    """Return the vertices of the lower (side 1) or upper (-1) hull by trying every chord: O(n^3), exact."""
    vertices = [0]
    while vertices[-1] < len(points) - 1:
        i = vertices[-1]
        for j in range(len(points) - 1, i, -1):
            slope = (points[j][1] - points[i][1]) / (points[j][0] - points[i][0])
            if all(side * (p[1] - points[i][1] - slope * (p[0] - points[i][0])) >= 0 for p in points[i:]):
                vertices.append(j)
                break
    return vertices


@pytest.mark.parametrize("seed", range(60))
def test_local_solve_is_the_exact_hull(seed: int) -> None:
    rng = np.random.default_rng(seed)
    count = int(rng.integers(2, 14))
    u = np.cumsum(rng.integers(1, 4, count)).astype(float)
    f = rng.integers(-6, 7, count).astype(float)  # small integers: many collinear points and kinks
    polygon = Polygon(u, f, np.zeros(count - 1, dtype=np.int8))
    points = [(Fraction(a), Fraction(b)) for a, b in zip(u.tolist(), f.tolist(), strict=True)]
    for left in range(count):
        for right in range(count):
            if left < right:
                expected = [left + k for k in hull(points[left : right + 1], 1)][1:]
            elif left > right:
                expected = [right + k for k in hull(points[right : left + 1], -1)][-2::-1]
            else:
                expected = []
            assert polygon.waves(left, right) == expected, (left, right)


def test_states_on_one_line_share_one_speed_to_the_last_bit() -> None:
    u = np.array([0.0, 0.1, 0.3, 0.7, 1.0])
    polygon = wk.track(wk.table_law(u, 0.3 * u), wk.Profile([0.0, 1.0, 2.0], [0.1, 0.3, 0.7, 0.0]), 1.0, levels=2)
    assert len(set(polygon.fronts["speed"].tolist())) == 1


@pytest.mark.parametrize(
    "law, low, high",
    [
        (wk.burgers(), -1.0, 1.0),
        (wk.corey(viscosity_ratio=0.5), 0.0, 1.0),
        (wk.corey(viscosity_ratio=0.2, exponent_displacing=3.0, exponent_displaced=2.5), 0.0, 1.0),
        (wk.cubic(), -1.0, 1.0),
    ],
    ids=lambda value: getattr(value, "name", None),
)
def test_departure_encloses_the_envelope_integral_from_above_and_closely(law: wk.Law, low: float, high: float) -> None:
    """D = integral of |envelope' - s|, here from a brute-force envelope of 2,001 samples of the true flux."""
    polygon = uniform(law, low, high, 12)
    size = len(polygon)
    for left in range(size):
        for right in range(size):
            if left == right:
                continue
            state = left
            for following in polygon.waves(left, right):
                expected = brute_departure(law, polygon.u[state], polygon.u[following])
                got = polygon.departures(np.array([state]), np.array([following]))[0]
                assert got >= expected - 1e-12
                assert got <= 1.002 * expected + 1e-6  # golden section leaves 3e-4; the samples 1e-6 of it
                state = following


def brute_departure(law: wk.Law, left: float, right: float) -> float:
    u = np.linspace(left, right, 2001)
    f = np.asarray(law.flux(u))
    chord = f[0] + (f[-1] - f[0]) * (u - left) / (right - left)
    side = np.sign(right - left)
    gap = side * (f - chord)
    order = np.arange(len(u))
    stack: list[int] = []
    for i in order:  # lower hull of the gap along the way from left to right
        while len(stack) > 1 and (gap[i] - gap[stack[-1]]) * (stack[-1] - stack[-2]) <= (
            gap[stack[-1]] - gap[stack[-2]]
        ) * (i - stack[-1]):
            stack.pop()
        stack.append(int(i))
    return float(np.abs(np.diff(gap[stack])).sum())


def test_tangent_shock_departs_less_and_less_and_an_admissible_one_not_at_all() -> None:
    """Welge's tangent for quadratic fractional flow is at sqrt(M / (1 + M)) (closed form, computed)."""
    law = wk.corey(viscosity_ratio=1.0 / 3.0)
    tangent = brentq(
        lambda s: float(law.derivative(np.array([s]))[0]) - float(law.flux(np.array([s]))[0]) / s, 0.3, 0.9
    )
    assert tangent == pytest.approx(0.5, abs=1e-12)
    polygon = polygon_of(law, np.linspace(0.0, 1.0, 41), np.array([0.0, 0.3, 0.5, 1.0]), np.zeros(0))
    half, below, zero = polygon.index(np.array([0.5, 0.3, 0.0]))
    assert polygon.departures(np.array([half]), np.array([zero]))[0] <= 1e-12
    assert polygon.departures(np.array([below]), np.array([zero]))[0] == 0.0


def test_gap_bounds_the_distance_of_flux_and_polygon() -> None:
    law = wk.corey(viscosity_ratio=0.5)
    polygon = uniform(law, 0.0, 1.0, 17)
    u = np.linspace(0.0, 1.0, 100_001)
    sampled = np.abs(np.asarray(law.flux(u)) - np.interp(u, polygon.u, polygon.f)).max()
    assert sampled <= polygon.gap <= 1.001 * sampled


def test_kinks_and_inflections_are_breakpoints() -> None:
    law = wk.corey(viscosity_ratio=0.5)
    polygon = uniform(law, 0.0, 1.0, 9)
    assert np.isin(law.special, polygon.u).all()
    assert set(np.unique(polygon.bend)) == {-1, 1}
