"""Shallow water in a rectangular channel: bores, fans, dry beds and a passive tracer."""

from __future__ import annotations

import math
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray
from wavekin.laws.parameters import positive
from wavekin.records import CONTACT, FAN, SHOCK
from wavekin.systems.cores import CORES, EPSILON, LAST_STEP, NEWTON_STEPS, NO_WAVE_ULPS, Core, put_wave
from wavekin.systems.system import System, Variable


class WaterParameters(NamedTuple):
    """Acceleration of gravity (m/s2), for water without a tracer."""

    gravity: float


class TracerParameters(NamedTuple):
    """Acceleration of gravity (m/s2), for water with a tracer."""

    gravity: float


# The solve for the middle depth, pure floats


def velocity_change(h: float, depth: float, gravity: float) -> tuple[float, float]:
    """Return the velocity change over a wave from `depth` to the depth h, and its derivative by h."""
    if h > depth:
        root = math.sqrt(0.5 * gravity * (1.0 / h + 1.0 / depth))
        return (h - depth) * root, root - 0.25 * gravity * (h - depth) / (h * h * root)
    c, c_0 = math.sqrt(gravity * h), math.sqrt(gravity * depth)
    return 2.0 * gravity * (h - depth) / (c + c_0), gravity / c if c > 0.0 else math.inf


def solve_star(h_l: float, u_l: float, h_r: float, u_r: float, gravity: float) -> tuple[float, float, float, float]:
    """Return depth and velocity between the waves, and the velocity change over the left and the right wave.

    Between two fans in closed form; else Newton's iteration from below on the increasing concave function of h,
    inside a bracket, bisected whenever a step leaves it. A dry middle has depth 0.
    """
    rest = u_r - u_l
    low = min(h_l, h_r)
    at_low = velocity_change(low, h_l, gravity)[0] + velocity_change(low, h_r, gravity)[0] + rest
    if at_low >= 0.0:
        c = max(0.5 * (math.sqrt(gravity * h_l) + math.sqrt(gravity * h_r)) - 0.25 * rest, 0.0)
        h = min(c * c / gravity, low)
    else:
        high = math.inf
        h = max(h_l, h_r)
        for step in range(2 * NEWTON_STEPS):
            change_l, slope_l = velocity_change(h, h_l, gravity)
            change_r, slope_r = velocity_change(h, h_r, gravity)
            value = change_l + change_r + rest
            if abs(value) <= EPSILON * (abs(change_l) + abs(change_r)):
                break
            if value > 0.0:
                high = h
            else:
                low = h
            following = h - value / (slope_l + slope_r)
            if step >= NEWTON_STEPS or not low < following < high:
                following = 0.5 * (low + high) if high < math.inf else 4.0 * h
                if not low < following < high:
                    break
            if abs(following - h) <= LAST_STEP * h:
                h = following
                break
            h = following
    change_l, change_r = velocity_change(h, h_l, gravity)[0], velocity_change(h, h_r, gravity)[0]
    return h, 0.5 * (u_l + u_r) + 0.5 * (change_r - change_l), change_l, change_r


# The core, on (h, u) or (h, u, tracer)


def dry_waves(parameters, left, right, states, kinds, families, speeds):  # type: ignore[no-untyped-def]
    """Enter the fans beside a dry bed that is given or opens between the states; return their number."""
    last = len(left) - 1
    k = 0
    if left[0] > 0.0:
        c = math.sqrt(parameters.gravity * left[0])
        k = put_wave(k, kinds, families, speeds, FAN, 0, left[1] - c, left[1] + 2.0 * c)
        for i in range(last + 1):
            states[k, i] = 0.0
    if right[0] > 0.0:
        c = math.sqrt(parameters.gravity * right[0])
        k = put_wave(k, kinds, families, speeds, FAN, last, right[1] - 2.0 * c, right[1] + c)
        for i in range(last + 1):
            states[k, i] = right[i]
    return k


def local(parameters, left, right, states, kinds, families, speeds):  # type: ignore[no-untyped-def]
    """Solve the local problem; see `wavekin.systems.cores.Core`."""
    g = parameters.gravity
    last = len(left) - 1
    same = True
    for i in range(last + 1):
        states[0, i] = left[i]
        same = same and left[i] == right[i]
    if same:
        return 0
    h_l, u_l, h_r, u_r = left[0], left[1], right[0], right[1]
    c_l, c_r = math.sqrt(g * h_l), math.sqrt(g * h_r)
    if h_l <= 0.0 or h_r <= 0.0 or u_r - u_l >= 2.0 * (c_l + c_r):
        return dry_waves(parameters, left, right, states, kinds, families, speeds)
    h, u, change_l, change_r = solve_star(h_l, u_l, h_r, u_r, g)
    if h <= 0.0:
        return dry_waves(parameters, left, right, states, kinds, families, speeds)
    noise = NO_WAVE_ULPS * EPSILON * (abs(u_l) + abs(u_r) + c_l + c_r)
    has_left, has_right = abs(change_l) > noise, abs(change_r) > noise
    c = math.sqrt(g * h)
    k = 0
    if has_left or (last == 1 and not has_right):
        if h > h_l:
            first = end = u_l - math.sqrt(0.5 * g * h * (h + h_l) / h_l)
        else:
            first, end = u_l - c_l, u - c
        k = put_wave(k, kinds, families, speeds, SHOCK if h > h_l else FAN, 0, first, end)
        states[k, 0], states[k, 1] = h, u
        if last == 2:
            states[k, 2] = left[2]
    if last == 2 and (left[2] != right[2] or not (has_left or has_right)):
        k = put_wave(k, kinds, families, speeds, CONTACT, 1, u, u)
        states[k, 0], states[k, 1], states[k, 2] = h, u, right[2]
    if has_right:
        if h > h_r:
            first = end = u_r + math.sqrt(0.5 * g * h * (h + h_r) / h_r)
        else:
            first, end = u + c, u_r + c_r
        k = put_wave(k, kinds, families, speeds, SHOCK if h > h_r else FAN, last, first, end)
    for i in range(last + 1):
        states[k, i] = right[i]
    return k


def inside(parameters, family, left, right, share, out):  # type: ignore[no-untyped-def]
    """Fill in the state of a fan at which `share` of the wave celerity's change is done."""
    g = parameters.gravity
    c_l, c_r = math.sqrt(g * left[0]), math.sqrt(g * right[0])
    c = c_l + share * (c_r - c_l)
    if family == 0:
        out[0], out[1] = c * c / g, left[1] - 2.0 * (c - c_l)
    else:
        out[0], out[1] = c * c / g, right[1] + 2.0 * (c - c_r)
    if len(left) == 3:
        out[2] = left[2] if family == 0 else right[2]


def strength(parameters, family, left, right):  # type: ignore[no-untyped-def]
    """Return the change of velocity over a wave, that of the tracer over a contact."""
    if len(left) == 3 and family == 1:
        return right[2] - left[2]
    if left[0] <= 0.0 or right[0] <= 0.0:
        return 2.0 * math.sqrt(parameters.gravity * max(left[0], right[0]))
    return right[1] - left[1]


def measure(parameters, state, conserved, flux):  # type: ignore[no-untyped-def]
    """Fill in depth, discharge and tracer load and their fluxes."""
    h, u = state[0], state[1]
    conserved[0], conserved[1] = h, h * u
    flux[0], flux[1] = h * u, h * u * u + 0.5 * parameters.gravity * h * h
    if len(state) == 3:
        conserved[2], flux[2] = h * state[2], h * u * state[2]


def mirror(parameters, state, out):  # type: ignore[no-untyped-def]
    """Fill in the state with the velocity turned round."""
    out[0], out[1] = state[0], -state[1]
    if len(state) == 3:
        out[2] = state[2]


def jump_speed(parameters, family, left, right):  # type: ignore[no-untyped-def]
    """Return the speed of a step of a fan that keeps the volume."""
    if left[0] <= 0.0:
        return right[1]
    if right[0] <= 0.0:
        return left[1]
    return (right[0] * right[1] - left[0] * left[1]) / (right[0] - left[0])


CORES[WaterParameters] = CORES[TracerParameters] = Core(
    local, inside, strength, measure, mirror, jump_speed, (velocity_change, solve_star, dry_waves)
)


class ShallowWater(System):
    """Shallow water; see `shallow_water`."""

    name = "shallow_water"
    formula = "h_t + (h u)_x = 0, (h u)_t + (h u^2 + g h^2 / 2)_x = 0"
    source = "Saint-Venant 1871; Stoker 1957"
    conserved: tuple[Variable, ...] = (Variable("h", "depth", "m"), Variable("h u", "discharge", "m2/s"))
    primitive: tuple[Variable, ...] = (Variable("h", "depth", "m"), Variable("u", "velocity", "m/s"))
    walls = True
    galilean = True

    def __init__(self, gravity: float, tracer: bool) -> None:
        super().__init__(TracerParameters(gravity) if tracer else WaterParameters(gravity))
        if tracer:
            self.formula += ", (h c)_t + (h c u)_x = 0"
            self.conserved = (*self.conserved, Variable("h c", "tracer load", "m"))
            self.primitive = (*self.primitive, Variable("c", "tracer", "-"))

    def to_primitive(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return (h, u) or (h, u, c), shape of `state`; a dry bed has velocity and tracer 0."""
        h, *loads = self._parts(state)
        wet = h > 0.0
        return np.stack([h, *(np.divide(load, h, out=np.zeros_like(h), where=wet) for load in loads)], axis=-1)

    def from_primitive(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return (h, h u) or (h, h u, h c), shape of `state`."""
        h, *rest = self._parts(state)
        return np.stack([h, *(h * part for part in rest)], axis=-1)

    def characteristic_speeds(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return u - c and u + c (between them u with a tracer), shape of `state`."""
        h, u, *tracer = np.moveaxis(self.to_primitive(state), -1, 0)
        c = np.sqrt(self.parameters.gravity * h)
        return np.stack([u - c, u, u + c] if tracer else [u - c, u + c], axis=-1)

    def entropy_pair(self, state: ArrayLike) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Return the mechanical energy over the density (m3/s2) and its flux, shapes (...)."""
        h, u, *_ = np.moveaxis(self.to_primitive(state), -1, 0)
        g = self.parameters.gravity
        return 0.5 * h * (u * u + g * h), h * u * (0.5 * u * u + g * h)

    def check_primitive(self, state: NDArray[np.float64], key: str) -> None:
        """Raise InputError for the first state with a negative depth."""
        self._refuse(state[:, 0] < 0.0, state, key, "must have a depth of 0 (dry) or above", "check its sign")

    def scales(self, primitive: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the largest celerity or half range of velocity in the data; for a tracer its largest value."""
        c = np.sqrt(self.parameters.gravity * primitive[..., 0].max())
        size = max(float(c), 0.5 * float(np.ptp(primitive[..., 1])))
        if self.n == 2:
            return np.full(2, size)
        return np.array([size, max(float(np.abs(primitive[..., 2]).max()), 1e-300), size])

    @property
    def spec(self) -> dict[str, Any]:
        """What builds the system again."""
        return {"name": "shallow_water", "parameters": {"gravity": self.parameters.gravity, "tracer": self.n == 3}}


def shallow_water(gravity: float = 9.81, tracer: bool = False) -> ShallowWater:
    """Return shallow water in a rectangular channel, without friction or slope.

    Parameters
    ----------
    gravity : float
        Acceleration of gravity (m/s2).
    tracer : bool
        Whether a passive substance is carried along.

    Notes
    -----
    States are (h, h u) or (h, h u, h c), primitive (h, u) or (h, u, c). Dry beds may be given or open inside.
    """
    return ShallowWater(positive("gravity", gravity), bool(tracer))
