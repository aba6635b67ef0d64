"""A solute that sorbs in a packed column: transport of the conserved total (Rhee, Aris and Amundson 1986)."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from wavekin.laws.law import Law, Units
from wavekin.laws.parameters import positive

BED = Units("mol/m3", "mol/(m2 s)", "m", "s", "total concentration", "T", "distance", "time")


def langmuir(velocity: float, phase_ratio: float, capacity: float, affinity: float, largest: float) -> Law:
    """Return the flux v c of a solute with Langmuir's isotherm as a function of the total held (Langmuir 1918).

    The total is T = c + F n(c) with n = capacity affinity c / (1 + affinity c); the flux is v c(T), convex.

    Parameters
    ----------
    velocity : float
        v, interstitial velocity (m/s).
    phase_ratio : float
        F, solid over fluid volume (-).
    capacity : float
        Largest sorbed concentration (mol/m3).
    affinity : float
        Langmuir's constant (m3/mol).
    largest : float
        Largest fluid concentration c (mol/m3); states T from 0 to what it holds.
    """
    v, ratio = positive("velocity", velocity), positive("phase_ratio", phase_ratio)
    top, k, most = positive("capacity", capacity), positive("affinity", affinity), positive("largest", largest)

    def concentration(total: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return c(T), the root of k c^2 + (1 + F N k - k T) c - T = 0 without cancellation."""
        t = np.asarray(total, dtype=float)
        b = 1.0 + ratio * top * k - k * t
        root = np.sqrt(b * b + 4.0 * k * t)
        return np.where(b > 0.0, 2.0 * t / (b + root), (root - b) / (2.0 * k))

    def rise(total: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return dT/dc at the concentration that a total holds."""
        return 1.0 + ratio * top * k / (1.0 + k * concentration(total)) ** 2

    def second(total: NDArray[np.float64]) -> NDArray[np.float64]:
        c = concentration(total)
        return v * 2.0 * ratio * top * k * k / (1.0 + k * c) ** 3 / rise(total) ** 3

    return Law(
        lambda total: v * concentration(total),
        (0.0, most + ratio * top * k * most / (1.0 + k * most)),
        derivative=lambda total: v / rise(total),
        second_derivative=second,
        inflections=(),
        name="langmuir",
        formula="f = v c(T), T = c + F N k c / (1 + k c)",
        parameters={
            "velocity": v,
            "phase_ratio": ratio,
            "capacity": top,
            "affinity": k,
            "largest": most,
        },
        source="I. Langmuir 1918; H.-K. Rhee, R. Aris and N. R. Amundson 1986",
        units=BED,
    )
