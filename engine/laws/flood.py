"""Kinematic waves in open channels and on planes (Lighthill and Whitham 1955): discharge as a function of depth.

Valid where friction balances the slope; a kinematic number above about 20 is asked for (Woolhiser and Liggett
1967, from memory).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from wavekin.laws.law import Law, Units
from wavekin.laws.parameters import positive

CHANNEL = Units("m", "m2/s", "m", "s", "depth", "h", "distance", "time")


def _power(
    factor: float, exponent: float, deepest: float, name: str, formula: str, parameters: dict, source: str
) -> Law:
    """Return f = factor h^exponent with exponent above 1; its curvature may be unbounded at depth 0."""

    def second(h: NDArray[np.float64]) -> NDArray[np.float64]:
        with np.errstate(divide="ignore"):
            return factor * exponent * (exponent - 1.0) * np.asarray(h, dtype=float) ** (exponent - 2.0)

    return Law(
        lambda h: factor * np.asarray(h, dtype=float) ** exponent,
        (0.0, deepest),
        derivative=lambda h: factor * exponent * np.asarray(h, dtype=float) ** (exponent - 1.0),
        second_derivative=second,
        inflections=(),
        name=name,
        formula=formula,
        parameters=parameters,
        source=source,
        units=CHANNEL,
    )


def manning(slope: float, roughness: float, deepest: float = 100.0) -> Law:
    """Return the discharge per width of a wide channel, q = (sqrt(S) / n) h^(5/3) (Manning 1891).

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
        float(np.sqrt(s) / n), 5.0 / 3.0, top, "manning", "q = sqrt(S) h^(5/3) / n",
        {"slope": s, "roughness": n, "deepest": top}, "R. Manning 1891; M. J. Lighthill and G. B. Whitham 1955",
    )  # fmt: skip


def chezy(slope: float, coefficient: float, deepest: float = 100.0) -> Law:
    """Return the discharge per width of a wide channel, q = C sqrt(S) h^(3/2) (Chezy 1775).

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
        float(c * np.sqrt(s)), 1.5, top, "chezy", "q = C sqrt(S) h^(3/2)",
        {"slope": s, "coefficient": c, "deepest": top}, "A. Chezy 1775; M. J. Lighthill and G. B. Whitham 1955",
    )  # fmt: skip
