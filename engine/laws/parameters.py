"""Checks of the parameters of named laws."""

from __future__ import annotations

import math

from wavekin.errors import InputError


def number(name: str, value: float) -> float:
    """Return a finite number or raise InputError that names the parameter."""
    if isinstance(value, bool) or not isinstance(value, (int, float)) or not math.isfinite(value):
        raise InputError("must be a finite number", key=name, value=value, mend="give a plain number")
    return float(value)


def positive(name: str, value: float) -> float:
    """Return a finite number above 0 or raise InputError that names the parameter."""
    if number(name, value) <= 0.0:
        raise InputError("must be above 0", key=name, value=value, mend="check its sign and unit")
    return float(value)


def between(name: str, value: float, low: float, high: float) -> float:
    """Return a number within [low, high] or raise InputError that names the parameter."""
    if not low <= number(name, value) <= high:
        raise InputError(f"must lie between {low:g} and {high:g}", key=name, value=value, mend="check its unit")
    return float(value)
