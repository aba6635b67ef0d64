"""Checks of the parameters of named laws, and advice on words that are not known."""

from __future__ import annotations

import difflib
import math
from collections.abc import Iterable
from numbers import Real

from wavekin.errors import InputError

#: Parameters other than 0 stay within these sizes, so that no product of several leaves the floats.
SMALLEST, LARGEST = 1e-30, 1e30
#: Largest exponent in a named law.
STEEPEST = 100.0


def finite(name: str, value: float) -> float:
    """Return a finite number or raise InputError that names the parameter."""
    try:
        if isinstance(value, Real) and not isinstance(value, bool) and math.isfinite(value):
            return float(value)
    except OverflowError:  # a whole number beyond the floats
        pass
    raise InputError("must be a finite number", key=name, value=value, mend="give a plain number")


def number(name: str, value: float) -> float:
    """Return a finite number of a usable size or raise InputError that names the parameter."""
    if finite(name, value) and not SMALLEST <= abs(value) <= LARGEST:
        raise InputError(
            f"must be 0 or from {SMALLEST:g} to {LARGEST:g} in size", key=name, value=value, mend="change the unit"
        )
    return float(value)


def positive(name: str, value: float) -> float:
    """Return a finite number above 0 or raise InputError that names the parameter."""
    if number(name, value) <= 0.0:
        raise InputError("must be above 0", key=name, value=value, mend="check its sign and unit")
    return float(value)


def within(name: str, value: float, low: float, high: float, mend: str) -> float:
    """Return a number in [low, high] or raise InputError that names the parameter."""
    if not low <= number(name, value) <= high:
        raise InputError(f"must lie from {low:g} to {high:g}", key=name, value=value, mend=mend)
    return float(value)


def at_least(name: str, value: float, low: float, mend: str) -> float:
    """Return a finite number not below `low` or raise InputError that names the parameter."""
    if number(name, value) < low:
        raise InputError(f"must be at least {low:g}", key=name, value=value, mend=mend)
    return float(value)


def above(name: str, value: float, low: float, high: float, mend: str = "check its unit") -> float:
    """Return a number in (low, high] or raise InputError that names the parameter."""
    if not low < number(name, value) <= high:
        raise InputError(f"must lie above {low:g} and not above {high:g}", key=name, value=value, mend=mend)
    return float(value)


def below(name: str, value: float, low: float, high: float, mend: str = "check its unit") -> float:
    """Return a number in [low, high) or raise InputError that names the parameter."""
    if not low <= number(name, value) < high:
        raise InputError(f"must be at least {low:g} and below {high:g}", key=name, value=value, mend=mend)
    return float(value)


def nearest(word: object, known: Iterable[str]) -> str:
    """Return advice that names the nearest known word."""
    words = sorted(known)
    close = difflib.get_close_matches(str(word), words, n=1)
    return f"did you mean {close[0]}?" if close else f"known are {', '.join(words)}"
