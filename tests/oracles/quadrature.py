"""The departure of a front from the true law, by brute force and by scipy.

A front from u_l to u_r with the speed s of its chord departs from the exact self-similar solution at the rate

    D(u_l, u_r) = integral of |env'(u) - s| du between them = total variation of env - chord,

env being the lower convex envelope of f (upper concave where u_l > u_r). Three routes that share nothing: the
hull of a very fine sampling; adaptive quadrature of the integrand where the envelope is f itself; and such
quadrature with the point of tangency found by a root finder where f has one inflection.
"""

from __future__ import annotations

from collections.abc import Callable
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import quad
from scipy.optimize import brentq

Array = NDArray[np.float64]

#: Points at which the flux is sampled by the brute-force route.
SAMPLES = 100_001


def sampled_envelope(
    flux: Callable[[Array], Array], left: float, right: float, samples: int = SAMPLES
) -> tuple[Array, Array]:
    """Return corners (u, f), by increasing u, of the envelope that the jump from left to right sees.

    The hull of points of the graph lies on the graph's side of the envelope, no further from it than
    max|f''| w^2 / 8 with w the spacing of the points (times 2 where a tangent falls between two points).
    """
    low, high = min(left, right), max(left, right)
    u = np.linspace(low, high, samples)
    f = np.asarray(flux(u), float)
    sign = 1.0 if left < right else -1.0
    slope = (f[-1] - f[0]) / (high - low)
    depth = (sign * (f - f[0] - slope * (u - low))).tolist()  # small numbers: the turns below lose no digits
    places = (u - low).tolist()
    corners: list[int] = []
    for i in range(samples):
        while len(corners) >= 2:
            j, k = corners[-2], corners[-1]
            width, rise = places[k] - places[j], depth[k] - depth[j]
            if width * (depth[i] - depth[j]) > rise * (places[i] - places[j]):
                break
            corners.pop()
        corners.append(i)
    return u[corners], f[corners]


def departure_by_sampling(flux: Callable[[Array], Array], left: float, right: float, samples: int = SAMPLES) -> float:
    """Return D as the total variation of the sampled envelope less its chord."""
    u, f = sampled_envelope(flux, left, right, samples)
    slope = (f[-1] - f[0]) / (u[-1] - u[0])
    return float(np.abs(np.diff(f) - slope * np.diff(u)).sum())


def departure_of_fan(
    flux: Callable[[float], float], derivative: Callable[[float], float], left: float, right: float
) -> float:
    """Return D by quadrature for a jump whose envelope is f itself (f' grows from left to right)."""
    slope = (flux(right) - flux(left)) / (right - left)
    low, high = min(left, right), max(left, right)
    middle = brentq(lambda u: derivative(u) - slope, low, high, xtol=1e-15)
    parts = [
        quad(lambda u: abs(derivative(u) - slope), a, b, epsabs=1e-15, epsrel=1e-13)[0]
        for a, b in ((low, middle), (middle, high))
    ]
    return float(sum(parts))


def tangency(
    flux: Callable[[float], float],
    derivative: Callable[[float], float],
    anchor: float,
    bracket: tuple[float, float],
) -> float:
    """Return the point in the bracket at which the tangent to f goes through f at the anchor (Welge 1952)."""

    def miss(u: float) -> float:
        return derivative(u) * (u - anchor) - (flux(u) - flux(anchor))

    return float(brentq(miss, *bracket, xtol=1e-15, rtol=1e-15))


def departure_of_compound(
    flux: Callable[[float], float],
    derivative: Callable[[float], float],
    left: float,
    right: float,
    tangent: float,
) -> float:
    """Return D for a jump that truly is a fan from left to the tangent state, then a shock to right."""
    slope = (flux(right) - flux(left)) / (right - left)
    shock = derivative(tangent)
    a, b = sorted((left, tangent))
    crossing = []
    if (derivative(a) - slope) * (derivative(b) - slope) < 0.0:
        crossing = [brentq(lambda u: derivative(u) - slope, a, b, xtol=1e-15)]
    cuts = [a, *crossing, b]
    fan = sum(
        quad(lambda u: abs(derivative(u) - slope), c, d, epsabs=1e-15, epsrel=1e-13)[0] for c, d in pairwise(cuts)
    )
    return float(fan + abs(shock - slope) * abs(right - tangent))
