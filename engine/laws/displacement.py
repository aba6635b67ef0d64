"""One fluid displacing another in a porous medium: fractional flow (Buckley and Leverett 1942)."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from wavekin.laws.law import Law, Units
from wavekin.laws.parameters import number, positive

#: Places in lengths of the medium, times in pore volumes injected.
PORE_VOLUMES = Units("-", "-", "L", "PV", "saturation", "s", "distance", "pore volumes injected")


Terms = tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]


def corey(
    viscosity_ratio: float,
    exponent_displacing: float = 2.0,
    exponent_displaced: float = 2.0,
    gravity: float = 0.0,
    endpoint_ratio: float = 1.0,
) -> Law:
    """Return the fractional flow with Corey's relative permeabilities (Corey 1954; Buckley and Leverett 1942).

    With a = s^n (displacing) and b = M (1 - s)^m (displaced),

        f = a (1 - gravity (1 - s)^m) / (a + b),    by default s^2 / (s^2 + M (1 - s)^2).

    Parameters
    ----------
    viscosity_ratio : float
        Viscosity of the displacing over that of the displaced fluid, above 0.
    exponent_displacing, exponent_displaced : float
        n and m, at least 1.
    gravity : float
        Buoyancy over viscous force of the displaced fluid, positive where gravity holds the displacing fluid
        back; f is not monotone where it is large.
    endpoint_ratio : float
        End-point permeability of the displaced over that of the displacing fluid; M = viscosity_ratio times it.

    States are normalised saturations of the displacing fluid from 0 to 1, dimensionless.
    """
    ratio = positive("viscosity_ratio", viscosity_ratio)
    n = _exponent("exponent_displacing", exponent_displacing)
    m = _exponent("exponent_displaced", exponent_displaced)
    g = number("gravity", gravity)
    end = positive("endpoint_ratio", endpoint_ratio)
    mobility = ratio * end

    def parts(s: NDArray[np.float64]) -> tuple[Terms, Terms]:
        """Return numerator and denominator of f, each with its first two derivatives."""
        s = np.asarray(s, dtype=float)
        with np.errstate(divide="ignore", invalid="ignore"):
            a = _power(s, n, 1.0)
            rest = _power(1.0 - s, m, -1.0)
        numerator = (
            a[0] * (1.0 - g * rest[0]),
            a[1] * (1.0 - g * rest[0]) - g * a[0] * rest[1],
            a[2] * (1.0 - g * rest[0]) - 2.0 * g * a[1] * rest[1] - g * a[0] * rest[2],
        )
        denominator = (a[0] + mobility * rest[0], a[1] + mobility * rest[1], a[2] + mobility * rest[2])
        return numerator, denominator

    def flux(s: NDArray[np.float64]) -> NDArray[np.float64]:
        (top, *_), (bottom, *_) = parts(s)
        return top / bottom

    def derivative(s: NDArray[np.float64]) -> NDArray[np.float64]:
        (top, dtop, _), (bottom, dbottom, _) = parts(s)
        return (dtop * bottom - top * dbottom) / bottom**2

    def second(s: NDArray[np.float64]) -> NDArray[np.float64]:
        (top, dtop, ddtop), (bottom, dbottom, ddbottom) = parts(s)
        with np.errstate(invalid="ignore"):
            bent = ddtop / bottom - (2.0 * dtop * dbottom + top * ddbottom) / bottom**2
            return bent + 2.0 * top * dbottom**2 / bottom**3

    plain = n == 2.0 and m == 2.0 and g == 0.0
    turn = 0.5 - math.sin(math.asin(1.0 - 2.0 * mobility / (1.0 + mobility)) / 3.0)  # 3 s^2 - 2 s^3 = M / (1 + M)
    return Law(
        flux,
        (0.0, 1.0),
        derivative=derivative,
        second_derivative=second,
        inflections=(turn,) if plain else None,
        name="corey",
        formula="f = s^n (1 - G (1-s)^m) / (s^n + M (1-s)^m)",
        parameters={
            "viscosity_ratio": ratio,
            "exponent_displacing": n,
            "exponent_displaced": m,
            "gravity": g,
            "endpoint_ratio": end,
        },
        source="A. T. Corey 1954; S. E. Buckley and M. C. Leverett 1942",
        units=PORE_VOLUMES,
    )


def _power(base: NDArray[np.float64], exponent: float, slope: float) -> Terms:
    """Return base^exponent and its first two derivatives with respect to s, where base has the given slope in s."""
    first = slope * exponent * base ** (exponent - 1.0)
    if exponent == 1.0:
        return base, first, np.zeros_like(base)
    return base**exponent, first, exponent * (exponent - 1.0) * base ** (exponent - 2.0)


def _exponent(name: str, value: float) -> float:
    from wavekin.errors import InputError

    if number(name, value) < 1.0:
        raise InputError("must be at least 1", key=name, value=value, mend="2 is usual")
    return float(value)
