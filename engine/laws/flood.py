"""Kinematic waves in open channels and on planes (Lighthill and Whitham 1955): discharge as a function of storage.

Valid where friction balances the slope; a kinematic number above about 20 is asked for (Woolhiser and Liggett
1967, from memory).
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from wavekin.errors import InputError
from wavekin.laws.law import Law, Units
from wavekin.laws.parameters import at_least, positive

CHANNEL = Units("m", "m2/s", "m", "s", "depth", "h", "distance", "time")
SECTION = Units("m2", "m3/s", "m", "s", "wetted area", "A", "distance", "time")
#: Acceleration of gravity, standard value (m/s2).
GRAVITY = 9.80665
#: Derivatives at depth 0 are taken here, so that 0 / 0 stays out.
NEARLY_DRY = 1e-200

Array = NDArray[np.float64]


def _power(
    factor: float, exponent: float, deepest: float, name: str, formula: str, parameters: dict, source: str
) -> Law:
    """Return f = factor h^exponent with exponent above 1; its curvature may be unbounded at depth 0."""

    def power(h: Array, order: int) -> Array:
        depth = np.maximum(np.asarray(h, dtype=float), 0.0)
        with np.errstate(divide="ignore"):
            return factor * (1.0, exponent, exponent * (exponent - 1.0))[order] * depth ** (exponent - order)

    return Law(
        lambda h: power(h, 0),
        (0.0, deepest),
        derivative=lambda h: power(h, 1),
        second_derivative=lambda h: power(h, 2),
        inflections=(),
        name=name,
        formula=formula,
        parameters=parameters,
        source=source,
        units=CHANNEL,
    )


def manning(slope: float, roughness: float, deepest: float = 100.0) -> Law:
    """Return the discharge per width of a wide channel, q = (sqrt(S) / n) h^(5/3) (Manning 1891), convex.

    Parameters
    ----------
    slope : float
        S, bed slope (-).
    roughness : float
        n (s/m^(1/3)).
    deepest : float
        Largest depth (m), states from 0 to it.

    The wave speed is 5/3 of the flow velocity.
    """
    s, n, top = positive("slope", slope), positive("roughness", roughness), positive("deepest", deepest)
    return _power(
        math.sqrt(s) / n, 5.0 / 3.0, top, "manning", "q = sqrt(S) h^(5/3) / n",
        {"slope": s, "roughness": n, "deepest": top}, "R. Manning 1891; M. J. Lighthill and G. B. Whitham 1955",
    )  # fmt: skip


def chezy(slope: float, coefficient: float, deepest: float = 100.0) -> Law:
    """Return the discharge per width of a wide channel, q = C sqrt(S) h^(3/2) (Chezy 1775), convex.

    Parameters
    ----------
    slope : float
        S, bed slope (-).
    coefficient : float
        C (m^(1/2)/s).
    deepest : float
        Largest depth (m), states from 0 to it.

    The wave speed is 3/2 of the flow velocity.
    """
    s, c, top = positive("slope", slope), positive("coefficient", coefficient), positive("deepest", deepest)
    return _power(
        c * math.sqrt(s), 1.5, top, "chezy", "q = C sqrt(S) h^(3/2)",
        {"slope": s, "coefficient": c, "deepest": top}, "A. Chezy 1775; M. J. Lighthill and G. B. Whitham 1955",
    )  # fmt: skip


def laminar(slope: float, viscosity: float = 1.0e-6, deepest: float = 0.01) -> Law:
    """Return the discharge per width of a laminar sheet on a plane, q = g S h^3 / (3 nu) (Nusselt 1916), convex.

    Parameters
    ----------
    slope : float
        S, slope of the plane (-).
    viscosity : float
        nu, kinematic (m2/s); 1e-6 is water at 20 degrees C.
    deepest : float
        Largest depth (m), states from 0 to it.

    The wave speed is 3 times the flow velocity. Valid for Reynolds numbers q / nu below about 500.
    """
    s, nu, top = positive("slope", slope), positive("viscosity", viscosity), positive("deepest", deepest)
    return _power(
        GRAVITY * s / (3.0 * nu), 3.0, top, "laminar", "q = g S h^3 / (3 nu)",
        {"slope": s, "viscosity": nu, "deepest": top}, "W. Nusselt 1916",
    )  # fmt: skip


def trapezoidal(
    slope: float, roughness: float, bottom_width: float, side_slope: float = 0.0, deepest: float = 10.0
) -> Law:
    """Return the discharge of a trapezoidal channel, Q = (sqrt(S) / n) A^(5/3) / P^(2/3) (Manning 1891), convex.

    The state is the wetted area A = (b + z h) h; P = b + 2 h sqrt(1 + z^2) is the wetted perimeter.

    Parameters
    ----------
    slope : float
        S, bed slope (-).
    roughness : float
        n (s/m^(1/3)).
    bottom_width : float
        b (m), at least 0; 0 makes a triangular channel.
    side_slope : float
        z, horizontal over vertical run of the banks, at least 0; 0 makes a rectangular channel.
    deepest : float
        Largest depth (m); states from 0 to the area that it wets.

    With r = A P' / P and s = -A^2 P'' / P >= 0, A^2 Q'' / Q = (10 (1 - r)^2 + 6 s) / 9 >= 0: convex throughout.
    """
    incline, n, top = positive("slope", slope), positive("roughness", roughness), positive("deepest", deepest)
    b = at_least("bottom_width", bottom_width, 0.0, "0 makes a triangular channel")
    z = at_least("side_slope", side_slope, 0.0, "0 makes a rectangular channel")
    if b == 0.0 and z == 0.0:
        raise InputError("must be above 0 where side_slope is 0", key="bottom_width", value=b, mend="give the width")
    factor, bank = math.sqrt(incline) / n, 2.0 * math.sqrt(1.0 + z * z)

    def perimeter(area: Array) -> tuple[Array, Array]:
        """Return the wetted perimeter and the width of the surface."""
        width = np.sqrt(b * b + 4.0 * z * area)
        return b + bank * 2.0 * area / (b + width), width

    def flux(area: Array) -> Array:
        area = np.asarray(area, dtype=float)
        wet = np.maximum(area, NEARLY_DRY)
        return factor * area * (wet / perimeter(wet)[0]) ** (2.0 / 3.0)

    def terms(area: Array) -> tuple[Array, Array, Array, Array]:
        """Return the area, the velocity, r and s."""
        wet = np.maximum(np.asarray(area, dtype=float), NEARLY_DRY)
        p, width = perimeter(wet)
        return (
            wet,
            factor * (wet / p) ** (2.0 / 3.0),
            wet / width * bank / p,
            2.0 * z * bank * (wet / width) ** 2 / (width * p),
        )

    def derivative(area: Array) -> Array:
        _, velocity, r, _ = terms(area)
        return velocity * (5.0 - 2.0 * r) / 3.0

    def second(area: Array) -> Array:
        wet, velocity, r, s = terms(area)
        return velocity / wet * (10.0 * (1.0 - r) ** 2 + 6.0 * s) / 9.0

    return Law(
        flux,
        (0.0, (b + z * top) * top),
        derivative=derivative,
        second_derivative=second,
        inflections=(),
        name="trapezoidal",
        formula="Q = sqrt(S) A^(5/3) / (n P^(2/3))",
        parameters={"slope": incline, "roughness": n, "bottom_width": b, "side_slope": z, "deepest": top},
        source="R. Manning 1891; M. J. Lighthill and G. B. Whitham 1955",
        units=SECTION,
    )
