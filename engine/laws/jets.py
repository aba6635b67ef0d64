"""First and second derivatives carried along with a value, by the rules of calculus (forward differentiation).

A jet is the triple (g, g', g'') of a function of one variable at many states. Adding, multiplying and applying
functions to jets gives the exact derivatives of any formula at the cost of a few evaluations of it; no symbolic
algebra is needed. A constant is a jet whose derivatives are the number 0.0. Where two branches of ``min``, ``max``
or ``abs`` meet, the derivative is that to the right.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

#: (g, g', g''), each an array or a number.
Jet = tuple[Any, Any, Any]


def constant(value: float) -> Jet:
    """Return the jet of a number."""
    return value, 0.0, 0.0


def is_constant(jet: Jet) -> bool:
    """Return whether a jet is that of a number."""
    return isinstance(jet[1], float) and isinstance(jet[2], float) and jet[1] == jet[2] == 0.0


def add(a: Jet, b: Jet) -> Jet:
    """Return a + b."""
    return a[0] + b[0], a[1] + b[1], a[2] + b[2]


def negative(a: Jet) -> Jet:
    """Return -a."""
    return (constant(-a[0])) if is_constant(a) else (-a[0], -a[1], -a[2])


def subtract(a: Jet, b: Jet) -> Jet:
    """Return a - b."""
    return a[0] - b[0], a[1] - b[1], a[2] - b[2]


def multiply(a: Jet, b: Jet) -> Jet:
    """Return a b; a constant factor never meets an infinite derivative of a constant."""
    if is_constant(a):
        a, b = b, a
    if is_constant(b):
        return constant(a[0] * b[0]) if is_constant(a) else (a[0] * b[0], a[1] * b[0], a[2] * b[0])
    return a[0] * b[0], a[1] * b[0] + a[0] * b[1], a[2] * b[0] + 2.0 * a[1] * b[1] + a[0] * b[2]


def divide(a: Jet, b: Jet) -> Jet:
    """Return a / b."""
    if is_constant(b):
        return constant(np.divide(a[0], b[0])) if is_constant(a) else (a[0] / b[0], a[1] / b[0], a[2] / b[0])
    quotient = a[0] / b[0]
    slope = (a[1] - quotient * b[1]) / b[0]
    return quotient, slope, (a[2] - 2.0 * slope * b[1] - quotient * b[2]) / b[0]


def power(a: Jet, b: Jet) -> Jet:
    """Return a^b; constant exponents also take bases of either sign."""
    value = np.power(a[0], b[0])
    if is_constant(a) and is_constant(b):
        return constant(value)
    if is_constant(b):
        exponent = b[0]
        if exponent in (0.0, 1.0):
            return a if exponent == 1.0 else constant(1.0)
        first = exponent * np.power(a[0], exponent - 1.0)
        curve = 2.0 if exponent == 2.0 else exponent * (exponent - 1.0) * np.power(a[0], exponent - 2.0)
        return value, first * a[1], curve * a[1] ** 2 + first * a[2]
    logarithm = _chain(np.log, lambda x, _: (1.0 / x, -1.0 / x**2))(a)
    _, slope, curve = multiply(b, logarithm)
    return value, value * slope, value * (slope**2 + curve)


def maximum(a: Jet, b: Jet) -> Jet:
    """Return the larger of a and b; where they are equal, the one that is larger next to the right."""
    return _choose(a, b, (a[0] > b[0]) | ((a[0] == b[0]) & (a[1] >= b[1])))


def minimum(a: Jet, b: Jet) -> Jet:
    """Return the smaller of a and b; where they are equal, the one that is smaller next to the right."""
    return _choose(a, b, (a[0] < b[0]) | ((a[0] == b[0]) & (a[1] <= b[1])))


def _choose(a: Jet, b: Jet, first: Any) -> Jet:
    if is_constant(a) and is_constant(b):
        return a if first else b
    value, slope, curve = (np.where(first, x, y) for x, y in zip(a, b, strict=True))
    return value, slope, curve


def absolute(a: Jet) -> Jet:
    """Return |a|."""
    return maximum(a, negative(a))


def _chain(function: Callable[[Any], Any], slopes: Callable[[Any, Any], tuple[Any, Any]]) -> Callable[[Jet], Jet]:
    """Return a function of jets; `slopes(x, g(x))` are g' and g''."""

    def apply(a: Jet) -> Jet:
        value = function(a[0])
        if is_constant(a):
            return constant(value)
        first, curve = slopes(a[0], value)
        return value, first * a[1], curve * a[1] ** 2 + first * a[2]

    return apply


#: The functions of one variable that formulas may use, for jets.
FUNCTIONS: dict[str, Callable[..., Jet]] = {
    "exp": _chain(np.exp, lambda _, g: (g, g)),
    "log": _chain(np.log, lambda x, _: (1.0 / x, -1.0 / x**2)),
    "sqrt": _chain(np.sqrt, lambda x, g: (0.5 / g, -0.25 / (g * x))),
    "sin": _chain(np.sin, lambda x, g: (np.cos(x), -g)),
    "cos": _chain(np.cos, lambda x, g: (-np.sin(x), -g)),
    "tan": _chain(np.tan, lambda _, g: (1.0 + g * g, 2.0 * g * (1.0 + g * g))),
    "tanh": _chain(np.tanh, lambda x, g: (np.cosh(np.minimum(np.abs(x), 350.0)) ** -2.0, -2.0 * g * (1.0 - g * g))),
    "abs": absolute,
    "min": minimum,
    "max": maximum,
}
