"""Traffic on one road: flow as a function of density (Lighthill and Whitham 1955; Richards 1956).

All laws are written for any consistent units: speeds are x over t, densities vehicles per x, flows vehicles per t.
The default words are veh/km, km and h; `units` names another set.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from wavekin.errors import InputError
from wavekin.laws.law import Law, Units
from wavekin.laws.parameters import positive

ROAD = Units("veh/km", "veh/h", "km", "h", "density", "k", "place", "time")

Array = NDArray[np.float64]


def greenshields(free_speed: float, jam_density: float) -> Law:
    """Return Greenshields' law, q = v_f k (1 - k / k_j) (Greenshields 1935), concave.

    Parameters
    ----------
    free_speed : float
        v_f, speed on the empty road (km/h).
    jam_density : float
        k_j, density at standstill (veh/km); states from 0 to k_j.

    Capacity v_f k_j / 4 at half the jam density.
    """
    v, jam = positive("free_speed", free_speed), positive("jam_density", jam_density)
    return Law(
        lambda k: v * np.asarray(k) * (1.0 - np.asarray(k) / jam),
        (0.0, jam),
        derivative=lambda k: v * (1.0 - 2.0 * np.asarray(k) / jam),
        second_derivative=lambda k: np.full_like(np.asarray(k, dtype=float), -2.0 * v / jam),
        inflections=(),
        name="greenshields",
        formula="q = v_f k (1 - k / k_j)",
        parameters={"free_speed": v, "jam_density": jam},
        source="B. D. Greenshields 1935",
        units=ROAD,
    )


def triangular(free_speed: float, jam_density: float, capacity: float) -> Law:
    """Return the triangular law: q = v_f k up to capacity, then a straight fall to 0 at k_j (Newell 1993).

    Parameters
    ----------
    free_speed : float
        v_f (km/h).
    jam_density : float
        k_j (veh/km); states from 0 to k_j.
    capacity : float
        Largest flow (veh/h), below v_f k_j.
    """
    v, jam, top = (
        positive("free_speed", free_speed), positive("jam_density", jam_density), positive("capacity", capacity),
    )  # fmt: skip
    critical = top / v
    if critical >= jam:
        raise InputError(
            f"must stay below free_speed x jam_density = {v * jam:g}", key="capacity", value=top, mend="check its unit"
        )
    corners = (np.array([0.0, critical, jam]), np.array([0.0, top, 0.0]))
    wave = -top / (jam - critical)
    return Law(
        lambda k: np.interp(k, *corners),
        (0.0, jam),
        derivative=lambda k: np.where(np.asarray(k) < critical, v, wave),
        second_derivative=lambda k: np.zeros_like(np.asarray(k, dtype=float)),
        kinks=(critical,),
        inflections=(),
        name="triangular",
        formula="q = min(v_f k, w (k_j - k))",
        parameters={"free_speed": v, "jam_density": jam, "capacity": top},
        source="G. F. Newell 1993; C. F. Daganzo 1994",
        units=ROAD,
        polygon=corners,
    )


def greenberg(optimum_speed: float, jam_density: float) -> Law:
    """Return Greenberg's law, q = v_m k ln(k_j / k) (Greenberg 1959), concave.

    Parameters
    ----------
    optimum_speed : float
        v_m, speed at capacity (km/h).
    jam_density : float
        k_j (veh/km); states from 0 to k_j.

    Capacity v_m k_j / e at k_j / e. Wave speeds grow without bound as the road empties, so the law is meant for
    dense traffic.
    """
    v, jam = positive("optimum_speed", optimum_speed), positive("jam_density", jam_density)

    def logarithm(k: Array) -> Array:
        """Return ln(k_j / k), 0 at k = 0 where it is multiplied by 0."""
        k = np.asarray(k, dtype=float)
        return np.where(k > 0.0, -np.log(np.where(k > 0.0, k, jam) / jam), 0.0)

    def derivative(k: Array) -> Array:
        return np.where(np.asarray(k) > 0.0, v * (logarithm(k) - 1.0), np.inf)

    def second(k: Array) -> Array:
        with np.errstate(divide="ignore"):
            return -v / np.abs(np.asarray(k, dtype=float))  # of either zero: minus infinity

    return Law(
        lambda k: v * np.asarray(k) * logarithm(k),
        (0.0, jam),
        derivative=derivative,
        second_derivative=second,
        inflections=(),
        name="greenberg",
        formula="q = v_m k ln(k_j / k)",
        parameters={"optimum_speed": v, "jam_density": jam},
        source="H. Greenberg 1959",
        units=ROAD,
    )


def underwood(free_speed: float, optimum_density: float, largest_density: float) -> Law:
    """Return Underwood's law, q = v_f k exp(-k / k_m) (Underwood 1961).

    Parameters
    ----------
    free_speed : float
        v_f (km/h).
    optimum_density : float
        k_m, density at capacity (veh/km).
    largest_density : float
        Largest density admitted (veh/km), states from 0 to it; the law itself never comes to a standstill.

    Capacity v_f k_m / e at k_m. Concave below 2 k_m, convex above.
    """
    v, optimum = positive("free_speed", free_speed), positive("optimum_density", optimum_density)
    top = positive("largest_density", largest_density)

    def free(k: Array) -> tuple[Array, Array]:
        """Return k / k_m and the speed there."""
        share = np.asarray(k, dtype=float) / optimum
        return share, v * np.exp(-share)

    def derivative(k: Array) -> Array:
        share, speed = free(k)
        return speed * (1.0 - share)

    def second(k: Array) -> Array:
        share, speed = free(k)
        return speed * (share - 2.0) / optimum

    return Law(
        lambda k: np.asarray(k) * free(k)[1],
        (0.0, top),
        derivative=derivative,
        second_derivative=second,
        inflections=(2.0 * optimum,),
        name="underwood",
        formula="q = v_f k exp(-k / k_m)",
        parameters={"free_speed": v, "optimum_density": optimum, "largest_density": top},
        source="R. T. Underwood 1961",
        units=ROAD,
    )


def smulders(free_speed: float, jam_density: float, critical_density: float) -> Law:
    """Return Smulders' law: Greenshields' parabola up to the critical density, then straight to 0 (Smulders 1990).

        q = v_f k (1 - k / k_j)    for k <= k_c,        q = v_f k_c (1 - k / k_j)    above.

    Parameters
    ----------
    free_speed : float
        v_f (km/h).
    jam_density : float
        k_j (veh/km); states from 0 to k_j.
    critical_density : float
        k_c (veh/km), below k_j; capacity is reached there where k_c <= k_j / 2.

    Concave, with a kink at k_c.
    """
    v, jam = positive("free_speed", free_speed), positive("jam_density", jam_density)
    critical = positive("critical_density", critical_density)
    if critical >= jam:
        raise InputError(f"must stay below jam_density = {jam:g}", key="critical_density", value=critical,
                         mend="check its unit")  # fmt: skip

    def dense(k: Array) -> NDArray[np.bool_]:
        return np.asarray(k) >= critical

    return Law(
        lambda k: v * np.minimum(np.asarray(k), critical) * (1.0 - np.asarray(k) / jam),
        (0.0, jam),
        derivative=lambda k: np.where(dense(k), -v * critical / jam, v * (1.0 - 2.0 * np.asarray(k) / jam)),
        second_derivative=lambda k: np.where(dense(k), 0.0, -2.0 * v / jam),
        kinks=(critical,),
        inflections=(),
        linear=((critical, jam),),
        name="smulders",
        formula="q = v_f min(k, k_c) (1 - k / k_j)",
        parameters={"free_speed": v, "jam_density": jam, "critical_density": critical},
        source="S. A. Smulders 1990",
        units=ROAD,
    )
