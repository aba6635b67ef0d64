"""A solute that sorbs in a packed column: transport of the conserved total (Rhee, Aris and Amundson 1986).

The column holds the total T = c + F n(c) per volume of fluid, of which c moves with the fluid's velocity v:
T_t + (v c(T))_x = 0, n being the isotherm and F the volume of solid over that of fluid. Local equilibrium and no
dispersion are assumed.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from wavekin.errors import InputError
from wavekin.laws.law import Law, Units
from wavekin.laws.parameters import STEEPEST, positive, within

BED = Units("mol/m3", "mol/(m2 s)", "m", "s", "total concentration", "T", "distance", "time")
#: Newton's iteration on a convex function falls steadily to the root and then doubles its digits each time.
MAX_ITERATIONS = 200

Array = NDArray[np.float64]


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

    def concentration(total: Array) -> Array:
        """Return c(T), the root of k c^2 + (1 + F N k - k T) c - T = 0 without cancellation."""
        t = np.asarray(total, dtype=float)
        b = 1.0 + ratio * top * k - k * t
        root = np.sqrt(b * b + 4.0 * k * t)
        return np.where(b > 0.0, 2.0 * t / np.where(b > 0.0, b + root, 1.0), (root - b) / (2.0 * k))

    def rise(total: Array) -> Array:
        """Return dT/dc at the concentration that a total holds."""
        return 1.0 + ratio * top * k / (1.0 + k * concentration(total)) ** 2

    def second(total: Array) -> Array:
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


def freundlich(velocity: float, phase_ratio: float, coefficient: float, exponent: float, largest: float) -> Law:
    """Return the flux v c of a solute with Freundlich's isotherm as a function of the total held (Freundlich 1906).

    The total is T = c + F n(c) with n = coefficient c^exponent; the flux is v c(T), convex for exponents below 1
    (then a feed front is a shock), concave above. c(T) has no closed form and is found to rounding by Newton's
    iteration.

    Parameters
    ----------
    velocity : float
        v, interstitial velocity (m/s).
    phase_ratio : float
        F, solid over fluid volume (-).
    coefficient : float
        K of the isotherm (mol/m3 for c = 1 mol/m3).
    exponent : float
        p, from 0.01 to 100 and not 1 (which is plain transport); 0.5 to 1 is usual.
    largest : float
        Largest fluid concentration c (mol/m3); states T from 0 to what it holds.

    For exponents below 1 the first trace of solute does not move at all, f'(0) = 0; the curvature may be
    unbounded at 0.
    """
    v, ratio = positive("velocity", velocity), positive("phase_ratio", phase_ratio)
    k, most = positive("coefficient", coefficient), positive("largest", largest)
    p = within("exponent", exponent, 1.0 / STEEPEST, STEEPEST, "0.5 to 1 is usual")
    if p == 1.0:
        raise InputError(
            "must differ from 1, which is plain transport", key="exponent", value=p,
            mend="use transport with speed = velocity / (1 + phase_ratio coefficient)",
        )  # fmt: skip
    held = ratio * k
    # In T = z^moving + held z^sorbed one exponent is 1 and the other above 1, so that T is convex in z.
    moving, sorbed = (1.0 / p, 1.0) if p < 1.0 else (1.0, p)

    def rise(z: Array) -> Array:
        """Return dT/dz."""
        return moving * z ** (moving - 1.0) + held * sorbed * z ** (sorbed - 1.0)

    def root(total: Array) -> Array:
        """Return z(T), from the two upper bounds that either term alone gives downwards."""
        t = np.maximum(np.asarray(total, dtype=float), 0.0)
        z = np.minimum(t ** (1.0 / moving), (t / held) ** (1.0 / sorbed))
        for _ in range(MAX_ITERATIONS):
            excess = z**moving + held * z**sorbed - t
            lower = np.maximum(z - excess / rise(z), 0.0)
            if not (lower < z).any():
                break
            z = np.minimum(z, lower)
        return z

    bend = max(moving, sorbed)
    side = 1.0 if p < 1.0 else -1.0

    def derivative(total: Array) -> Array:
        z = root(total)
        return v * moving * z ** (moving - 1.0) / rise(z)

    def second(total: Array) -> Array:
        z = root(total)
        with np.errstate(divide="ignore", over="ignore"):
            return side * v * held * bend * (bend - 1.0) * z ** (bend - 2.0) / rise(z) ** 3

    with np.errstate(over="ignore"):
        fullest = most + held * float(np.power(most, p))
    return Law(
        lambda total: v * root(total) ** moving,
        (0.0, fullest),
        derivative=derivative,
        second_derivative=second,
        inflections=(),
        name="freundlich",
        formula="f = v c(T), T = c + F K c^p",
        parameters={"velocity": v, "phase_ratio": ratio, "coefficient": k, "exponent": p, "largest": most},
        source="H. Freundlich 1906; H.-K. Rhee, R. Aris and N. R. Amundson 1986",
        units=BED,
    )
