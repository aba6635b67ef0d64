"""Laws: derivatives, bends, specs and what a bare function is found to be."""

from __future__ import annotations

import itertools
import json
import math
import subprocess
import sys
from collections.abc import Callable
from inspect import signature

import mpmath
import numpy as np
import pytest
import wavekin as wk
from wavekin.laws import NAMED, Law, Units, law_from_spec, with_units

#: Named laws, the awkward corners of their parameters among them.
LAWS: dict[str, tuple[str, dict[str, float]]] = {
    "burgers": ("burgers", {"low": -2.0, "high": 3.0}),
    "cubic": ("cubic", {"low": -2.0, "high": 3.0}),
    "transport": ("transport", {"speed": -0.3, "low": -1.0, "high": 1.0}),
    "corey": ("corey", {"viscosity_ratio": 0.5}),
    "corey, thin": ("corey", {"viscosity_ratio": 1e-6}),
    "corey, thick": ("corey", {"viscosity_ratio": 1e6}),
    "corey, straight": ("corey", {"viscosity_ratio": 0.2, "exponent_displacing": 1.0, "exponent_displaced": 1.0}),
    "corey, steep": ("corey", {"viscosity_ratio": 0.5, "exponent_displacing": 1.3, "exponent_displaced": 1.7}),
    "corey, dip": (
        "corey",
        {
            "viscosity_ratio": 0.3,
            "exponent_displacing": 4.0,
            "exponent_displaced": 3.0,
            "gravity": 5.0,
            "endpoint_ratio": 2.0,
            "connate": 0.2,
            "residual": 0.25,
        },
    ),
    "corey, down dip": ("corey", {"viscosity_ratio": 0.3, "gravity": -3.0}),
    "brooks_corey": ("brooks_corey", {"conductivity": 0.6, "pore_index": 1.7, "saturated": 0.42, "residual": 0.05}),
    "greenshields": ("greenshields", {"free_speed": 90.0, "jam_density": 140.0}),
    "triangular": ("triangular", {"free_speed": 90.0, "jam_density": 140.0, "capacity": 1900.0}),
    "greenberg": ("greenberg", {"optimum_speed": 28.0, "jam_density": 140.0}),
    "underwood": ("underwood", {"free_speed": 90.0, "optimum_density": 30.0, "largest_density": 140.0}),
    "smulders": ("smulders", {"free_speed": 90.0, "jam_density": 140.0, "critical_density": 28.0}),
    "richardson_zaki": ("richardson_zaki", {"terminal_velocity": 1e-3, "maximum": 0.6}),
    "richardson_zaki, 1": ("richardson_zaki", {"terminal_velocity": 1e-3, "exponent": 1.0}),
    "richardson_zaki, 1.5": ("richardson_zaki", {"terminal_velocity": 1e-3, "exponent": 1.5}),
    "vesilind": ("vesilind", {"velocity": 8.0, "decay": 0.45, "maximum": 15.0, "underflow": 0.5}),
    "manning": ("manning", {"slope": 1e-3, "roughness": 0.03, "deepest": 5.0}),
    "chezy": ("chezy", {"slope": 1e-3, "coefficient": 50.0, "deepest": 5.0}),
    "laminar": ("laminar", {"slope": 0.01}),
    "trapezoidal": ("trapezoidal", {"slope": 1e-3, "roughness": 0.03, "bottom_width": 4.0, "side_slope": 1.5}),
    "trapezoidal, rectangular": ("trapezoidal", {"slope": 1e-3, "roughness": 0.03, "bottom_width": 4.0}),
    "trapezoidal, triangular": (
        "trapezoidal",
        {"slope": 1e-3, "roughness": 0.03, "bottom_width": 0.0, "side_slope": 2.0},
    ),
    "langmuir": (
        "langmuir",
        {"velocity": 0.5, "phase_ratio": 0.5, "capacity": 5.0, "affinity": 1.0, "largest": 2.0},
    ),
    "freundlich": (
        "freundlich",
        {"velocity": 0.5, "phase_ratio": 0.5, "coefficient": 2.0, "exponent": 0.7, "largest": 2.0},
    ),
    "freundlich, steep": (
        "freundlich",
        {"velocity": 0.5, "phase_ratio": 0.5, "coefficient": 2.0, "exponent": 0.3, "largest": 2.0},
    ),
    "freundlich, convex isotherm": (
        "freundlich",
        {"velocity": 0.5, "phase_ratio": 0.5, "coefficient": 2.0, "exponent": 1.6, "largest": 2.0},
    ),
}
all_laws = pytest.mark.parametrize("key", sorted(LAWS))
mp = mpmath.mp.clone()
mp.dps = 40


def law_of(key: str) -> Law:
    name, parameters = LAWS[key]
    return NAMED[name](**parameters)


def trapezoid(a: mpmath.mpf, p: dict) -> mpmath.mpf:
    b, z = p["bottom_width"], p.get("side_slope", 0.0)
    h = a / b if z == 0 else (mp.sqrt(b * b + 4 * z * a) - b) / (2 * z)
    wetted = b + 2 * h * mp.sqrt(1 + mp.mpf(z) ** 2)
    return mp.sqrt(p["slope"]) / p["roughness"] * a ** (mp.mpf(5) / 3) / wetted ** (mp.mpf(2) / 3)


def corey(s: mpmath.mpf, p: dict) -> mpmath.mpf:
    low, high = mp.mpf(p.get("connate", 0.0)), 1 - mp.mpf(p.get("residual", 0.0))
    e = (s - low) / (high - low)
    water = e ** p.get("exponent_displacing", 2)
    oil = (1 - e) ** p.get("exponent_displaced", 2)
    mobility = mp.mpf(p["viscosity_ratio"]) * p.get("endpoint_ratio", 1)
    return water / (water + mobility * oil) * (1 - p.get("gravity", 0) * oil)


def sorbed(total: mpmath.mpf, p: dict, held: Callable[[mpmath.mpf], mpmath.mpf]) -> mpmath.mpf:
    c = mp.findroot(lambda x: x + p["phase_ratio"] * held(x) - total, (mp.mpf(10) ** -30, total), solver="anderson")
    return p["velocity"] * c


#: The same laws written once more in 40 digits, from their published formulas.
FORMULAS: dict[str, Callable[[mpmath.mpf, dict], mpmath.mpf]] = {
    "burgers": lambda u, p: u * u / 2,
    "cubic": lambda u, p: u**3,
    "transport": lambda u, p: p["speed"] * u,
    "corey": corey,
    "brooks_corey": lambda u, p: (
        p["conductivity"]
        * ((u - p["residual"]) / (mp.mpf(p["saturated"]) - p["residual"])) ** (3 + 2 / mp.mpf(p["pore_index"]))
    ),
    "greenshields": lambda k, p: p["free_speed"] * k * (1 - k / p["jam_density"]),
    "triangular": lambda k, p: min(
        p["free_speed"] * k,
        p["capacity"] * (p["jam_density"] - k) / (p["jam_density"] - mp.mpf(p["capacity"]) / p["free_speed"]),
    ),
    "greenberg": lambda k, p: p["optimum_speed"] * k * mp.log(p["jam_density"] / k),
    "underwood": lambda k, p: p["free_speed"] * k * mp.exp(-k / p["optimum_density"]),
    "smulders": lambda k, p: (
        p["free_speed"] * k * (1 - k / p["jam_density"])
        if k < p["critical_density"]
        else p["free_speed"] * p["critical_density"] * (1 - k / p["jam_density"])
    ),
    "richardson_zaki": lambda u, p: p["terminal_velocity"] * u * (1 - u) ** p.get("exponent", 4.65),
    "vesilind": lambda c, p: p["velocity"] * c * mp.exp(-p["decay"] * c) + p["underflow"] * c,
    "manning": lambda h, p: mp.sqrt(p["slope"]) / p["roughness"] * h ** (mp.mpf(5) / 3),
    "chezy": lambda h, p: p["coefficient"] * mp.sqrt(p["slope"]) * h ** mp.mpf(1.5),
    "laminar": lambda h, p: mp.mpf(9.80665) * p["slope"] / (3 * mp.mpf(1e-6)) * h**3,
    "trapezoidal": trapezoid,
    "langmuir": lambda t, p: sorbed(t, p, lambda c: p["capacity"] * p["affinity"] * c / (1 + p["affinity"] * c)),
    "freundlich": lambda t, p: sorbed(t, p, lambda c: p["coefficient"] * c ** p["exponent"]),
}


@all_laws
def test_flux_and_derivatives_are_those_of_the_formula_in_forty_digits(key: str) -> None:
    law, (name, parameters) = law_of(key), LAWS[key]
    a, b = law.range
    u = a + (b - a) * np.array([0.013, 0.11, 0.29, 0.47, 0.61, 0.83, 0.97])
    u = np.array([x for x in u if all(abs(x - kink) > 1e-3 * (b - a) for kink in law.kinks)])
    step = mp.mpf(b - a) * mp.mpf(10) ** -8
    for x, flux, slope, curve in zip(
        u, law.flux(u), law.derivative(u), law.second_derivative(u), strict=True
    ):  # fmt: skip
        low, middle, high = (FORMULAS[name](mp.mpf(float(x)) + k * step, parameters) for k in (-1, 0, 1))
        assert flux == pytest.approx(float(middle), rel=2e-14, abs=2e-16 * float(np.abs(law.flux(u)).max()))
        assert slope == pytest.approx(float((high - low) / (2 * step)), rel=1e-11, abs=1e-13)
        assert curve == pytest.approx(float((high - 2 * middle + low) / step**2), rel=1e-10, abs=1e-10)


@all_laws
def test_ends_of_the_range_are_exact_and_quiet(key: str) -> None:
    law = law_of(key)
    ends = np.array(law.range)
    assert np.isfinite(law.flux(ends)).all()
    assert not np.isnan(law.derivative(ends)).any()
    assert law.second_derivative is not None
    assert not np.isnan(law.second_derivative(ends)).any()
    if ends[0] == 0.0:
        assert law.flux(ends)[0] == 0.0
    assert law.flux(ends[:1])[0] == law.flux(np.array([ends[0], 0.5 * ends.sum()]))[0]


@all_laws
def test_states_a_rounding_beyond_the_range_are_harmless(key: str) -> None:
    law = law_of(key)
    a, b = law.range
    beyond = np.array([np.nextafter(a, -np.inf), np.nextafter(b, np.inf)])
    scale = np.abs(law.flux(np.linspace(a, b, 9))).max()
    assert law.flux(beyond) == pytest.approx(law.flux(np.array([a, b])), rel=1e-12, abs=1e-12 * scale)
    assert not np.isnan(law.derivative(beyond)).any()


@all_laws
def test_every_piece_bends_as_it_says_by_independent_sampling(key: str) -> None:
    law = law_of(key)
    rng = np.random.default_rng(5)
    assert law.pieces[0].start == law.range[0]
    assert law.pieces[-1].end == law.range[1]
    assert all(one.end == other.start for one, other in itertools.pairwise(law.pieces))
    for piece in law.pieces:
        three = np.sort(piece.start + (piece.end - piece.start) * rng.random((500, 3)), axis=1)
        f = law.flux(three.ravel()).reshape(three.shape)
        share = (three[:, 1] - three[:, 0]) / (three[:, 2] - three[:, 0])
        excess = f[:, 0] + share * (f[:, 2] - f[:, 0]) - f[:, 1]  # positive where convex
        noise = 1e-14 * np.abs(f).max()
        if piece.bend == 0:
            assert np.abs(excess).max() <= noise
        else:
            assert (piece.bend * excess).min() >= -noise
            assert (piece.bend * excess).max() > noise


@all_laws
def test_inflections_are_where_the_curvature_vanishes(key: str) -> None:
    law = law_of(key)
    assert law.second_derivative is not None
    for turn in law.inflections:
        beside = np.array([turn * (1 - 1e-9), turn, turn * (1 + 1e-9)]) + np.array([-1e-12, 0, 1e-12])
        before, at, after = law.second_derivative(beside)
        assert before * after < 0.0
        assert abs(at) <= 1e-5 * max(abs(before), abs(after))  # the state is right to 14 digits


def test_closed_forms_of_inflections() -> None:
    """The derivations stand in the laws; the figures are found anew from the formulas."""
    assert law_of("richardson_zaki").inflections == (2.0 / 5.65,)
    assert law_of("vesilind").inflections == (2.0 / 0.45,)
    assert law_of("underwood").inflections == (60.0,)
    for m in (1e-10, 1e-3, 0.5, 1.0, 3.0, 1e8):
        turn = NAMED["corey"](viscosity_ratio=m).inflections[0]
        exact = mp.findroot(
            lambda s, m=m: 3 * s**2 - 2 * s**3 - m / (1 + mp.mpf(m)),
            (mp.mpf(turn), mp.mpf(turn) * (1 - mp.mpf(10) ** -9)),
        )
        assert turn == pytest.approx(float(exact), rel=4e-15)


@all_laws
def test_spec_builds_the_same_law_again(key: str) -> None:
    law = with_units(law_of(key), {"x": "mi"})
    again = law_from_spec(json.loads(json.dumps(law.spec)))
    u = np.linspace(*law.range, 101)
    assert np.array_equal(law.flux(u), again.flux(u))
    assert (again.pieces, again.units, again.name, again.range) == (law.pieces, law.units, law.name, law.range)
    assert again.spec == law.spec
    assert again.units.x == "mi"


def test_every_named_law_is_tested_and_says_what_it_is() -> None:
    assert {name for name, _ in LAWS.values()} == set(NAMED)
    for key in LAWS:
        law = law_of(key)
        assert law.formula
        assert law.source
        assert law.units != Units() or key.split(",")[0] in ("cubic", "transport")
        assert list(law.parameters) == [name for name in signature(NAMED[law.name]).parameters if name != "units"]
        assert f"{law.name}" in repr(law)


@pytest.mark.parametrize("name", sorted(NAMED))
def test_every_parameter_refuses_what_cannot_be(name: str) -> None:
    good = next(parameters for law, parameters in LAWS.values() if law == name)
    for parameter in signature(NAMED[name]).parameters:
        if parameter == "units":
            continue
        for bad in (math.nan, math.inf, "1", None, True, [1.0], 10**400, 1e-200):
            with pytest.raises(wk.InputError) as caught:
                NAMED[name](**(good | {parameter: bad}))
            assert caught.value.key == parameter
        if parameter not in ("speed", "gravity", "underflow", "low", "high"):
            with pytest.raises(wk.InputError) as caught:
                NAMED[name](**(good | {parameter: -1.0}))
            assert caught.value.key == parameter


@pytest.mark.parametrize("name", sorted(NAMED))
def test_parameters_of_any_size_make_a_law_or_a_sentence(name: str) -> None:
    rng = np.random.default_rng(3)
    sizes = [0.0, 1e-30, 1e-9, 0.1, 0.3, 0.4, 1.0, 1.7, 4.0, 30.0, 1e9, 1e30, 1e308]
    made = 0
    for _ in range(300):
        parameters = {key: float(rng.choice(sizes)) for key in signature(NAMED[name]).parameters if key != "units"}
        try:
            law = NAMED[name](**parameters)
        except wk.InputError:
            continue
        made += 1
        u = np.linspace(*law.range, 9)
        assert np.isfinite(law.flux(u)).all()
        assert not np.isnan(law.derivative(u)).any(), parameters
    assert made


@pytest.mark.parametrize(
    "name, change, key",
    [
        ("corey", {"exponent_displacing": 0.5}, "exponent_displacing"),
        ("corey", {"connate": 1.0}, "connate"),
        ("corey", {"connate": 0.4, "residual": 0.6}, "residual"),
        ("triangular", {"capacity": 90.0 * 140.0}, "capacity"),
        ("smulders", {"critical_density": 140.0}, "critical_density"),
        ("richardson_zaki", {"maximum": 1.5}, "maximum"),
        ("richardson_zaki", {"maximum": 0.0}, "maximum"),
        ("freundlich", {"exponent": 1.0}, "exponent"),
        ("brooks_corey", {"saturated": 1.2}, "saturated"),
        ("brooks_corey", {"residual": 0.5}, "residual"),
        ("trapezoidal", {"bottom_width": 0.0, "side_slope": 0.0}, "bottom_width"),
        ("burgers", {"low": 1.0, "high": 1.0}, "range"),
        ("burgers", {"low": "a"}, "low"),
    ],
)
def test_parameters_that_contradict_are_named(name: str, change: dict, key: str) -> None:
    good = next(parameters for law, parameters in LAWS.values() if law == name)
    with pytest.raises(wk.InputError) as caught:
        NAMED[name](**(good | change))
    assert caught.value.key == key
    assert caught.value.mend


@pytest.mark.parametrize(
    "spec, words",
    [
        ({"name": "burger"}, ["burgers"]),
        ({"name": 3}, ["law.name"]),
        ({"name": "corey"}, ["viscosity_ratio"]),
        ({"name": "corey", "parameters": {"viscosity": 1.0}}, ["law.viscosity", "viscosity_ratio"]),
        ({"name": "burgers", "range": [0, 1]}, ["law.range", "drop it"]),
        ({"name": "burgers", "formula": "u"}, ["exactly one"]),
        ({}, ["exactly one"]),
        ("burgers", ["mapping"]),
        ({"formula": "u"}, ["law.range"]),
        ({"table": [1, 2]}, ["columns u and f"]),
        ({"name": "burgers", "units": {"stat": "m"}}, ["units.stat", "state"]),
        ({"name": "burgers", "units": {"state": 3}}, ["units.state", "text"]),
        ({"name": "burgers", "units": "m/s"}, ["units"]),
    ],
)
def test_bad_specs_get_one_sentence(spec: dict, words: list[str]) -> None:
    with pytest.raises(wk.InputError) as caught:
        law_from_spec(spec)
    assert all(word in str(caught.value) for word in words), str(caught.value)


def test_units_are_overridden_where_a_trade_has_several() -> None:
    law = wk.greenshields(free_speed=60.0, jam_density=180.0, units={"state": "veh/mi", "x": "mi"})
    assert (law.units.state, law.units.flux, law.units.x, law.units.state_symbol) == ("veh/mi", "veh/h", "mi", "k")
    beside = {"name": "greenshields", "parameters": {"free_speed": 60.0, "jam_density": 180.0, "units": {"x": "mi"}}}
    assert law_from_spec(beside).units.x == "mi"


# Bare functions


@pytest.mark.parametrize(
    "flux, ends, kinks, turns, bends",
    [
        (np.exp, (0.0, 5.0), [], [], [1]),
        (np.sin, (-4.0, 4.0), [], [-math.pi, 0.0, math.pi], [-1, 1, -1, 1]),
        (lambda u: u**2 / (u**2 + 0.5 * (1 - u) ** 2), (0.0, 1.0), [], [0.386963143105396], [1, -1]),
        (lambda u: np.minimum(u, 1.0 - u), (0.0, 1.3), [0.5], [], [0, 0]),
        (lambda u: np.abs(u - 1 / 3) + u**2, (-1.0, 1.0), [1 / 3], [], [1, 1]),
        (lambda u: np.maximum(u, u**2), (-1.0, 2.0), [0.0, 1.0], [], [1, 0, 1]),
        (lambda u: np.where(u < 0.3, 0.0, (u - 0.3) ** 2), (-1.0, 1.0), [], [], [0, 1]),
        (lambda u: 3.0 * u + 1.0, (-1.0, 1.0), [], [], [0]),
        (lambda u: np.tanh(1000.0 * u), (-1.0, 1.1), [], [0.0], [1, -1]),
        (lambda u: (u - 1e6) ** 3, (1e6 - 1.0, 1e6 + 1.5), [], [1e6], [-1, 1]),
        (lambda u: np.sqrt(u), (0.0, 1.0), [], [], [-1]),
    ],
)
def test_shape_of_a_bare_function_is_found(
    flux: Callable, ends: tuple, kinks: list, turns: list, bends: list[int]
) -> None:
    law = Law(flux, ends)
    width = ends[1] - ends[0]
    assert law.kinks == pytest.approx(kinks, abs=1e-12 * width)
    assert law.inflections == pytest.approx(turns, abs=1e-9 * width)
    assert [piece.bend for piece in law.pieces] == bends


def test_inflection_at_a_jump_of_curvature_is_found() -> None:
    law = Law(lambda u: np.where(u < 0.5, u * (1 - u) / 4, u * (u - 1) / 2 + 3 / 16), (0.0, 1.0))
    assert law.inflections == pytest.approx([0.5], abs=1e-5)
    assert [piece.bend for piece in law.pieces] == [-1, 1]


@pytest.mark.parametrize("flux, slope", [(np.exp, np.exp), (np.sin, np.cos), (lambda u: u**3, lambda u: 3 * u**2)])
def test_derivative_by_differences_has_eleven_digits_up_to_the_ends(flux: Callable, slope: Callable) -> None:
    law = Law(flux, (-3.0, 2.0))
    u = np.linspace(-3.0, 2.0, 201)
    assert np.abs(law.derivative(u) - slope(u)).max() <= 1e-11 * np.abs(slope(u)).max()


def test_derivative_by_differences_does_not_look_past_a_kink() -> None:
    law = Law(lambda u: np.abs(u) ** 3 + 2.0 * np.abs(u), (-1.0, 1.0), kinks=(0.0,), inflections=())
    u = np.array([-1.0, -1e-9, 0.0, 1e-9, 1.0])
    assert law.derivative(u) == pytest.approx([-5.0, -2.0, 2.0, 2.0, 5.0], abs=1e-10)


@pytest.mark.parametrize(
    "arguments, words",
    [
        ({"flux": math.exp}, ["flux", "vectorised"]),
        ({"flux": lambda u: u if u > 0 else 0.0}, ["flux", "vectorised"]),
        ({"flux": lambda u: 1.0}, ["flux", "one flux for each state"]),
        ({"flux": lambda u: 1.0 / np.asarray(u)}, ["flux", "finite", "0.0"]),
        ({"flux": lambda u: np.where(u < 0.3, 0.0, 1.0)}, ["flux", "continuous", "jumps near 0.29999"]),
        ({"flux": 3.0}, ["flux", "function"]),
        ({"range": (1.0, 1.0)}, ["range"]),
        ({"range": (0.0, math.inf)}, ["range"]),
        ({"range": 1.0}, ["range"]),
        ({"range": ("a", "b")}, ["range"]),
        ({"flux": lambda u: u**3, "inflections": ()}, ["inflections", "both ways", "leave them out"]),
        ({"polygon": (np.array([0.0, 1.0]), np.array([0.0, 1.0]))}, ["polygon", "whole range"]),
    ],
)
def test_bad_laws_get_one_sentence(arguments: dict, words: list[str]) -> None:
    with pytest.raises(wk.InputError) as caught:
        Law(**({"flux": lambda u: 0.5 * u**2, "range": (-1.0, 1.0)} | arguments))
    assert all(word in str(caught.value) for word in words), str(caught.value)


# What a law does


def test_speed_is_the_chord_and_keeps_the_shape() -> None:
    law = wk.burgers()
    left, right = np.array([[0.0, 1.0, 2.0], [3.0, -1.0, 0.5]]), 1.0
    assert law.speed(left, right).shape == (2, 3)
    assert law.speed(left, right) == pytest.approx(0.5 * (left + 1.0), rel=1e-15)
    assert law.speed(1.0, 1.0).shape == ()
    assert float(law.speed(0.75, 0.75)) == 0.75


def test_states_outside_the_range_are_told() -> None:
    law = wk.corey(viscosity_ratio=0.5)
    law.check_states([0.0, 0.5, 1.0], "values")
    for bad in (1.0000001, -1e-300, math.nan, math.inf):
        with pytest.raises(wk.InputError) as caught:
            law.check_states([0.5, bad], "values")
        assert caught.value.key == "values[1]"
        assert "0.0 to 1.0" in str(caught.value)


def test_laws_are_equal_only_to_themselves_and_frozen() -> None:
    one, other = wk.burgers(), wk.burgers()
    assert one != other
    assert len({one, other, one}) == 2
    with pytest.raises(AttributeError):
        one.name = "mine"  # type: ignore[misc]


def test_laws_import_nothing_heavy() -> None:
    code = "import wavekin.laws, sys; print([m for m in ('scipy', 'sympy', 'numba', 'matplotlib') if m in sys.modules])"
    found = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout
    assert found.strip() == "[]"
