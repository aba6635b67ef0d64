"""Traffic with two equations: density and the drivers' own speed (Aw and Rascle 2000; Zhang 2002)."""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray
from wavekin.laws.parameters import positive
from wavekin.records import CONTACT, FAN, SHOCK
from wavekin.systems.cores import CORES, EPSILON, NO_WAVE_ULPS, Core, no_mirror, put_wave
from wavekin.systems.system import System, Variable


class TrafficParameters(NamedTuple):
    """Exponent and coefficient of the traffic pressure p = coefficient rho^gamma."""

    gamma: float
    coefficient: float


# The core, on (rho, v, w) without rho's redundancy: (v, w), from which rho = ((w - v) / coefficient)^(1 / gamma)


def density_of(parameters, v, w):  # type: ignore[no-untyped-def]
    """Return the density at a speed v of drivers with w."""
    if w <= v:
        return 0.0
    return ((w - v) / parameters.coefficient) ** (1.0 / parameters.gamma)


def local(parameters, left, right, states, kinds, families, speeds):  # type: ignore[no-untyped-def]
    """Solve the local problem; see `wavekin.systems.cores.Core`. An empty road has v = w."""
    v_l, w_l, v_r, w_r = left[0], left[1], right[0], right[1]
    states[0, 0], states[0, 1] = v_l, w_l
    empty_l, empty_r = w_l <= v_l, w_r <= v_r
    if (v_l == v_r and w_l == w_r) or (empty_l and empty_r):
        return 0
    k = 0
    if empty_l or empty_r:
        if empty_r:
            k = put_wave(k, kinds, families, speeds, FAN, 0, v_l - parameters.gamma * (w_l - v_l), w_l)
        else:
            k = put_wave(k, kinds, families, speeds, CONTACT, 1, v_r, v_r)
        states[k, 0], states[k, 1] = v_r, w_r
        return k
    noise = NO_WAVE_ULPS * EPSILON
    if abs(v_r - v_l) > noise * (abs(v_l) + abs(v_r) + abs(w_l)):
        if v_r < v_l:
            rho_l, rho = density_of(parameters, v_l, w_l), density_of(parameters, v_r, w_l)
            first = last = v_l + rho * (v_r - v_l) / (rho - rho_l)
            kind = SHOCK
        elif v_r < w_l:
            kind, first = FAN, v_l - parameters.gamma * (w_l - v_l)
            last = v_r - parameters.gamma * (w_l - v_r)
        else:
            kind, first, last = FAN, v_l - parameters.gamma * (w_l - v_l), w_l
        k = put_wave(k, kinds, families, speeds, kind, 0, first, last)
        if v_r < w_l:
            states[k, 0], states[k, 1] = v_r, w_l
        else:
            states[k, 0], states[k, 1] = 0.0, 0.0
    if k == 0 or v_r >= w_l or abs(w_r - w_l) > noise * (abs(w_l) + abs(w_r)):
        k = put_wave(k, kinds, families, speeds, CONTACT, 1, v_r, v_r)
    states[k, 0], states[k, 1] = v_r, w_r
    return k


def inside(parameters, family, left, right, share, out):  # type: ignore[no-untyped-def]
    """Fill in the state of a fan at which `share` of the change of speed is done."""
    end = left[1] if right[1] <= right[0] else right[0]
    out[0], out[1] = left[0] + share * (end - left[0]), left[1]


def strength(parameters, family, left, right):  # type: ignore[no-untyped-def]
    """Return the change of v over a wave of the first family, that of w over a contact."""
    if family == 1:
        return right[1] - left[1]
    if right[1] <= right[0]:
        return left[1] - left[0]
    return right[0] - left[0]


def measure(parameters, state, conserved, flux):  # type: ignore[no-untyped-def]
    """Fill in density and rho w and their fluxes."""
    v, w = state[0], state[1]
    rho = density_of(parameters, v, w)
    conserved[0], conserved[1] = rho, rho * w
    flux[0], flux[1] = rho * v, rho * w * v


def jump_speed(parameters, family, left, right):  # type: ignore[no-untyped-def]
    """Return the speed of a step of a fan, the one that keeps both totals."""
    if right[1] <= right[0]:
        return left[0]
    rho_l, rho_r = density_of(parameters, left[0], left[1]), density_of(parameters, right[0], right[1])
    return left[0] + rho_r * (right[0] - left[0]) / (rho_r - rho_l)


CORES[TrafficParameters] = Core(local, inside, strength, measure, no_mirror, jump_speed, (density_of,))


class AwRascleZhang(System):
    """Two-equation traffic; see `aw_rascle_zhang`."""

    name = "aw_rascle_zhang"
    formula = "rho_t + (rho v)_x = 0, (rho w)_t + (rho w v)_x = 0, w = v + k rho^gamma"
    source = "Aw and Rascle 2000; Zhang 2002"
    conserved = (Variable("rho", "density"), Variable("rho w", "density times drivers' speed"))
    primitive = (Variable("rho", "density"), Variable("v", "speed"))
    exact_steps = True

    def __init__(self, gamma: float, coefficient: float) -> None:
        super().__init__(TrafficParameters(gamma, coefficient))

    def pressure(self, rho: ArrayLike) -> NDArray[np.float64]:
        """Return k rho^gamma, shape of `rho` (unit of speed)."""
        return self.parameters.coefficient * np.asarray(rho, dtype=float) ** self.parameters.gamma

    def to_primitive(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return (rho, v), shape of `state`; an empty road has speed 0."""
        rho, load = self._parts(state)
        w = np.divide(load, rho, out=np.zeros_like(rho), where=rho > 0.0)
        return np.stack([rho, np.where(rho > 0.0, w - self.pressure(np.maximum(rho, 0.0)), 0.0)], axis=-1)

    def from_primitive(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return (rho, rho w), shape of `state`."""
        rho, v = self._parts(state)
        return np.stack([rho, rho * (v + self.pressure(rho))], axis=-1)

    def to_inner(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return (v, w), shape of `state`, which are equal on an empty road."""
        rho, load = self._parts(state)
        some = rho > 0.0
        w = np.divide(load, rho, out=np.zeros_like(rho), where=some)
        return np.stack([np.where(some, w - self.pressure(np.maximum(rho, 0.0)), 0.0), w], axis=-1)

    def from_inner(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return (rho, rho w), shape of `state`, from (v, w)."""
        v, w = self._parts(state)
        gamma, k = self.parameters
        rho = (np.maximum(w - v, 0.0) / k) ** (1.0 / gamma)
        return np.stack([rho, rho * w], axis=-1)

    def characteristic_speeds(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return v - rho p'(rho) and v, shape of `state`."""
        v, w = np.moveaxis(self.to_inner(state), -1, 0)
        return np.stack([v - self.parameters.gamma * (w - v), v], axis=-1)

    def check_primitive(self, state: NDArray[np.float64], key: str) -> None:
        """Raise InputError for the first state with a negative density or speed."""
        self._refuse(state[:, 0] < 0.0, state, key, "must have a density of 0 or above", "check its sign")
        tiny = 64.0 * EPSILON * (np.abs(state[:, 1]) + self.pressure(np.maximum(state[:, 0], 0.0)))
        self._refuse(state[:, 1] < -tiny, state, key, "must have a speed of 0 or above", "check rho w and the pressure")

    def scales(self, primitive: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the largest drivers' speed w in the data, for both families."""
        rho, v = self._parts(primitive)
        return np.full(2, max(float((v + self.pressure(rho)).max()), 1e-300))

    @property
    def spec(self) -> dict[str, Any]:
        """What builds the system again."""
        return {"name": "aw_rascle_zhang", "parameters": dict(self.parameters._asdict())}


def aw_rascle_zhang(gamma: float = 1.0, coefficient: float = 1.0) -> AwRascleZhang:
    """Return traffic in which each driver keeps w = v + p(rho), with p = coefficient rho^gamma.

    Parameters
    ----------
    gamma : float
        Exponent of the traffic pressure (-), above 0.
    coefficient : float
        Its coefficient, above 0 (unit of speed over density^gamma).

    Notes
    -----
    States are (rho, rho w), primitive (rho, v), in any consistent units. Shock and fan curves coincide (Temple
    1983). An empty road may be given or open inside; behind it drivers reach their own speed w.
    """
    return AwRascleZhang(positive("gamma", gamma), positive("coefficient", coefficient))
