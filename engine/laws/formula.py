"""Laws and data from a formula in text: an explicit grammar, from which no code can run.

A formula is made of numbers, the variable, named parameters, ``pi``, the operators ``+ - * / **``, parentheses
and the functions in `FUNCTIONS`. Python's parser reads it, a walk of our own allows exactly these nodes, and a
second walk evaluates them with numpy; nothing is ever passed to ``eval``.
"""

from __future__ import annotations

import ast
import difflib
import math
from collections.abc import Callable, Mapping
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray
from wavekin.errors import InputError
from wavekin.laws.law import Law, Units

MAX_LENGTH = 2000
MAX_DEPTH = 50
#: Exponents written as numbers stay within this size.
MAX_EXPONENT = 100.0

FUNCTIONS: dict[str, Callable[..., Any]] = {
    "exp": np.exp,
    "log": np.log,
    "sqrt": np.sqrt,
    "sin": np.sin,
    "cos": np.cos,
    "tan": np.tan,
    "tanh": np.tanh,
    "abs": np.abs,
    "min": np.minimum,
    "max": np.maximum,
}
_TWO_ARGUMENTS = ("min", "max")
_OPERATORS: dict[type, Callable[[Any, Any], Any]] = {
    ast.Add: np.add,
    ast.Sub: np.subtract,
    ast.Mult: np.multiply,
    ast.Div: np.divide,
    ast.Pow: np.power,
}

Function = Callable[[NDArray[np.float64]], NDArray[np.float64]]


def parse(text: str, variable: str, parameters: Mapping[str, float], key: str = "formula") -> ast.expr:
    """Return the checked tree of a formula.

    Raises
    ------
    InputError
        For anything outside the grammar: unknown names (with the nearest known one), calls, attributes, texts
        that are too long or too deep.
    """
    if not isinstance(text, str) or not text.strip():
        raise InputError("must be a formula in text", key=key, value=text, mend=f'give for instance "{variable}**2/2"')
    if len(text) > MAX_LENGTH:
        raise InputError(f"must be at most {MAX_LENGTH} characters long", key=key, value=len(text), mend="shorten it")
    for name, value in parameters.items():
        if isinstance(value, bool) or not isinstance(value, (int, float)) or not math.isfinite(value):
            raise InputError(
                "must be a finite number", key=f"parameters.{name}", value=value, mend="give a plain number"
            )
    try:
        tree = ast.parse(text.strip(), mode="eval").body
    except (SyntaxError, ValueError, RecursionError, MemoryError) as error:
        raise InputError(
            "cannot be read as a formula", key=key, value=text, mend="use + - * / ** ( ) and named functions"
        ) from error
    _check(tree, {variable, "pi", *parameters}, key, 0)
    return tree


def _check(node: ast.AST, names: set[str], key: str, depth: int) -> None:
    """Raise InputError for the first node outside the grammar."""
    if depth > MAX_DEPTH:
        raise InputError(f"must not be nested deeper than {MAX_DEPTH}", key=key, mend="simplify it")
    match node:
        case ast.Constant(value=bool()):
            raise InputError("takes numbers", key=key, value=node.value, mend="write 0 or 1")
        case ast.Constant(value=int() | float() as value):
            if not (abs(value) < 1e300):
                raise InputError("takes numbers below 1e300", key=key, value=value, mend="scale the formula")
        case ast.Name(id=name):
            if name not in names:
                raise InputError("has an unknown name", key=key, value=name, mend=_nearest(name, names))
        case ast.UnaryOp(op=ast.USub() | ast.UAdd(), operand=operand):
            _check(operand, names, key, depth + 1)
        case ast.BinOp(left=left, op=op, right=right) if type(op) in _OPERATORS:
            _check(left, names, key, depth + 1)
            _check(right, names, key, depth + 1)
            if isinstance(op, ast.Pow) and isinstance(right, ast.Constant):
                exponent = float(right.value)  # type: ignore[arg-type]
                if abs(exponent) > MAX_EXPONENT:
                    raise InputError(
                        f"takes exponents up to {MAX_EXPONENT:g}", key=key, value=exponent, mend="lower it"
                    )
        case ast.Call(func=ast.Name(id=name), args=arguments, keywords=[]):
            if name not in FUNCTIONS:
                raise InputError("has an unknown function", key=key, value=name, mend=_nearest(name, set(FUNCTIONS)))
            wanted = 2 if name in _TWO_ARGUMENTS else 1
            if len(arguments) != wanted:
                raise InputError(
                    f"gives {name} the wrong number of arguments", key=key, value=len(arguments), mend=f"give {wanted}"
                )
            for argument in arguments:
                _check(argument, names, key, depth + 1)
        case _:
            raise InputError(
                "may hold only numbers, names, + - * / ** ( ) and functions", key=key, value=type(node).__name__,
                mend=f"known functions are {', '.join(FUNCTIONS)}",
            )  # fmt: skip


def _nearest(word: str, known: set[str]) -> str:
    close = difflib.get_close_matches(word, sorted(known), n=1)
    return f"did you mean {close[0]}?" if close else f"known are {', '.join(sorted(known))}"


def _evaluate(node: ast.AST, values: Mapping[str, Any]) -> Any:
    """Return the value of a checked tree."""
    match node:
        case ast.Constant(value=value):
            return float(value)  # type: ignore[arg-type]
        case ast.Name(id=name):
            return values[name]
        case ast.UnaryOp(op=op, operand=operand):
            inner = _evaluate(operand, values)
            return -inner if isinstance(op, ast.USub) else inner
        case ast.BinOp(left=left, op=op, right=right):
            return _OPERATORS[type(op)](_evaluate(left, values), _evaluate(right, values))
        case ast.Call(func=ast.Name(id=name), args=arguments):
            return FUNCTIONS[name](*(_evaluate(argument, values) for argument in arguments))
    raise AssertionError(node)


def formula_function(
    text: str, variable: str, parameters: Mapping[str, float] | None = None, key: str = "formula"
) -> Function:
    """Return a vectorised function of one variable from a formula; see `parse` for what it may hold."""
    known = dict(parameters or {})
    tree = parse(text, variable, known, key)

    def function(x: NDArray[np.float64]) -> NDArray[np.float64]:
        x = np.asarray(x, dtype=float)
        with np.errstate(all="ignore"):
            result = _evaluate(tree, {**known, "pi": math.pi, variable: x})
        return np.broadcast_to(np.asarray(result, dtype=float), x.shape).copy()

    return function


def _symbolic(node: ast.AST, values: Mapping[str, Any]) -> Any:
    """Return a checked tree as a sympy expression; integers stay exact."""
    import sympy

    match node:
        case ast.Constant(value=value):
            return sympy.Integer(value) if isinstance(value, int) else sympy.Float(value)  # type: ignore[arg-type]
        case ast.Name(id=name):
            return values[name]
        case ast.UnaryOp(op=op, operand=operand):
            inner = _symbolic(operand, values)
            return -inner if isinstance(op, ast.USub) else inner
        case ast.BinOp(left=left, op=op, right=right):
            a, b = _symbolic(left, values), _symbolic(right, values)
            return {
                ast.Add: lambda: a + b, ast.Sub: lambda: a - b, ast.Mult: lambda: a * b, ast.Div: lambda: a / b,
                ast.Pow: lambda: a**b,
            }[type(op)]()  # fmt: skip
        case ast.Call(func=ast.Name(id=name), args=arguments):
            function = {"abs": sympy.Abs, "min": sympy.Min, "max": sympy.Max}.get(name) or getattr(sympy, name)
            return function(*(_symbolic(argument, values) for argument in arguments))
    raise AssertionError(node)


def _derivative(tree: ast.expr, parameters: Mapping[str, float], order: int) -> Function | None:
    """Return a derivative by sympy; None where the formula has corners, whose derivative sympy leaves open."""
    import sympy

    if any(isinstance(node, ast.Name) and node.id in ("abs", "min", "max") for node in ast.walk(tree)):
        return None
    u = sympy.Symbol("u", real=True)
    values = {"u": u, "pi": sympy.pi} | {name: sympy.Float(value) for name, value in parameters.items()}
    expression = sympy.diff(_symbolic(tree, values), u, order)
    compiled = sympy.lambdify(u, expression, "numpy")

    def function(states: NDArray[np.float64]) -> NDArray[np.float64]:
        states = np.asarray(states, dtype=float)
        with np.errstate(all="ignore"):
            return np.broadcast_to(np.asarray(compiled(states), dtype=float), states.shape).copy()

    return function


def _corners(tree: ast.expr, parameters: Mapping[str, float], ends: tuple[float, float]) -> tuple[float, ...]:
    """Return where the arguments of abs vanish and those of min and max meet: the possible kinks."""
    from scipy.optimize import brentq

    values: dict[str, Any] = {**parameters, "pi": math.pi}
    found = []
    for node in ast.walk(tree):
        if not (
            isinstance(node, ast.Call) and isinstance(node.func, ast.Name) and node.func.id in ("abs", "min", "max")
        ):
            continue

        def difference(state: Any, node: ast.Call = node) -> Any:
            known = {**values, "u": state}
            first = _evaluate(node.args[0], known)
            return first - (_evaluate(node.args[1], known) if len(node.args) == 2 else 0.0)

        u = np.linspace(*ends, 4097)
        with np.errstate(all="ignore"):
            sign = np.sign(np.broadcast_to(difference(u), u.shape))
        found += u[1:-1][sign[1:-1] == 0.0].tolist()
        for i in np.flatnonzero(sign[:-1] * sign[1:] < 0.0):
            found.append(float(brentq(lambda x, d=difference: float(d(x)), u[i], u[i + 1], xtol=1e-15)))
    return tuple(sorted(set(found)))


def formula_law(
    formula: str, range: tuple[float, float], parameters: Mapping[str, float] | None = None, units: Units | None = None
) -> Law:
    """Return the law f(u) that a formula gives, e.g. ``formula_law("u**2/(u**2 + M*(1-u)**2)", (0, 1), {"M": 0.5})``.

    Derivatives are found symbolically; kinks (of abs, min, max) and inflections are located.

    Raises
    ------
    InputError
        For a formula outside the grammar or one that is not finite on the range.
    """
    known = dict(parameters or {})
    for taken in ("u", "pi", *FUNCTIONS):
        if taken in known:
            raise InputError(
                "must not be named like the state or a function", key=f"parameters.{taken}", mend="rename it"
            )
    flux = formula_function(formula, "u", known)
    tree = parse(formula, "u", known)
    ends = (float(range[0]), float(range[1]))
    samples = np.linspace(*ends, 4097) if ends[0] < ends[1] else np.array(ends)
    bad = np.flatnonzero(~np.isfinite(flux(samples)))
    if bad.size:
        raise InputError(
            f"must be finite from {ends[0]!r} to {ends[1]!r}, and is not at u = {float(samples[bad[0]])!r}",
            key="formula", value=formula, mend="narrow the range or change the formula",
        )  # fmt: skip
    kinks = _corners(tree, known, ends)
    return Law(
        flux,
        ends,
        derivative=_derivative(tree, known, 1) if not kinks else None,  # type: ignore[arg-type]
        second_derivative=_derivative(tree, known, 2) if not kinks else None,
        kinks=kinks,
        name="formula",
        formula=f"f = {formula}",
        parameters=known,
        source="formula given by the user",
        units=units or Units(),
        linear=_straight(flux, ends, kinks),
        spec={"formula": formula, "parameters": known, "range": list(ends)},
    )


def _straight(flux: Function, ends: tuple[float, float], kinks: tuple[float, ...]) -> tuple[tuple[float, float], ...]:
    """Return the intervals between kinks on which 33 samples lie on one line."""
    found = []
    for a, b in pairwise([ends[0], *kinks, ends[1]]):
        u = np.linspace(a, b, 33)
        f = flux(u)
        if np.abs(f - np.interp(u, [a, b], f[[0, -1]])).max() <= 64.0 * np.finfo(float).eps * max(
            np.abs(f).max(), 1e-300
        ):
            found.append((a, b))
    return tuple(found)
