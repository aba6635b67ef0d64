"""Traffic on one road: flow as a function of density (Lighthill and Whitham 1955; Richards 1956)."""

from __future__ import annotations

import numpy as np
from wavekin.laws.law import Law, Units
from wavekin.laws.parameters import positive

#: Units of the traffic laws; speeds are x over t, densities per x. Another consistent set may be named instead.
ROAD = Units("veh/km", "veh/h", "km", "h", "density", "k", "place", "time")


def greenshields(free_speed: float, jam_density: float, units: Units = ROAD) -> Law:
    """Return Greenshields' law, q = v_f k (1 - k / k_j) (Greenshields 1935), concave.

    Parameters
    ----------
    free_speed : float
        v_f, speed on the empty road (km/h unless `units` says otherwise).
    jam_density : float
        k_j, density at standstill (veh/km); states from 0 to k_j.
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
        units=units,
    )


def triangular(free_speed: float, jam_density: float, capacity: float, units: Units = ROAD) -> Law:
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
    from wavekin.errors import InputError

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
        source="G. F. Newell 1993",
        units=units,
        polygon=corners,
    )
