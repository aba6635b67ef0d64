"""Laws and data from a formula in text: an explicit grammar, from which no code can run.

A formula is made of numbers, the variable, named parameters, ``pi``, the operators ``+ - * / **``, parentheses
and the functions in `FUNCTIONS`. Python's parser reads it, a walk of our own allows exactly these nodes, and a
second walk evaluates them with numpy, either plainly or with derivatives (`wavekin.laws.jets`). Neither the text
nor anything made from it is ever passed to ``eval``, ``exec`` or another parser.
"""

from __future__ import annotations

import ast
import math
import unicodedata
import warnings
from collections.abc import Callable, Iterator, Mapping
from itertools import chain, pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray
from wavekin.errors import InputError
from wavekin.laws import jets
from wavekin.laws.law import Law, Units, two_numbers
from wavekin.laws.parameters import finite, nearest
from wavekin.laws.shape import bisected, kinks_of, straight_parts

MAX_LENGTH = 2000
MAX_DEPTH = 50
#: Exponents without the variable stay within this size.
MAX_EXPONENT = 100.0
#: States at which a formula is tried.
SAMPLES = 4097
#: A divisor or argument this small against its largest value counts as 0.
VANISHING = 1e-12
#: A corner is a kink where the slope's jump over this share of the range hardly shrinks with the share.
CORNER_REACH = 1e-6

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
_CORNERED = ("abs", "min", "max")
_OPERATORS: dict[type, Callable[[Any, Any], Any]] = {
    ast.Add: np.add,
    ast.Sub: np.subtract,
    ast.Mult: np.multiply,
    ast.Div: np.divide,
    ast.Pow: np.power,
}
_JET_OPERATORS: dict[type, Callable[[jets.Jet, jets.Jet], jets.Jet]] = {
    ast.Add: jets.add,
    ast.Sub: jets.subtract,
    ast.Mult: jets.multiply,
    ast.Div: jets.divide,
    ast.Pow: jets.power,
}

Array = NDArray[np.float64]
Function = Callable[[Array], Array]


def parse(
    text: str, variable: str, parameters: Mapping[str, float] | None = None, key: str = "formula"
) -> tuple[ast.expr, dict[str, float]]:
    """Return the checked tree of a formula and the values of all its names but the variable.

    Raises
    ------
    InputError
        For anything outside the grammar: unknown names (with the nearest known one), calls, attributes, texts
        that are too long or too deep; for parameters that are no numbers or named like something else.
    """
    if not isinstance(text, str) or not text.strip():
        raise InputError("must be a formula in text", key=key, value=text, mend=f'give for instance "{variable}**2/2"')
    if len(text) > MAX_LENGTH:
        raise InputError(f"must be at most {MAX_LENGTH} characters long", key=key, value=len(text), mend="shorten it")
    values = _values(parameters, variable)
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # what Python would write differently is told by the walk below
            tree = ast.parse(text.strip(), mode="eval").body
    except (SyntaxError, ValueError, RecursionError, MemoryError) as error:
        raise InputError(
            "cannot be read as a formula", key=key, value=text, mend="use + - * / ** ( ) and named functions"
        ) from error
    _check(tree, {variable, *values}, key, 0)
    _check_exponents(tree, values, variable, key)
    return tree, values


def _values(parameters: Mapping[str, float] | None, variable: str) -> dict[str, float]:
    """Return the values of parameters and of pi by their names as Python's parser spells them."""
    if not isinstance(parameters or {}, Mapping):
        raise InputError("must be names with numbers", key="parameters", value=parameters, mend="try {M = 0.5}")
    values = {"pi": math.pi}
    for name, value in (parameters or {}).items():
        if not str(name).isidentifier():
            raise InputError("must be named with letters, digits and _", key=f"parameters.{name}", mend="rename it")
        if name in (variable, "pi", *FUNCTIONS):
            raise InputError(
                "must not be named like the variable, pi or a function", key=f"parameters.{name}", mend="rename it"
            )
        values[unicodedata.normalize("NFKC", str(name))] = finite(f"parameters.{name}", value)
    return values


def _check(node: ast.AST, names: set[str], key: str, depth: int) -> None:
    """Raise InputError for the first node outside the grammar."""
    if depth > MAX_DEPTH:
        raise InputError(f"must not be nested deeper than {MAX_DEPTH}", key=key, mend="simplify it")
    match node:
        case ast.Constant(value=bool()):
            raise InputError("takes numbers", key=key, value=node.value, mend="write 0 or 1")
        case ast.Constant(value=int() | float() as value):
            if not (abs(value) < 1e300):
                raise InputError("takes numbers below 1e300", key=key, mend="scale the formula")
        case ast.Name(id=name):
            if name not in names:
                raise InputError("has an unknown name", key=key, value=name, mend=nearest(name, names))
        case ast.UnaryOp(op=ast.USub() | ast.UAdd(), operand=operand):
            _check(operand, names, key, depth + 1)
        case ast.BinOp(left=left, op=op, right=right) if type(op) in _OPERATORS:
            _check(left, names, key, depth + 1)
            _check(right, names, key, depth + 1)
        case ast.Call(func=ast.Name(id=name), args=arguments, keywords=[]):
            if name not in FUNCTIONS:
                raise InputError("has an unknown function", key=key, value=name, mend=nearest(name, FUNCTIONS))
            wanted = 2 if name in _TWO_ARGUMENTS else 1
            if len(arguments) != wanted:
                raise InputError(
                    f"gives {name} the wrong number of arguments", key=key, value=len(arguments), mend=f"give {wanted}"
                )
            for argument in arguments:
                _check(argument, names, key, depth + 1)
        case ast.BinOp(op=ast.BitXor()):
            raise InputError("may not hold ^", key=key, mend="write ** for powers")
        case _:
            raise InputError(
                "may hold only numbers, names, + - * / ** ( ) and functions", key=key, value=type(node).__name__,
                mend=f"known functions are {', '.join(FUNCTIONS)}",
            )  # fmt: skip


def _holds(node: ast.AST, variable: str) -> bool:
    """Return whether a tree depends on the variable."""
    return any(isinstance(inner, ast.Name) and inner.id == variable for inner in ast.walk(node))


def _check_exponents(tree: ast.expr, values: Mapping[str, float], variable: str, key: str) -> None:
    """Raise InputError for exponents without the variable that are too large."""
    for node in ast.walk(tree):
        if isinstance(node, ast.BinOp) and isinstance(node.op, ast.Pow) and not _holds(node.right, variable):
            with np.errstate(all="ignore"):
                exponent = float(_evaluate(node.right, values))
            if not abs(exponent) <= MAX_EXPONENT:
                raise InputError(f"takes exponents up to {MAX_EXPONENT:g}", key=key, value=exponent, mend="lower it")


def _evaluate(node: ast.AST, values: Mapping[str, Any]) -> Any:
    """Return the value of a checked tree."""
    match node:
        case ast.Constant(value=value):
            return np.float64(value)  # type: ignore[arg-type]
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


def _jet(node: ast.AST, values: Mapping[str, jets.Jet]) -> jets.Jet:
    """Return the value of a checked tree with its first two derivatives."""
    match node:
        case ast.Constant(value=value):
            return jets.constant(np.float64(value))  # type: ignore[arg-type]
        case ast.Name(id=name):
            return values[name]
        case ast.UnaryOp(op=op, operand=operand):
            inner = _jet(operand, values)
            return jets.negative(inner) if isinstance(op, ast.USub) else inner
        case ast.BinOp(left=left, op=op, right=right):
            return _JET_OPERATORS[type(op)](_jet(left, values), _jet(right, values))
        case ast.Call(func=ast.Name(id=name), args=arguments):
            return jets.FUNCTIONS[name](*(_jet(argument, values) for argument in arguments))
    raise AssertionError(node)


def _function(
    tree: ast.expr, variable: str, values: Mapping[str, float], ends: tuple[float, float] = (-math.inf, math.inf)
) -> Function:
    """Return a tree as a vectorised function; what is not finite is left to the caller.

    Places beyond the ends count as the ends: a rounding beyond, a root or logarithm may not exist.
    """

    def function(x: Array) -> Array:
        x = np.asarray(x, dtype=float).clip(*ends)
        with np.errstate(all="ignore"):
            result = _evaluate(tree, {**values, variable: x})
        return np.broadcast_to(np.asarray(result, dtype=float), x.shape).copy()

    return function


def formula_function(
    text: str, variable: str, parameters: Mapping[str, float] | None = None, key: str = "formula"
) -> Function:
    """Return a vectorised function of one variable from a formula; see `parse` for what it may hold."""
    tree, values = parse(text, variable, parameters, key)
    return _function(tree, variable, values)


def _derivative(tree: ast.expr, values: Mapping[str, float], ends: tuple[float, float], order: int) -> Function:
    """Return f' or f'' of a tree in u.

    Where the rules of calculus meet 0 times infinity, as at the foot of a root, the derivative next to it towards
    the middle of the range is given.
    """
    constants = {name: jets.constant(value) for name, value in values.items()}

    def carried(u: Array) -> Array:
        with np.errstate(all="ignore"):
            result = _jet(tree, {**constants, "u": (u, np.ones_like(u), np.zeros_like(u))})[order]
        return np.broadcast_to(np.asarray(result, dtype=float), u.shape).copy()

    def function(states: Array) -> Array:
        u = np.asarray(states, dtype=float).clip(*ends)
        result = carried(u)
        open_ = np.isnan(result)
        if open_.any():
            middle = 0.5 * (ends[0] + ends[1])
            away = np.where(u < middle, 1.0, -1.0) * VANISHING * (ends[1] - ends[0])
            result = np.where(open_, carried(u + away), result)
        return result

    return function


def _meetings(tree: ast.expr, values: Mapping[str, float], u: Array) -> Iterator[float]:
    """Yield where the arguments of abs vanish and those of min and max meet: the possible kinks."""
    for node in ast.walk(tree):
        if not (isinstance(node, ast.Call) and isinstance(node.func, ast.Name) and node.func.id in _CORNERED):
            continue
        other = node.args[1] if len(node.args) == 2 else ast.Constant(value=0.0)
        difference = _function(ast.BinOp(left=node.args[0], op=ast.Sub(), right=other), "u", values)
        sign = np.sign(difference(u))
        # where the arguments agree over a stretch only its ends can be kinks
        zero = (sign[1:-1] == 0.0) & ((sign[:-2] != 0.0) | (sign[2:] != 0.0))
        yield from u[1:-1][zero].tolist()
        for i in np.flatnonzero(sign[:-1] * sign[1:] < 0.0):
            yield bisected(difference, float(u[i]), float(u[i + 1]))


def _kinks(places: list[float], u: Array, slope: Function, flux: Function) -> list[float]:
    """Return the places where the slope jumps, and the kinks that sampling finds between them."""
    found = []
    width = float(u[-1] - u[0])
    for place in places:
        near, far = CORNER_REACH * width * np.array([0.1, 1.0])
        at = slope(np.array([place - far, place - near, place + near, place + far]).clip(u[0], u[-1]))
        if abs(at[2] - at[1]) > max(0.5 * abs(at[3] - at[0]), 1e-9 * np.abs(at).max()):
            found.append(place)
    for low, high in list(pairwise([float(u[0]), *found, float(u[-1])])):
        found += kinks_of(flux, low, high)
    return found


def _refuse_singular(tree: ast.expr, values: Mapping[str, float], u: Array, formula: str) -> None:
    """Raise InputError where a divisor, or the argument of a logarithm or root, passes 0 between samples."""
    for node in ast.walk(tree):
        critical = _critical(node, values)
        if critical is None or not _holds(critical[0], "u"):
            continue
        argument, floor = _function(critical[0], "u", values), critical[1]
        g = argument(u)
        size = float(np.abs(g).max())
        crossing = np.flatnonzero(g[:-1] * g[1:] < 0.0)
        place = bisected(argument, float(u[crossing[0]]), float(u[crossing[0] + 1])) if crossing.size else None
        dips = np.flatnonzero((np.abs(g[1:-1]) <= np.abs(g[:-2])) & (np.abs(g[1:-1]) <= np.abs(g[2:])))
        for i in dips if place is None else ():
            low, at = _least(argument, float(np.sign(g[i + 1])), float(u[i]), float(u[i + 2]))
            if low <= floor * size:
                place = at
                break
        if place is not None:
            raise InputError(
                f"is singular in its range, near u = {place!r}", key="formula", value=formula,
                mend="narrow the range or change the formula",
            )  # fmt: skip


def _critical(node: ast.AST, values: Mapping[str, float]) -> tuple[ast.expr, float] | None:
    """Return the part of a node that must keep off 0, and how near it may come (as a share of its size)."""
    match node:
        case ast.BinOp(op=ast.Div(), right=divisor):
            return divisor, VANISHING
        case ast.BinOp(op=ast.Pow(), left=base, right=exponent) if not _holds(exponent, "u"):
            power = float(_evaluate(exponent, values))
            if power < 0.0:
                return base, VANISHING
            return None if power == int(power) else (base, -VANISHING)
        case ast.Call(func=ast.Name(id="log"), args=[argument]):
            return argument, VANISHING
        case ast.Call(func=ast.Name(id="sqrt"), args=[argument]):
            return argument, -VANISHING
        case ast.Call(func=ast.Name(id="tan"), args=[argument]):
            return ast.Call(func=ast.Name(id="cos"), args=[argument], keywords=[]), VANISHING
    return None


def _least(argument: Function, side: float, low: float, high: float) -> tuple[float, float]:
    """Return the least of side * argument in a bracket around a dip, and where it is, by golden section."""
    golden = 0.5 * (5.0**0.5 - 1.0)
    side = side or 1.0
    for _ in range(80):
        inner = np.array([high - golden * (high - low), low + golden * (high - low)])
        left, right = side * argument(inner)
        low, high = (low, float(inner[1])) if left <= right else (float(inner[0]), high)
    at = 0.5 * (low + high)
    return float(side * argument(np.array([at]))[0]), at


def formula_law(
    formula: str, range: tuple[float, float], parameters: Mapping[str, float] | None = None, units: Units | None = None
) -> Law:
    """Return the law f(u) that a formula gives, e.g. ``formula_law("u**2/(u**2 + M*(1-u)**2)", (0, 1), {"M": 0.5})``.

    Derivatives are exact; kinks (of abs, min, max) and inflections are located.

    Parameters
    ----------
    formula : str
        f in the state ``u``.
    range : tuple of float
        The admissible states.
    parameters : mapping, optional
        Values of the other names in the formula.
    units : Units, optional

    Raises
    ------
    InputError
        For a formula outside the grammar, or one that is not finite or passes a singularity on the range.
    """
    tree, values = parse(formula, "u", parameters)
    ends = two_numbers(range)
    flux = _function(tree, "u", values, ends)
    u = np.linspace(ends[0], ends[1], SAMPLES)
    bad = np.flatnonzero(~np.isfinite(flux(u)))
    if bad.size:
        raise InputError(
            f"must be finite from {ends[0]!r} to {ends[1]!r}, and is not at u = {float(u[bad[0]])!r}",
            key="formula", value=formula, mend="narrow the range or change the formula",
        )  # fmt: skip
    _refuse_singular(tree, values, u, formula)
    slope = _derivative(tree, values, ends, 1)
    places = sorted(set(_meetings(tree, values, u)))
    kinks = _kinks(places, u, slope, flux)
    marks = sorted({*ends, *places, *kinks})
    straight = [straight_parts(flux, low, high) for low, high in pairwise(marks)]
    known = {name: value for name, value in values.items() if name != "pi"}
    return Law(
        flux,
        ends,
        derivative=slope,
        second_derivative=_derivative(tree, values, ends, 2),
        kinks=tuple(kinks),
        linear=tuple(chain.from_iterable(straight)),
        name="formula",
        formula=f"f = {formula}",
        parameters=known,
        source="formula given by the user",
        units=units or Units(),
        spec={"formula": formula, "parameters": known, "range": list(ends)},
    )
