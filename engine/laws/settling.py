"""Hindered settling of particles: downward solids flux as a function of their concentration (Kynch 1952)."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from wavekin.laws.law import Law, Units
from wavekin.laws.parameters import STEEPEST, above, number, positive, within

COLUMN = Units("-", "m/s", "m", "s", "volume fraction", "phi", "depth", "time")
THICKENER = Units("kg/m3", "kg/(m2 h)", "m", "h", "concentration", "C", "depth", "time")

Array = NDArray[np.float64]


def richardson_zaki(terminal_velocity: float, exponent: float = 4.65, maximum: float = 1.0) -> Law:
    """Return the batch flux f = v_t phi (1 - phi)^n (Richardson and Zaki 1954), positive downwards.

    Parameters
    ----------
    terminal_velocity : float
        v_t of a single particle (m/s).
    exponent : float
        n, from 1 to 100; about 4.65 in the Stokes range, 2.39 at high particle Reynolds numbers.
    maximum : float
        Largest volume fraction, above 0 and at most 1; states from 0 to it.

    Concave below phi = 2 / (n + 1), convex above. The flux does not vanish at `maximum` where that is below 1: a
    bed that lets nothing through is a table of its own.
    """
    v, top = positive("terminal_velocity", terminal_velocity), above("maximum", maximum, 0.0, 1.0)
    n = within("exponent", exponent, 1.0, STEEPEST, "4.65 is usual for small particles")

    def fluid(p: Array) -> Array:
        """Return the share of fluid, 0 a rounding beyond its end."""
        return np.maximum(1.0 - np.asarray(p, dtype=float), 0.0)

    def derivative(p: Array) -> Array:
        p = np.asarray(p, dtype=float)
        return v * fluid(p) ** (n - 1.0) * (1.0 - (n + 1.0) * p)

    def second(p: Array) -> Array:
        p = np.asarray(p, dtype=float)
        if n == 1.0:
            return np.full_like(p, -2.0 * v)
        with np.errstate(divide="ignore"):
            return v * n * fluid(p) ** (n - 2.0) * ((n + 1.0) * p - 2.0)

    return Law(
        lambda p: v * np.asarray(p) * fluid(p) ** n,
        (0.0, top),
        derivative=derivative,
        second_derivative=second,
        inflections=(2.0 / (n + 1.0),),
        name="richardson_zaki",
        formula="f = v_t phi (1 - phi)^n",
        parameters={"terminal_velocity": v, "exponent": n, "maximum": top},
        source="J. F. Richardson and W. N. Zaki 1954; G. J. Kynch 1952",
        units=COLUMN,
    )


def vesilind(velocity: float, decay: float, maximum: float, underflow: float = 0.0) -> Law:
    """Return the flux f = v C exp(-r C) + q C (Vesilind 1968) with an underflow velocity q.

    Parameters
    ----------
    velocity : float
        v (m/h).
    decay : float
        r (m3/kg).
    maximum : float
        Largest concentration (kg/m3), states from 0 to it.
    underflow : float
        Bulk velocity q downwards (m/h); negative above the feed, where the bulk flows up.

    Concave below C = 2 / r, convex above.
    """
    v, r, top = positive("velocity", velocity), positive("decay", decay), positive("maximum", maximum)
    q = number("underflow", underflow)
    return Law(
        lambda c: v * np.asarray(c) * np.exp(-r * np.asarray(c)) + q * np.asarray(c),
        (0.0, top),
        derivative=lambda c: v * (1.0 - r * np.asarray(c)) * np.exp(-r * np.asarray(c)) + q,
        second_derivative=lambda c: v * r * (r * np.asarray(c) - 2.0) * np.exp(-r * np.asarray(c)),
        inflections=(2.0 / r,),
        name="vesilind",
        formula="f = v C exp(-r C) + q C",
        parameters={"velocity": v, "decay": r, "maximum": top, "underflow": q},
        source="P. A. Vesilind 1968",
        units=THICKENER,
    )
