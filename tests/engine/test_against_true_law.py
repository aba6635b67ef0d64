"""The engine against the true law, not its polygon: minimisation, far finer runs, quadrature."""

from __future__ import annotations

import numpy as np
import pytest
import wavekin as wk
from oracles import quadrature
from oracles.hopf_lax import BURGERS, ConvexLaw, HopfLax, mirrored


def _inverse_quartic(p: np.ndarray) -> np.ndarray:
    """The real root u of u^3 + u = p."""
    return 2.0 / 3.0**0.5 * np.sinh(np.arcsinh(1.5 * 3.0**0.5 * np.asarray(p, float)) / 3.0)


QUARTIC = ConvexLaw(lambda u: u**4 / 4 + u**2 / 2, lambda u: u**3 + u, _inverse_quartic)
EXPONENTIAL = ConvexLaw(np.exp, np.exp, np.log)
CONVEX = {
    "burgers": (wk.burgers(), BURGERS, (-1.0, 1.0)),
    "quartic": (wk.Law(QUARTIC.flux, (-2.0, 2.0), inflections=()), QUARTIC, (-1.0, 1.0)),
    "exponential": (wk.Law(np.exp, (-3.0, 3.0), inflections=()), EXPONENTIAL, (-1.0, 2.0)),
}
BENDING = {
    "corey": (wk.corey(viscosity_ratio=0.5), (0.0, 1.0)),
    "cubic": (wk.cubic(), (-1.0, 1.0)),
    "wave": (wk.Law(np.sin, (0.0, 7.0), inflections=(np.pi, 2 * np.pi)), (0.0, 7.0)),
}
ALL = {name: (law, span) for name, (law, _, span) in CONVEX.items()} | BENDING


def random_data(seed: int, span: tuple[float, float]) -> wk.Profile:
    generator = np.random.default_rng(seed)
    edges = np.sort(generator.uniform(0.0, 10.0, int(generator.integers(1, 30))))
    return wk.Profile(edges, generator.uniform(*span, len(edges) + 1))


def l1(first: wk.Profile, second: wk.Profile, a: float, b: float) -> float:
    """Return the exact L1 distance of two profiles over [a, b]."""
    cuts = np.unique(np.concatenate([[a, b], first.edges, second.edges]).clip(a, b))
    middle = 0.5 * (cuts[:-1] + cuts[1:])
    return float(np.abs(first(middle) - second(middle)) @ np.diff(cuts))


# Bounds


@pytest.mark.parametrize("name", CONVEX)
def test_bounds_hold_and_are_sharp_against_minimisation(name: str) -> None:
    """L1 bound >= true error always, <= 6 x true error where there is one; the bound of U holds."""
    law, true, span = CONVEX[name]
    top = float(np.abs(true.derivative(np.array(span))).max())
    for seed in range(16):
        start = random_data(seed, span)
        levels, until = (5, 9, 17, 33, 65)[seed % 5], (0.1, 0.5, 2.0, 6.0)[seed % 4]
        history = wk.track(law, start, until, levels=levels)
        solution = HopfLax(true, start.edges, start.values)
        window = (start.edges[0] - top * until - 1.0, start.edges[-1] + top * until + 1.0)
        cells = np.linspace(*window, 500)
        for t in (until / 3.0, until):
            profile, bound = history.at(t), history.error_bound(t)
            error = solution.distance(profile.edges, profile.values, t, window)
            assert error <= bound + 1e-11
            assert bound <= 6.0 * error + 1e-11
            amounts = np.cumsum(history.averages(cells, t, fans="steps")[0] * np.diff(cells))
            cumulative = solution.cumulative(cells, t)
            worst = np.abs(cumulative[1:] - cumulative[0] - amounts).max()
            assert worst <= history.cumulative_bound(t) + 1e-11


@pytest.mark.parametrize("name", CONVEX)
def test_shocks_alone_are_exact_and_have_no_bound(name: str) -> None:
    law, true, span = CONVEX[name]
    generator = np.random.default_rng(1)
    edges = np.sort(generator.uniform(0.0, 10.0, 20))
    values = np.sort(generator.uniform(*span, 21))[::-1]
    history = wk.track(law, wk.Profile(edges, values), 5.0, levels=9)
    profile = history.at(5.0)
    assert len(history.collisions) > 10
    assert history.error_bound(5.0) <= 1e-12
    assert HopfLax(true, edges, values).distance(profile.edges, profile.values, 5.0, (-60.0, 60.0)) < 1e-11


def test_bounds_hold_for_a_concave_traffic_law_in_the_mirror() -> None:
    law = wk.greenshields(free_speed=1.0, jam_density=1.0)
    true = mirrored(lambda k: k * (1 - k), lambda k: 1 - 2 * k, lambda p: 0.5 * (1 - p))
    for seed in range(10):
        start = random_data(seed, (0.0, 1.0))
        history = wk.track(law, start, 3.0, levels=17)
        solution = HopfLax(true, -start.edges[::-1], start.values[::-1])
        profile = history.at(3.0)
        error = solution.distance(-profile.edges[::-1], profile.values[::-1], 3.0, (-20.0, 10.0))
        assert error <= history.error_bound(3.0) + 1e-12
        assert history.error_bound(3.0) <= 6.0 * error + 1e-12


@pytest.mark.parametrize("name", BENDING)
def test_bound_holds_against_a_far_finer_polygon_of_a_bending_law(name: str) -> None:
    """The finer run is within its own bound r of the truth, so the true error is in [d - r, d + r]."""
    law, span = BENDING[name]
    for seed in range(8):
        start = random_data(seed, span)
        fine = wk.track(law, start, 2.0, levels=1025)
        rest = fine.error_bound(2.0)
        for levels in (9, 17, 33):
            history = wk.track(law, start, 2.0, levels=levels)
            distance = l1(history.at(2.0), fine.at(2.0), -30.0, 40.0)
            assert history.error_bound(2.0) >= distance - rest
            assert history.error_bound(2.0) <= 6.0 * (distance + rest)


# Departures


@pytest.mark.parametrize("levels", [5, 12])
@pytest.mark.parametrize("name", ALL)
def test_departures_enclose_those_found_by_sampling(name: str, levels: int) -> None:
    """D of every front is at least the hull's total variation, and nearly that.

    The excess allowed is a thousandth of D, or of the largest D of a single cell where that is more.
    """
    law, span = ALL[name]
    history = wk.track(law, random_data(3, span), 3.0, levels=levels)
    pairs = np.unique(history.fronts[["left", "right", "departure"]])
    for left, right, departure in np.random.default_rng(0).permutation(pairs)[:40]:
        exact = quadrature.departure_by_sampling(law.flux, left, right, 20_001)
        slack = 1e-9 * abs(right - left)  # of the sampling: max|f''| w^2 / 4 with w = |right - left| / 20000
        assert departure >= exact - slack
        assert departure - exact <= 1e-3 * max(exact, 2.0 * history.flux_gap) + slack


def test_departures_of_a_displacement_by_quadrature() -> None:
    """Fronts from 1 to 0 on quadratic Corey: fans above the inflection, at most one front across it."""
    law = wk.corey(viscosity_ratio=0.5)
    (inflection,) = law.inflections

    def flux(s: float) -> float:
        return s * s / (s * s + 0.5 * (1.0 - s) ** 2)

    def derivative(s: float) -> float:
        return s * (1.0 - s) / (s * s + 0.5 * (1.0 - s) ** 2) ** 2

    compound = 0
    for levels in range(2, 40):
        history = wk.track(law, wk.Profile([0.0], [1.0, 0.0]), 1.0, levels=levels)
        total = 0.0
        for left, right in history.fronts[["left", "right"]].tolist():
            if right >= inflection:
                total += quadrature.departure_of_fan(flux, derivative, left, right)
            elif left > inflection:
                tangent = quadrature.tangency(flux, derivative, right, (inflection, 0.999))
                if tangent < left:
                    total += quadrature.departure_of_compound(flux, derivative, left, right, tangent)
                    compound += 1
        assert total * (1.0 - 1e-12) <= history.error_bound(1.0) <= total * (1.0 + 1e-3)
    assert compound > 3


# Joined fans


def data_on_grid(seed: int, span: tuple[float, float]) -> wk.Profile:
    """Return 40 random jumps between the 17 coarsest levels, so that finer levels are true refinements."""
    generator = np.random.default_rng(seed)
    levels = np.linspace(*span, 17)
    values = generator.permutation(np.concatenate([levels, generator.choice(levels, 24)]))
    return wk.Profile(np.sort(generator.uniform(0.0, 10.0, 40)), values)


def order(errors: list[float]) -> float:
    """Return the mean observed order of errors at doubled resolutions."""
    return float(np.log2(errors[0] / errors[-1])) / (len(errors) - 1)


def test_joined_fans_are_of_second_order_on_a_convex_law() -> None:
    start = data_on_grid(11, (-1.0, 1.0))
    solution = HopfLax(BURGERS, start.edges, start.values)
    cells = np.linspace(-4.0, 14.0, 10_001)
    exact, width = solution.averages(cells, 2.0), cells[1] - cells[0]
    joined: list[float] = []
    steps: list[float] = []
    for levels in (17, 33, 65, 129, 257):
        history = wk.track(wk.burgers(), start, 2.0, levels=levels)
        for fans, errors in (("joined", joined), ("steps", steps)):
            errors.append(width * float(np.abs(history.averages(cells, 2.0, fans=fans)[0] - exact).sum()))
        assert joined[-1] < steps[-1]
    assert order(joined) >= 1.8, joined
    assert 0.8 < order(steps) < 1.2, steps


@pytest.mark.parametrize("name", BENDING)
def test_joined_fans_are_of_second_order_on_a_bending_law(name: str) -> None:
    """Against the joined answer of a polygon 16 times finer than the finest, thus 1/256 of its error."""
    law, span = BENDING[name]
    start = data_on_grid(5, span)
    cells = np.linspace(-6.0, 18.0, 10_001)
    width = cells[1] - cells[0]
    reference = wk.track(law, start, 2.0, levels=4097, loop="compiled").averages(cells, 2.0)[0]
    errors = []
    for levels in (33, 65, 129, 257):
        history = wk.track(law, start, 2.0, levels=levels)
        errors.append(width * float(np.abs(history.averages(cells, 2.0)[0] - reference).sum()))
    assert order(errors) >= 1.8, errors


@pytest.mark.parametrize("name", ALL)
def test_joining_keeps_the_amount_and_steps_are_the_profile(name: str) -> None:
    law, span = ALL[name]
    history = wk.track(law, random_data(8, span), 1.5, levels=33)
    profile, ends = history.at(1.5), np.array([-40.0, 50.0])
    cuts = np.concatenate((ends[:1], profile.edges, ends[1:]))
    average = float(profile.values @ np.diff(cuts)) / 90.0
    for fans in ("steps", "joined"):
        assert history.averages(ends, 1.5, fans=fans)[0, 0] == pytest.approx(average, rel=1e-13, abs=1e-13)
