"""Water draining through unsaturated soil by gravity alone: a kinematic wave in the water content (Colbeck 1972)."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from wavekin.laws.law import Law, Units
from wavekin.laws.parameters import above, below, positive, within

PROFILE = Units("-", "m/d", "m", "d", "water content", "theta", "depth", "time")


def brooks_corey(conductivity: float, pore_index: float, saturated: float, residual: float = 0.0) -> Law:
    """Return the gravity drainage q = K_s e^(3 + 2 / lambda), downwards (Brooks and Corey 1964), convex.

    e = (theta - residual) / (saturated - residual) is the effective saturation; the exponent follows from
    Burdine's theory (Burdine 1953).

    Parameters
    ----------
    conductivity : float
        K_s, saturated hydraulic conductivity (m/d).
    pore_index : float
        lambda, index of the pore sizes' distribution, from 0.05 to 100 (about 0.2 in clay to 3 in sand).
    saturated, residual : float
        Water contents (volume shares) at saturation, at most 1, and below which no water moves.

    States are water contents theta from residual to saturated. Valid where capillary gradients are small against
    gravity: drainage of coarse or deep soil, not fronts in clay.
    """
    k, index = (
        positive("conductivity", conductivity),
        within("pore_index", pore_index, 0.05, 100.0, "0.2 to 3 is usual"),
    )
    full = above("saturated", saturated, 0.0, 1.0, "it is a share of the volume")
    least = below("residual", residual, 0.0, full, "it stays below the saturated content")
    exponent, width = 3.0 + 2.0 / index, full - least

    def term(theta: NDArray[np.float64], order: int) -> NDArray[np.float64]:
        e = np.maximum(np.asarray(theta, dtype=float) - least, 0.0) / width
        factor = (1.0, exponent, exponent * (exponent - 1.0))[order]
        return k * factor / width**order * e ** (exponent - order)

    return Law(
        lambda theta: term(theta, 0),
        (least, full),
        derivative=lambda theta: term(theta, 1),
        second_derivative=lambda theta: term(theta, 2),
        inflections=(),
        name="brooks_corey",
        formula="q = K_s ((theta - theta_r) / (theta_s - theta_r))^(3 + 2 / lambda)",
        parameters={"conductivity": k, "pore_index": index, "saturated": full, "residual": least},
        source="R. H. Brooks and A. T. Corey 1964; S. C. Colbeck 1972",
        units=PROFILE,
    )
