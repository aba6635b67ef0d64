"""The cell schemes that the benchmarks measure against do what the textbooks say they do."""

from __future__ import annotations

import math

import numpy as np
import pytest
from benchmarks.finite_volume import BURGERS, CUBIC, CellFlux, displacement, godunov_flux, solve
from scipy.optimize import brentq

CELLS = (50, 100, 200, 400, 800, 1600)


def box_averages(edges: np.ndarray, t: float) -> np.ndarray:
    """Exact averages of the box of height 1 on [0, 1] after its fan has met the shock (t > 2)."""
    head = math.sqrt(2.0 * t)
    return np.diff(np.clip(edges, 0.0, head) ** 2 / (2.0 * t)) / np.diff(edges)


def displacement_averages(edges: np.ndarray, t: float, m: float) -> np.ndarray:
    """Exact averages of the displacement of 0 by 1 from x = 0 (Welge's tangent in closed form)."""
    law = displacement(m)
    tangent, front = math.sqrt(m / (1.0 + m)), 0.5 * (1.0 + math.sqrt(1.0 + 1.0 / m))

    def amount(speed: float) -> float:
        """The integral of s over speeds from 0."""
        if speed <= 0.0:
            return speed
        if speed >= front:
            return 1.0
        s = brentq(lambda s: law.derivative(s) - speed, tangent, 1.0, xtol=1e-15)
        return speed * s - law.flux(s) + 1.0

    return t * np.diff([amount(x / t) for x in edges]) / np.diff(edges)


# Own figures from an earlier code for the same problems (no published table was to be had). Its Courant
# number is not on record; 0.45 fits best, and errors move by about 3 % for each 0.05 of it: hence the 2 %
# below.
BOX = {
    "godunov": (1.40e-1, 8.53e-2, 5.05e-2, 2.93e-2, 1.67e-2, 9.37e-3),
    "limited": (4.48e-2, 2.18e-2, 1.06e-2, 5.26e-3, 2.66e-3, 1.30e-3),
}
STEP = {
    "godunov": (4.94e-2, 2.73e-2, 1.62e-2, 9.28e-3, 5.51e-3, 3.11e-3),
    "limited": (2.36e-2, 1.18e-2, 6.46e-3, 3.30e-3, 2.00e-3, 1.02e-3),
}


@pytest.mark.parametrize("scheme", BOX)
def test_errors_on_the_burgers_box_are_those_of_an_earlier_code(scheme: str) -> None:
    for cells, expected in zip(CELLS, BOX[scheme], strict=True):
        edges = np.linspace(-1.0, 4.0, cells + 1)
        start = np.diff(edges.clip(0.0, 1.0)) / np.diff(edges)
        found = solve(BURGERS, start, 5.0 / cells, 4.0, cfl=0.45, scheme=scheme)
        error = 5.0 / cells * np.abs(found - box_averages(edges, 4.0)).sum()
        assert error == pytest.approx(expected, rel=0.02)


@pytest.mark.slow
@pytest.mark.parametrize("scheme", STEP)
def test_errors_on_the_displacement_step_are_those_of_an_earlier_code(scheme: str) -> None:
    law = displacement(0.5)
    for cells, expected in zip(CELLS, STEP[scheme], strict=True):
        edges = np.linspace(-0.5, 1.5, cells + 1)
        start = np.diff(np.minimum(edges, 0.0)) / np.diff(edges)
        found = solve(law, start, 2.0 / cells, 0.5, cfl=0.45, scheme=scheme)
        error = 2.0 / cells * np.abs(found - displacement_averages(edges, 0.5, 0.5)).sum()
        assert error == pytest.approx(expected, rel=0.02)


def smooth_averages(edges: np.ndarray, t: float) -> np.ndarray:
    """Averages of Burgers' solution with data sin(2 pi x) before it breaks, along characteristics.

    With x = y + t u0(y) the integral of u dx is that of u0 (1 + t u0') dy = U0 + t u0^2 / 2.
    """
    feet = edges.copy()
    for _ in range(60):
        slope = 1.0 + t * 2.0 * np.pi * np.cos(2.0 * np.pi * feet)
        feet -= (feet + t * np.sin(2.0 * np.pi * feet) - edges) / slope
    amounts = -np.cos(2.0 * np.pi * feet) / (2.0 * np.pi) + 0.5 * t * np.sin(2.0 * np.pi * feet) ** 2
    return np.diff(amounts) / np.diff(edges)


@pytest.mark.parametrize("scheme, expected", [("godunov", 1.0), ("limited", 1.9), ("weno5", 4.5)])
def test_schemes_reach_their_order_on_smooth_waves(scheme: str, expected: float) -> None:
    """Minmod clips the extrema, which costs it a little; the time step of weno5 is cut to dx^(5/3)."""
    errors = []
    for cells in (80, 160, 320):
        edges = np.linspace(0.0, 1.0, cells + 1)
        cfl = 0.5 * (40.0 / cells) ** (2.0 / 3.0) if scheme == "weno5" else 0.4
        start = smooth_averages(edges, 0.0)
        found = solve(BURGERS, start, 1.0 / cells, 0.08, cfl=cfl, boundary="periodic", scheme=scheme)
        errors.append(np.abs(found - smooth_averages(edges, 0.08)).mean())
    observed = math.log2(errors[-2] / errors[-1])
    assert expected - 0.15 < observed < expected + 1.2, errors


@pytest.mark.slow
@pytest.mark.parametrize("scheme", ["godunov", "limited", "weno5", "unfixed"])
@pytest.mark.parametrize("law", [BURGERS, displacement(0.5), CUBIC], ids=["burgers", "corey", "cubic"])
def test_schemes_conserve_on_a_ring(law: CellFlux, scheme: str) -> None:
    start = np.random.default_rng(3).uniform(0.0, 1.0, 100)
    found = solve(law, start, 0.01, 0.7, boundary="periodic", scheme=scheme)
    assert found.mean() == pytest.approx(start.mean(), abs=1e-14)
    if scheme != "weno5":
        assert start.min() - 1e-12 <= found.min() and found.max() <= start.max() + 1e-12


@pytest.mark.parametrize("scheme", ["godunov", "limited", "weno5", "unfixed"])
def test_only_the_unfixed_scheme_keeps_an_expansion_shock(scheme: str) -> None:
    start = np.where(np.arange(100) < 50, -1.0, 1.0)
    found = solve(BURGERS, start, 0.02, 0.5, scheme=scheme)
    assert np.array_equal(found, start) == (scheme == "unfixed")


def test_flux_with_its_extrema_between_the_states_is_the_exact_one() -> None:
    """Burgers over its sonic state: -1 | 1 lets nothing through, 1 | -1 lets 1/2 through."""
    assert godunov_flux(BURGERS.flux, BURGERS.extrema, -1.0, 1.0) == 0.0
    assert godunov_flux(BURGERS.flux, BURGERS.extrema, 1.0, -1.0) == 0.5
