"""One fluid displacing another in a porous medium: fractional flow (Buckley and Leverett 1942)."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from wavekin.laws.law import Law, Units
from wavekin.laws.parameters import STEEPEST, below, number, positive, within

#: Places in lengths of the medium, times in pore volumes injected.
PORE_VOLUMES = Units("-", "-", "L", "PV", "saturation", "s", "distance", "pore volumes injected")
#: Derivatives at a vanishing relative permeability are taken here, so that products of 0 and infinity stay out.
NEARLY_NONE = 1e-280

Array = NDArray[np.float64]
Terms = tuple[Array, Array, Array]


def corey(
    viscosity_ratio: float,
    exponent_displacing: float = 2.0,
    exponent_displaced: float = 2.0,
    gravity: float = 0.0,
    endpoint_ratio: float = 1.0,
    connate: float = 0.0,
    residual: float = 0.0,
) -> Law:
    """Return the fractional flow with Corey's relative permeabilities (Corey 1954; Buckley and Leverett 1942).

    With the mobile saturation e = (s - connate) / (1 - connate - residual), a = e^n and b = (1 - e)^m,

        f = a (1 - gravity b) / (a + M b),    by default s^2 / (s^2 + M (1 - s)^2).

    Parameters
    ----------
    viscosity_ratio : float
        Viscosity of the displacing over that of the displaced fluid, above 0.
    exponent_displacing, exponent_displaced : float
        n and m, from 1 to 100.
    gravity : float
        Buoyancy over viscous force of the displaced fluid at its end point: permeability times its end-point
        relative permeability times density difference times g times sine of the dip, over its viscosity times
        the total velocity; positive where gravity holds the displacing fluid back. f is not monotone where it
        is large.
    endpoint_ratio : float
        End-point permeability of the displaced over that of the displacing fluid; M = viscosity_ratio times it.
    connate, residual : float
        Immobile saturations of the displacing and of the displaced fluid, at least 0, in sum below 1.

    States are saturations of the displacing fluid from connate to 1 - residual, dimensionless; places are shares
    of the length and times pore volumes injected. Valid without capillary pressure, for incompressible fluids.
    With exponents below 2 the curvature is unbounded at an end of the range.
    """
    ratio = positive("viscosity_ratio", viscosity_ratio)
    n = within("exponent_displacing", exponent_displacing, 1.0, STEEPEST, "2 is usual")
    m = within("exponent_displaced", exponent_displaced, 1.0, STEEPEST, "2 is usual")
    g = number("gravity", gravity)
    end = positive("endpoint_ratio", endpoint_ratio)
    low = below("connate", connate, 0.0, 1.0)
    high = 1.0 - below("residual", residual, 0.0, 1.0 - low, "connate and residual stay below 1 in sum")
    mobility, width = ratio * end, high - low

    def shares(s: Array) -> tuple[Array, Array]:
        """Return mobile saturations of the displacing and the displaced fluid, both exact where they vanish.

        States a rounding beyond the range count as its ends, as in all laws with broken powers.
        """
        s = np.asarray(s, dtype=float)
        return np.maximum(s - low, 0.0) / width, np.maximum(high - s, 0.0) / width

    def flux(s: Array) -> Array:
        e, rest = shares(s)
        a, b = e**n, rest**m
        return a * (1.0 - g * b) / (a + mobility * b)

    def parts(s: Array) -> tuple[Terms, Terms]:
        """Return numerator and denominator of f, each with its first two derivatives."""
        e, rest = shares(s)
        a, b = _power(e, n, 1.0 / width), _power(rest, m, -1.0 / width)
        top = (
            a[0] * (1.0 - g * b[0]),
            a[1] * (1.0 - g * b[0]) - g * a[0] * b[1],
            a[2] * (1.0 - g * b[0]) - 2.0 * g * a[1] * b[1] - g * a[0] * b[2],
        )
        return top, (a[0] + mobility * b[0], a[1] + mobility * b[1], a[2] + mobility * b[2])

    def derivative(s: Array) -> Array:
        (top, dtop, _), (bottom, dbottom, _) = parts(s)
        return (dtop * bottom - top * dbottom) / bottom**2

    def second(s: Array) -> Array:
        (top, dtop, ddtop), (bottom, dbottom, ddbottom) = parts(s)
        bent = ddtop / bottom - (2.0 * dtop * dbottom + top * ddbottom) / bottom**2
        return bent + 2.0 * top * dbottom**2 / bottom**3

    plain = n == 2.0 and m == 2.0 and g == 0.0
    return Law(
        flux,
        (low, high),
        derivative=derivative,
        second_derivative=second,
        kinks=(),
        inflections=(low + width * _turn(mobility),) if plain else None,  # type: ignore[arg-type]
        name="corey",
        formula="f = e^n (1 - G (1-e)^m) / (e^n + M (1-e)^m), e = (s - connate) / (1 - connate - residual)",
        parameters={
            "viscosity_ratio": ratio,
            "exponent_displacing": n,
            "exponent_displaced": m,
            "gravity": g,
            "endpoint_ratio": end,
            "connate": low,
            "residual": float(residual),
        },
        source="A. T. Corey 1954; S. E. Buckley and M. C. Leverett 1942",
        units=PORE_VOLUMES,
    )


def _turn(mobility: float) -> float:
    """Return the inflection of e^2 / (e^2 + M (1-e)^2), the root of 3 e^2 - 2 e^3 = M / (1 + M)."""
    if mobility > 1.0:  # the mirror image, whose root is small, keeps its digits
        return 1.0 - _turn(1.0 / mobility)
    share = mobility / (1.0 + mobility)
    e = 0.5 - math.sin(math.asin(1.0 - 2.0 * share) / 3.0)
    for _ in range(2):  # Newton's steps give back the digits that the angle loses where the root nears 0
        if e > 0.0:
            e -= (e * e * (3.0 - 2.0 * e) - share) / (6.0 * e * (1.0 - e))
    return e


def _power(base: Array, exponent: float, slope: float) -> Terms:
    """Return base^exponent and its first two derivatives with respect to s, where base has the given slope in s."""
    base = np.maximum(base, NEARLY_NONE)
    if exponent == 1.0:
        return base, np.full_like(base, slope), np.zeros_like(base)
    first = slope * exponent * base ** (exponent - 1.0)
    return base**exponent, first, slope**2 * exponent * (exponent - 1.0) * base ** (exponent - 2.0)
