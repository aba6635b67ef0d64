"""One fluid displacing another in a porous medium: fractional flow (Buckley and Leverett 1942)."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from wavekin.laws.law import Law, Units
from wavekin.laws.parameters import number, positive

#: Places in lengths of the medium, times in pore volumes injected.
PORE_VOLUMES = Units("-", "-", "L", "PV", "saturation", "s", "distance", "pore volumes injected")


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

    def flux(s: NDArray[np.float64]) -> NDArray[np.float64]:
        s = np.asarray(s, dtype=float)
        rest = (1.0 - s) ** m
        a = s**n
        return a * (1.0 - g * rest) / (a + mobility * rest)

    def derivative(s: NDArray[np.float64]) -> NDArray[np.float64]:
        s = np.asarray(s, dtype=float)
        a, b, rest = s**n, mobility * (1.0 - s) ** m, (1.0 - s) ** m
        da, db, drest = n * s ** (n - 1.0), -mobility * m * (1.0 - s) ** (m - 1.0), -m * (1.0 - s) ** (m - 1.0)
        total = a + b
        plain = (da * b - a * db) / total**2
        return plain * (1.0 - g * rest) - g * drest * a / total

    return Law(
        flux,
        (0.0, 1.0),
        derivative=derivative,
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


def _exponent(name: str, value: float) -> float:
    from wavekin.errors import InputError

    if number(name, value) < 1.0:
        raise InputError("must be at least 1", key=name, value=value, mend="2 is usual")
    return float(value)
