"""Laws and data from formulas: safe whatever the text, exact where it is a formula."""

from __future__ import annotations

import math
import time
from collections.abc import Callable

import mpmath
import numpy as np
import pytest
import wavekin as wk
from hypothesis import given, settings
from hypothesis import strategies as st
from wavekin.laws import formula_law
from wavekin.laws.formula import FUNCTIONS, formula_function

HOSTILE = [
    "__import__('os').system('true')",
    "().__class__.__bases__[0].__subclasses__()",
    "u.__class__",
    "u.tofile('/tmp/x')",
    "getattr(u, 'shape')",
    "eval('u')",
    "exec('u')",
    "open('/etc/passwd')",
    "(lambda: u)()",
    "lambda u: u",
    "[u for u in (1,)]",
    "[*u]",
    "{u: u}",
    "(u, u)",
    "u[0]",
    "u if u else 1",
    "u and 1",
    "not u",
    "~u",
    "u < 1",
    "u @ u",
    "u // 2",
    "u % 2",
    "u << 2",
    "u | 1",
    "f'{u}'",
    "'a' * 9",
    "b'a'",
    "1j * u",
    "True * u",
    "None",
    "...",
    "exp(x=u)",
    "exp(*[u])",
    "exp(**{})",
    "exp(u)(u)",
    "FUNCTIONS",
    "print",
    "exp",
    "nan * u",
    "inf * u",
    "u := 1",
    "u = 1",
    "u; u",
    "u\nimport os",
    "import os",
    "await u",
    "yield u",
    "u\x00",
    "u!",
    "u # \ud800",
    "\u2026",
    "",
    "   ",
    "u" * 3000,
    "(" * 400 + "u" + ")" * 400,
    "-" * 1900 + "u",
    "u" + "+u" * 900,
    "u" + "**u" * 500,
    "exp(" * 200 + "u" + ")" * 200,
    "1" * 1999,
    "1e400 * u",
    "9**9**9**9*u",
    "9**(99**9) * u",
    "((((10**100)**100)**100)**100)**100 * u",
    "u**(10**9)",
    "u**1e9",
    "min(u)",
    "max(u, 1, 2)",
    "u^2",
    "sqrt(-1)",
    "0*u/0",
    "exp(exp(exp(u + 9)))",
]


@pytest.mark.parametrize("text", HOSTILE)
def test_hostile_text_gets_one_sentence_at_once(text: str) -> None:
    begun = time.perf_counter()
    with pytest.raises(wk.InputError) as caught:
        formula_law(text, (0.0, 1.0))
    assert time.perf_counter() - begun < 1.0
    assert caught.value.key == "formula"
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize("text", [5, None, ["u"], b"u"])
def test_what_is_no_text_is_refused(text: object) -> None:
    with pytest.raises(wk.InputError):
        formula_function(text, "x")  # type: ignore[arg-type]


@settings(max_examples=300, deadline=None, derandomize=True)
@given(st.text(alphabet="u0123456789.+-*/()^ ,eMxpisnqrtabm_[]'\"=<>", max_size=40))
def test_any_text_is_a_formula_or_a_sentence(text: str) -> None:
    try:
        law = formula_law(text, (0.1, 0.9), {"M": 0.5})
    except wk.InputError:
        return
    u = np.linspace(0.1, 0.9, 17)
    assert np.isfinite(law.flux(u)).all()
    assert not np.isnan(law.derivative(u)).any()


@pytest.mark.parametrize(
    "text, parameters, words",
    [
        ("v + u", {}, ["'v'"]),
        ("Mu * u", {"M_u": 1.0}, ["M_u"]),
        ("sine(u)", {}, ["sin?"]),
        ("u^2", {}, ["**"]),
        ("M * u", {"M": "5"}, ["parameters.M", "number"]),
        ("M * u", {"M": math.nan}, ["parameters.M", "number"]),
        ("M * u", {"M": True}, ["parameters.M", "number"]),
        ("M * u", {"u": 1.0}, ["parameters.u", "variable"]),
        ("M * u", {"pi": 3.0}, ["parameters.pi"]),
        ("M * u", {"exp": 1.0}, ["parameters.exp"]),
        ("M * u", {"a b": 1.0}, ["parameters.a b", "letters"]),
    ],
)
def test_names_are_told_with_the_nearest_known_one(text: str, parameters: dict, words: list[str]) -> None:
    with pytest.raises(wk.InputError) as caught:
        formula_law(text, (0.0, 1.0), parameters)
    assert all(word in str(caught.value) for word in words), str(caught.value)


@pytest.mark.parametrize(
    "text",
    [
        "1/u",
        "log(u)",
        "u**-0.5",
        "1/(u - 0.123456789)",
        "1/(u - 0.123456789)**2",
        "(u - 0.123456789)**-2",
        "log(abs(u - 0.123456789))",
        "sqrt((u - 0.123456789)**2 - 1e-12)",
        "((u - 0.123456789)**2 - 1e-12)**1.5",
        "tan(3*u)",
        "u/abs(u - 0.3)",
        "exp(1000*u)",
    ],
)
def test_singular_formulas_are_refused_even_between_samples(text: str) -> None:
    with pytest.raises(wk.InputError) as caught:
        formula_law(text, (0.0, 1.0))
    assert "u = " in str(caught.value)
    assert "range" in str(caught.value)


SMOOTH: list[tuple[str, Callable]] = [
    ("u**2/(u**2 + M*(1-u)**2)", lambda u: u**2 / (u**2 + (1 - u) ** 2 / 2)),
    ("exp(-u)*sin(3*u) + tanh(u)", lambda u: mpmath.exp(-u) * mpmath.sin(3 * u) + mpmath.tanh(u)),
    ("log(1+u)*cos(pi*u)", lambda u: mpmath.log(1 + u) * mpmath.cos(mpmath.pi * u)),
    ("sqrt(1+u*u) - tan(u)", lambda u: mpmath.sqrt(1 + u * u) - mpmath.tan(u)),
    ("2**u + u**(1+u) + (u+1)**-1.5", lambda u: 2**u + u ** (1 + u) + (u + 1) ** mpmath.mpf(-1.5)),
    ("u**1.5*(1-u)**M - -u/3", lambda u: u ** mpmath.mpf(1.5) * (1 - u) ** mpmath.mpf(0.5) + u / 3),
    ("abs(u-2)*max(u, 3)*min(u, 0.5*u)", lambda u: (2 - u) * 3 * u / 2),
]


@pytest.mark.parametrize("text, exact", SMOOTH)
def test_values_and_derivatives_are_exact(text: str, exact: Callable) -> None:
    law = formula_law(text, (0.05, 0.95), {"M": 0.5})
    u = np.linspace(0.1, 0.9, 9)
    assert law.second_derivative is not None
    with mpmath.workdps(30):
        for order, function in enumerate((law.flux, law.derivative, law.second_derivative)):
            wanted = [float(mpmath.diff(exact, mpmath.mpf(float(x)), order)) for x in u]
            assert function(u) == pytest.approx(wanted, rel=1e-12, abs=1e-13)


@pytest.mark.parametrize(
    "text, kinks, turns, bends",
    [
        ("u**2/2", [], [], [1]),
        ("3*u", [], [], [0]),
        ("2", [], [], [0]),
        ("abs(u-1/3)", [1 / 3], [], [0, 0]),
        ("min(u, 1-u)", [0.5], [], [0, 0]),
        ("min(2*u, max(0.5, u))", [0.25, 0.5], [], [0, 0, 0]),
        ("max(u, u)", [], [], [0]),
        ("max(u-0.5, 0)**2", [], [], [0, 1]),
        ("(u-0.5)*abs(u-0.5)", [], [0.5], [-1, 1]),
        ("sqrt((u-0.25)**2)", [0.25], [], [0, 0]),
        ("sin(2*pi*u)", [], [0.5], [-1, 1]),
        ("u**1.5", [], [], [1]),
        ("sqrt(u*(1-u))", [], [], [-1]),
    ],
)
def test_shape_of_a_formula_is_found(text: str, kinks: list, turns: list, bends: list[int]) -> None:
    law = formula_law(text, (0.0, 1.0))
    assert law.kinks == pytest.approx(kinks, abs=1e-15)
    assert law.inflections == pytest.approx(turns, abs=1e-14)
    assert [piece.bend for piece in law.pieces] == bends
    assert not np.isnan(law.derivative(np.array([0.0, 1.0, *kinks]))).any()


def test_formula_of_a_named_law_is_that_law() -> None:
    named, own = wk.corey(viscosity_ratio=0.5), formula_law("u**2/(u**2 + M*(1-u)**2)", (0, 1), {"M": 0.5})
    u = np.linspace(0.0, 1.0, 101)
    assert own.flux(u) == pytest.approx(named.flux(u), rel=1e-15)
    assert own.inflections == pytest.approx(named.inflections, abs=1e-14)
    again = wk.law_from_spec(own.spec)
    assert np.array_equal(again.flux(u), own.flux(u))
    assert again.spec == own.spec
    assert again.pieces == own.pieces


def test_states_a_rounding_beyond_the_range_count_as_its_ends() -> None:
    law = formula_law("sqrt(u - 0.1) * sqrt(0.3 - u)", (0.1, 0.3))
    assert law.flux(np.array([np.nextafter(0.1, 0.0), np.nextafter(0.3, 1.0)])) == pytest.approx([0.0, 0.0], abs=1e-9)


def test_letters_of_any_alphabet_may_name_parameters() -> None:
    """Python's parser spells the micro sign as the Greek letter; both find the parameter."""
    for name in ("\u00b5", "\u03bc"):
        assert formula_law("\u00b5*u", (0, 1), {name: 2.0}).flux(np.array([0.5]))[0] == 1.0


def test_data_formulas_are_functions_of_x_that_keep_the_shape() -> None:
    function = formula_function("A*sin(2*pi*x)", "x", {"A": 3.0})
    x = np.linspace(0.0, 1.0, 6).reshape(2, 3)
    assert function(x) == pytest.approx(3.0 * np.sin(2.0 * np.pi * x), rel=1e-15)
    assert formula_function("1", "x")(x).shape == (2, 3)
    with pytest.raises(wk.InputError):
        formula_function("u", "x")


def test_every_function_is_known_to_both_walks() -> None:
    for name in FUNCTIONS:
        two = name in ("min", "max")
        law = formula_law(f"{name}(u{', 2*u' if two else ''}) + u", (0.2, 0.8))
        step = 1e-6
        u = np.array([0.3, 0.5, 0.7])
        assert law.derivative(u) == pytest.approx((law.flux(u + step) - law.flux(u - step)) / (2 * step), rel=1e-8)
