"""Laws from tables and from scattered observations."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
import pytest
import wavekin as wk
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import minimize
from wavekin.laws import fit_law, law_from_spec

tables = st.lists(st.tuples(st.integers(1, 4), st.integers(-4, 4)), min_size=1, max_size=9)
many = settings(max_examples=200, deadline=None, derandomize=True)


def columns(rows: list[tuple[int, int]], ordered: int = 0) -> tuple[np.ndarray, np.ndarray]:
    """Return states and fluxes from widths and slopes; with `ordered` the slopes rise (1) or fall (-1)."""
    widths = np.array([width for width, _ in rows]) / 4.0
    slopes = np.array([slope for _, slope in rows]) / 2.0
    slopes = np.sort(slopes)[:: ordered or 1] if ordered else slopes
    return np.concatenate([[0.0], np.cumsum(widths)]), np.concatenate([[1.0], 1.0 + np.cumsum(widths * slopes)])


@many
@given(tables)
def test_polygon_is_the_table_and_exact(rows: list[tuple[int, int]]) -> None:
    u, f = columns(rows)
    law = wk.table_law(u, f)
    s = np.linspace(u[0], u[-1], 97)
    assert np.array_equal(law.flux(s), np.interp(s, u, f))
    assert law.polygon is not None
    assert np.array_equal(law.polygon[0], u)
    assert {piece.bend for piece in law.pieces} == {0}
    assert law.derivative(u[:-1]) == pytest.approx(np.diff(f) / np.diff(u))
    again = law_from_spec(law.spec)
    assert again.spec == law.spec
    assert np.array_equal(again.flux(s), law.flux(s))


@many
@given(tables)
def test_smooth_reading_rises_and_falls_as_the_rows_do(rows: list[tuple[int, int]]) -> None:
    u, f = columns(rows)
    law = wk.table_law(u, f, "smooth")
    assert law.flux(u) == pytest.approx(f, abs=1e-13)
    for (a, b), rise in zip(pairwise(u), np.diff(f), strict=True):
        inside = law.flux(np.linspace(a, b, 41))
        assert (np.diff(inside) * np.sign(rise) >= -1e-13).all()
        assert np.ptp(inside) <= abs(rise) + 1e-13
    kinks = set(law.kinks)
    slopes = law.derivative(u[1:-1]), law.derivative(np.nextafter(u[1:-1], u[0]))
    assert all(x in kinks or abs(p - q) < 1e-9 for x, p, q in zip(u[1:-1].tolist(), *slopes, strict=True))
    again = law_from_spec(law.spec)
    assert np.array_equal(again.flux(u), law.flux(u))
    assert again.pieces == law.pieces


@many
@given(tables, st.sampled_from([-1, 1]))
def test_smooth_reading_of_a_bent_table_bends_one_way(rows: list[tuple[int, int]], bend: int) -> None:
    law = wk.table_law(*columns(rows, bend), "smooth")
    assert {piece.bend for piece in law.pieces} <= {0, bend}


@many
@given(tables)
def test_pieces_of_the_smooth_reading_bend_as_they_say(rows: list[tuple[int, int]]) -> None:
    law = wk.table_law(*columns(rows), "smooth")
    assert law.second_derivative is not None
    for piece in law.pieces:
        s = np.linspace(piece.start, piece.end, 23)[1:-1]
        assert (np.sign(law.second_derivative(s)) == piece.bend).all()


def test_smooth_reading_gives_back_parabolas_and_is_of_third_order() -> None:
    u = np.array([0.0, 0.1, 0.35, 0.5, 0.9, 1.0])
    s = np.linspace(0.0, 1.0, 1001)
    assert wk.table_law(u, u * u, "smooth").flux(s) == pytest.approx(s * s, abs=1e-15)
    corey = wk.corey(viscosity_ratio=0.5)
    errors = []
    for n in (32, 64, 128):
        nodes = np.linspace(0.0, 1.0, n + 1)
        law = wk.table_law(nodes, corey.flux(nodes), "smooth")
        errors.append(float(np.abs(law.flux(s) - corey.flux(s)).max()))
        assert [piece.bend for piece in law.pieces] == [1, -1]
        assert law.inflections == pytest.approx(corey.inflections, abs=0.5 / n)
    assert math.log2(errors[0] / errors[2]) / 2.0 > 2.7


@pytest.mark.parametrize(
    "u, f, reading, words",
    [
        ([0.0], [1.0], "polygon", ["two rows"]),
        ([0.0, 1.0], [1.0], "polygon", ["same length"]),
        ([[0.0, 1.0]], [[1.0, 2.0]], "polygon", ["two columns"]),
        ([0.0, 1.0, 1.0], [0.0, 1.0, 2.0], "polygon", ["row 3", "1.0", "doubles"]),
        ([0.0, 2.0, 1.0], [0.0, 1.0, 2.0], "smooth", ["row 3", "sort"]),
        ([0.0, math.nan, 1.0], [0.0, 1.0, 2.0], "polygon", ["row 2", "finite"]),
        ([0.0, 1.0], [0.0, math.inf], "smooth", ["row 2", "finite"]),
        (["a", "b"], [0.0, 1.0], "polygon", ["numbers"]),
        ([0.0, 1.0], [0.0, 1.0], "polygone", ["polygon?"]),
    ],
)
def test_bad_tables_get_one_sentence(u: list, f: list, reading: str, words: list[str]) -> None:
    with pytest.raises(wk.InputError) as caught:
        wk.table_law(u, f, reading)
    assert all(word in str(caught.value) for word in words), str(caught.value)


# Fits


def observations(count: int = 150) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(11)
    u = rng.random(count)
    return u, u * (1.0 - u) + 0.02 * rng.standard_normal(count)


def demands(knots: np.ndarray, shape: str) -> np.ndarray:
    slopes = np.diff(np.eye(len(knots)), axis=0) / np.diff(knots)[:, None]
    return {"concave": -np.diff(slopes, axis=0), "convex": np.diff(slopes, axis=0), "increasing": slopes,
            "decreasing": -slopes, "free": slopes[:0]}[shape]  # fmt: skip


@pytest.mark.parametrize("shape", ["free", "concave", "convex", "increasing", "decreasing"])
@pytest.mark.parametrize("through", [(), ((0.0, 0.01),)])
def test_fit_is_the_least_squares_under_its_shape(shape: str, through: tuple) -> None:
    """Against scipy's sequential quadratic programming, another method."""
    u, f = observations()
    fit = fit_law(u, f, knots=7, shape=shape, range=(0.0, 1.0), through=through)
    rows = demands(fit.knots, shape)
    assert (rows @ fit.fluxes >= -1e-12).all()

    def squares(values: np.ndarray) -> float:
        return float(np.sum((np.interp(u, fit.knots, values) - f) ** 2))

    held = [{"type": "ineq", "fun": lambda values: rows @ values}] if len(rows) else []
    held += [{"type": "eq", "fun": lambda values: values[0] - 0.01}] if through else []
    other = minimize(
        squares, np.full(len(fit.knots), 0.1), constraints=held, method="SLSQP", options={"ftol": 1e-15, "maxiter": 500}
    )
    assert squares(fit.fluxes) <= other.fun * (1 + 1e-9)
    assert fit.fluxes == pytest.approx(other.x, abs=1e-6)
    if through:
        assert fit.fluxes[0] == 0.01


def test_residuals_are_those_of_the_law_and_reported() -> None:
    u, f = observations()
    for reading in ("polygon", "smooth"):
        fit = fit_law(u, f, through=[(0.0, 0.0), (1.0, 0.0)], reading=reading)
        assert fit.residuals == pytest.approx(f - fit.law.flux(u))
        assert fit.rms == pytest.approx(np.sqrt(np.mean(fit.residuals**2)))
        assert 0.015 < fit.rms < 0.025  # the noise put in is 0.02
        assert f"{fit.rms:.4g} rms" in str(fit)
        assert {piece.bend for piece in fit.law.pieces} <= {0, -1}
        assert law_from_spec(fit.law.spec).flux(u) == pytest.approx(fit.law.flux(u))


def test_order_of_the_observations_does_not_matter() -> None:
    u, f = observations()
    turned = fit_law(u[::-1], f[::-1])
    assert turned.fluxes == pytest.approx(fit_law(u, f).fluxes, abs=1e-12)


def test_data_of_the_shape_are_met_exactly() -> None:
    u = np.linspace(0.0, 4.0, 9)
    f = np.minimum(2.0 * u, 4.0 - 0.5 * u)
    fit = fit_law(u, f, knots=[0.0, 1.6, 4.0])
    assert fit.largest < 1e-14
    assert fit.fluxes == pytest.approx([0.0, 3.2, 2.0], abs=1e-14)


@pytest.mark.parametrize(
    "change, words",
    [
        ({"shape": "round"}, ["shape", "concave"]),
        ({"reading": "line"}, ["reading"]),
        ({"knots": 1}, ["knots", "at least 2"]),
        ({"knots": 1000}, ["knots", "fewer"]),
        ({"knots": [0.0, 3.0]}, ["knots", "states from"]),
        ({"range": (0.4, 0.6)}, ["range", "0.4", "0.6"]),
        ({"through": [(0.0, 0.0, 0.0)]}, ["through", "pairs"]),
        ({"through": [(0.0, 0.0), (0.0, 1.0)]}, ["through", "one a state"]),
        ({"through": [(0.0, 0.0), (0.5, -1.0), (1.0, 0.0)]}, ["through", "concave"]),
        ({"u": [0.0, math.nan]}, ["same length"]),
    ],
)
def test_bad_fits_get_one_sentence(change: dict, words: list[str]) -> None:
    u, f = observations()
    with pytest.raises(wk.InputError) as caught:
        fit_law(**({"u": u, "f": f} | change))
    assert all(word in str(caught.value) for word in words), str(caught.value)
