"""Gas without an energy equation, p = k rho^gamma (isothermal for gamma = 1): the p-system and its Eulerian form."""

from __future__ import annotations

import math
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray
from wavekin.laws.parameters import at_least, positive
from wavekin.records import FAN, SHOCK
from wavekin.systems.cores import CORES, EPSILON, LAST_STEP, NEWTON_STEPS, NO_WAVE_ULPS, REFUSED_VACUUM, Core, put_wave
from wavekin.systems.system import System, Variable


class LagrangianParameters(NamedTuple):
    """Exponent and coefficient of p = coefficient v^-gamma."""

    gamma: float
    coefficient: float


class EulerianParameters(NamedTuple):
    """Exponent and coefficient of p = coefficient rho^gamma."""

    gamma: float
    coefficient: float


# The solve for the middle pressure, pure floats


def fan_part(p: float, pressure: float, sound: float, gamma: float) -> float:
    """Return the integral of dp / (rho c) from `pressure` to p: the velocity change over a fan."""
    if p <= 0.0:
        return -2.0 * sound / (gamma - 1.0) if gamma > 1.0 else -math.inf
    log = math.log1p((p - pressure) / pressure)
    if gamma == 1.0:
        return sound * log
    return 2.0 * sound / (gamma - 1.0) * math.expm1(0.5 * (gamma - 1.0) / gamma * log)


def velocity_change(p: float, volume: float, pressure: float, gamma: float) -> tuple[float, float]:
    """Return the velocity change over a wave from (volume, pressure) to the pressure p, and its derivative by p."""
    sound = math.sqrt(gamma * pressure * volume)
    if p <= pressure:
        log = math.log1p((p - pressure) / pressure) if p > 0.0 else -math.inf
        slope = math.sqrt(volume / (gamma * pressure)) * math.exp(-0.5 * (gamma + 1.0) / gamma * log)
        return fan_part(p, pressure, sound, gamma), slope
    log = math.log1p((p - pressure) / pressure)
    squeezed = -volume * math.expm1(-log / gamma)
    change = math.sqrt((p - pressure) * squeezed)
    return change, 0.5 * (squeezed + (p - pressure) * (volume - squeezed) / (gamma * p)) / change


def solve_star(
    v_l: float, u_l: float, p_l: float, v_r: float, u_r: float, p_r: float, gamma: float
) -> tuple[float, float, float, float]:
    """Return pressure and velocity between the waves, and the velocity change over the left and the right wave.

    Between two fans in closed form; else Newton's iteration from below inside a bracket, bisected whenever a step
    leaves it. A vacuum has pressure 0.
    """
    rest = u_r - u_l
    low, high = min(p_l, p_r), math.inf
    at_low = velocity_change(low, v_l, p_l, gamma)[0] + velocity_change(low, v_r, p_r, gamma)[0] + rest
    if at_low >= 0.0:
        c_l, c_r = math.sqrt(gamma * p_l * v_l), math.sqrt(gamma * p_r * v_r)
        if gamma == 1.0:  # c is one number
            p = math.sqrt(p_l) * math.sqrt(p_r) * math.exp(-0.5 * rest / c_l)
        else:
            whole, power, top = c_l + c_r - 0.5 * (gamma - 1.0) * rest, 0.5 * (gamma - 1.0) / gamma, max(p_l, p_r)
            p = 0.0
            if whole > 0.0:
                p = top * (whole / (c_l * (top / p_l) ** power + c_r * (top / p_r) ** power)) ** (1.0 / power)
        p = min(p, low)
    else:
        p = max(p_l, p_r)
        for step in range(2 * NEWTON_STEPS):
            change_l, slope_l = velocity_change(p, v_l, p_l, gamma)
            change_r, slope_r = velocity_change(p, v_r, p_r, gamma)
            value = change_l + change_r + rest
            if abs(value) <= EPSILON * (abs(change_l) + abs(change_r)):
                break
            if value > 0.0:
                high = p
            else:
                low = p
            following = p - value / (slope_l + slope_r)
            if step >= NEWTON_STEPS or not low < following < high:
                following = math.sqrt(low) * math.sqrt(high) if high < math.inf else 4.0 * p
                if not low < following < high:
                    break
            if abs(following - p) <= LAST_STEP * p:
                p = following
                break
            p = following
    change_l = velocity_change(p, v_l, p_l, gamma)[0] if p > 0.0 else 0.0
    change_r = velocity_change(p, v_r, p_r, gamma)[0] if p > 0.0 else 0.0
    return p, 0.5 * (u_l + u_r) + 0.5 * (change_r - change_l), change_l, change_r


# The cores, on (v, u) and (rho, u)


def pressure_at_volume(parameters, v):  # type: ignore[no-untyped-def]
    """Return the pressure at a specific volume."""
    return parameters.coefficient * v ** (-parameters.gamma)


def pressure_at_density(parameters, rho):  # type: ignore[no-untyped-def]
    """Return the pressure at a density."""
    return parameters.coefficient * rho**parameters.gamma


def local_lagrangian(parameters, left, right, states, kinds, families, speeds):  # type: ignore[no-untyped-def]
    """Solve the local problem of the p-system; see `wavekin.systems.cores.Core`."""
    states[0, 0], states[0, 1] = left[0], left[1]
    if left[0] == right[0] and left[1] == right[1]:
        return 0
    gamma = parameters.gamma
    v_l, v_r = left[0], right[0]
    p_l, p_r = pressure_at_volume(parameters, v_l), pressure_at_volume(parameters, v_r)
    p, u, change_l, change_r = solve_star(v_l, left[1], p_l, v_r, right[1], p_r, gamma)
    if p <= 0.0:
        return REFUSED_VACUUM
    c_l, c_r = math.sqrt(gamma * p_l * v_l), math.sqrt(gamma * p_r * v_r)
    noise = NO_WAVE_ULPS * EPSILON * (abs(left[1]) + abs(right[1]) + c_l + c_r)
    has_left, has_right = abs(change_l) > noise, abs(change_r) > noise
    v = (p / parameters.coefficient) ** (-1.0 / gamma)
    slope = math.sqrt(gamma * p / v)
    k = 0
    if has_left or not has_right:
        if p > p_l:
            first = last = -math.sqrt(slope_of_chord(p, p_l, v_l, gamma))
        else:
            first, last = -math.sqrt(gamma * p_l / v_l), -slope
        k = put_wave(k, kinds, families, speeds, SHOCK if p > p_l else FAN, 0, first, last)
        states[k, 0], states[k, 1] = v, u
    if has_right:
        if p > p_r:
            first = last = math.sqrt(slope_of_chord(p, p_r, v_r, gamma))
        else:
            first, last = slope, math.sqrt(gamma * p_r / v_r)
        k = put_wave(k, kinds, families, speeds, SHOCK if p > p_r else FAN, 1, first, last)
    states[k, 0], states[k, 1] = right[0], right[1]
    return k


def slope_of_chord(p: float, pressure: float, volume: float, gamma: float) -> float:
    """Return (p - pressure) / (volume - volume at p), the square of the mass flux through a shock."""
    return (p - pressure) / (-volume * math.expm1(-math.log1p((p - pressure) / pressure) / gamma))


def inside_lagrangian(parameters, family, left, right, share, out):  # type: ignore[no-untyped-def]
    """Fill in the state of a fan at which `share` of the velocity's change is done."""
    gamma = parameters.gamma
    sign = -1.0 if family == 0 else 1.0
    p_l = pressure_at_volume(parameters, left[0])
    c = math.sqrt(gamma * p_l * left[0])
    u = left[1] + share * (right[1] - left[1])
    if gamma == 1.0:
        out[0] = left[0] * math.exp(-sign * (u - left[1]) / c)
    else:
        out[0] = left[0] * (1.0 + sign * 0.5 * (gamma - 1.0) * (u - left[1]) / c) ** (-2.0 / (gamma - 1.0))
    out[1] = u


def strength_of(parameters, family, left, right):  # type: ignore[no-untyped-def]
    """Return the change of velocity over a wave."""
    return right[1] - left[1]


def measure_lagrangian(parameters, state, conserved, flux):  # type: ignore[no-untyped-def]
    """Fill in volume and velocity and their fluxes."""
    conserved[0], conserved[1] = state[0], state[1]
    flux[0], flux[1] = -state[1], pressure_at_volume(parameters, state[0])


def mirror(parameters, state, out):  # type: ignore[no-untyped-def]
    """Fill in the state with the velocity turned round."""
    out[0], out[1] = state[0], -state[1]


def jump_speed_lagrangian(parameters, family, left, right):  # type: ignore[no-untyped-def]
    """Return the speed of a step of a fan that keeps the volume."""
    return -(right[1] - left[1]) / (right[0] - left[0])


def vacuum_waves(parameters, left, right, states, kinds, families, speeds):  # type: ignore[no-untyped-def]
    """Enter the fans beside a vacuum that is given or opens between the states; return their number."""
    reach = 2.0 / (parameters.gamma - 1.0)
    k = 0
    if left[0] > 0.0:
        c = sound_at(parameters, left[0])
        k = put_wave(k, kinds, families, speeds, FAN, 0, left[1] - c, left[1] + reach * c)
        states[k, 0], states[k, 1] = 0.0, 0.0
    if right[0] > 0.0:
        c = sound_at(parameters, right[0])
        k = put_wave(k, kinds, families, speeds, FAN, 1, right[1] - reach * c, right[1] + c)
        states[k, 0], states[k, 1] = right[0], right[1]
    return k


def sound_at(parameters, rho):  # type: ignore[no-untyped-def]
    """Return the sound speed at a density; 0 in a vacuum where the gas is not isothermal."""
    if rho <= 0.0 and parameters.gamma > 1.0:
        return 0.0
    return math.sqrt(parameters.gamma * parameters.coefficient * rho ** (parameters.gamma - 1.0))


def local_eulerian(parameters, left, right, states, kinds, families, speeds):  # type: ignore[no-untyped-def]
    """Solve the local problem of the isentropic gas; see `wavekin.systems.cores.Core`."""
    states[0, 0], states[0, 1] = left[0], left[1]
    if left[0] == right[0] and left[1] == right[1]:
        return 0
    gamma = parameters.gamma
    if left[0] <= 0.0 or right[0] <= 0.0:
        if gamma == 1.0:
            return REFUSED_VACUUM
        return vacuum_waves(parameters, left, right, states, kinds, families, speeds)
    c_l, c_r = sound_at(parameters, left[0]), sound_at(parameters, right[0])
    p_l, p_r = pressure_at_density(parameters, left[0]), pressure_at_density(parameters, right[0])
    p, u, change_l, change_r = solve_star(1.0 / left[0], left[1], p_l, 1.0 / right[0], right[1], p_r, gamma)
    if p <= 0.0:
        if gamma == 1.0:
            return REFUSED_VACUUM
        return vacuum_waves(parameters, left, right, states, kinds, families, speeds)
    noise = NO_WAVE_ULPS * EPSILON * (abs(left[1]) + abs(right[1]) + c_l + c_r)
    has_left, has_right = abs(change_l) > noise, abs(change_r) > noise
    rho = (p / parameters.coefficient) ** (1.0 / gamma)
    c = sound_at(parameters, rho)
    k = 0
    if has_left or not has_right:
        if p > p_l:
            first = last = left[1] - math.sqrt(slope_of_chord(p, p_l, 1.0 / left[0], gamma)) / left[0]
        else:
            first, last = left[1] - c_l, u - c
        k = put_wave(k, kinds, families, speeds, SHOCK if p > p_l else FAN, 0, first, last)
        states[k, 0], states[k, 1] = rho, u
    if has_right:
        if p > p_r:
            first = last = right[1] + math.sqrt(slope_of_chord(p, p_r, 1.0 / right[0], gamma)) / right[0]
        else:
            first, last = u + c, right[1] + c_r
        k = put_wave(k, kinds, families, speeds, SHOCK if p > p_r else FAN, 1, first, last)
    states[k, 0], states[k, 1] = right[0], right[1]
    return k


def inside_eulerian(parameters, family, left, right, share, out):  # type: ignore[no-untyped-def]
    """Fill in the state of a fan at which `share` of the change of the velocity is done."""
    gamma = parameters.gamma
    if gamma == 1.0:
        c = sound_at(parameters, left[0])
        sign = -1.0 if family == 0 else 1.0
        out[1] = left[1] + share * (right[1] - left[1])
        out[0] = left[0] * math.exp(sign * (out[1] - left[1]) / c)
        return
    c_l, c_r = sound_at(parameters, left[0]), sound_at(parameters, right[0])
    c = c_l + share * (c_r - c_l)
    if family == 0:
        out[0], out[1] = left[0] * (c / c_l) ** (2.0 / (gamma - 1.0)), left[1] - 2.0 / (gamma - 1.0) * (c - c_l)
    else:
        out[0], out[1] = right[0] * (c / c_r) ** (2.0 / (gamma - 1.0)), right[1] + 2.0 / (gamma - 1.0) * (c - c_r)


def strength_eulerian(parameters, family, left, right):  # type: ignore[no-untyped-def]
    """Return the change of velocity over a wave."""
    if left[0] <= 0.0 or right[0] <= 0.0:
        return 2.0 / (parameters.gamma - 1.0) * sound_at(parameters, max(left[0], right[0]))
    return right[1] - left[1]


def measure_eulerian(parameters, state, conserved, flux):  # type: ignore[no-untyped-def]
    """Fill in mass and momentum and their fluxes."""
    rho, u = state[0], state[1]
    conserved[0], conserved[1] = rho, rho * u
    flux[0], flux[1] = rho * u, rho * u * u + pressure_at_density(parameters, rho)


def jump_speed_eulerian(parameters, family, left, right):  # type: ignore[no-untyped-def]
    """Return the speed of a step of a fan that keeps the mass."""
    if left[0] <= 0.0:
        return right[1]
    if right[0] <= 0.0:
        return left[1]
    return (right[0] * right[1] - left[0] * left[1]) / (right[0] - left[0])


_SHARED = (fan_part, velocity_change, solve_star, slope_of_chord)
CORES[LagrangianParameters] = Core(
    local_lagrangian, inside_lagrangian, strength_of, measure_lagrangian, mirror, jump_speed_lagrangian,
    (*_SHARED, pressure_at_volume),
)  # fmt: skip
CORES[EulerianParameters] = Core(
    local_eulerian, inside_eulerian, strength_eulerian, measure_eulerian, mirror, jump_speed_eulerian,
    (*_SHARED, pressure_at_density, sound_at, vacuum_waves),
)  # fmt: skip


class PSystem(System):
    """The p-system; see `p_system`."""

    name = "p_system"
    formula = "v_t - u_x = 0, u_t + p(v)_x = 0, p = k v^-gamma"
    source = "Courant and Friedrichs 1948; Smoller 1983"
    conserved = primitive = (Variable("v", "specific volume"), Variable("u", "velocity"))
    walls = True

    def __init__(self, gamma: float, coefficient: float) -> None:
        super().__init__(LagrangianParameters(gamma, coefficient))

    def to_primitive(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return a copy: conserved and primitive variables are the same."""
        return np.array(state, dtype=float)

    def from_primitive(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return a copy: conserved and primitive variables are the same."""
        return np.array(state, dtype=float)

    def pressure(self, volume: ArrayLike) -> NDArray[np.float64]:
        """Return the pressure, shape of `volume`."""
        return self.parameters.coefficient * np.asarray(volume, dtype=float) ** -self.parameters.gamma

    def characteristic_speeds(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return -C and C with C = sqrt(-p'(v)), shape of `state`."""
        v, _ = self._parts(state)
        slope = np.sqrt(self.parameters.gamma * self.pressure(v) / v)
        return np.stack([-slope, slope], axis=-1)

    def entropy_pair(self, state: ArrayLike) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Return kinetic and elastic energy and its flux u p, shapes (...)."""
        v, u = self._parts(state)
        gamma, k = self.parameters
        p = self.pressure(v)
        stored = -k * np.log(v) if gamma == 1.0 else p * v / (gamma - 1.0)
        return 0.5 * u * u + stored, u * p

    def check_primitive(self, state: NDArray[np.float64], key: str) -> None:
        """Raise InputError for the first state whose volume is not above 0."""
        self._refuse(state[:, 0] <= 0.0, state, key, "must have a volume above 0", "check its sign")

    def scales(self, primitive: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the largest sound speed or half range of velocity in the data, for both families."""
        v, u = self._parts(primitive)
        c = np.sqrt(self.parameters.gamma * self.pressure(v) * v)
        return np.full(2, max(float(c.max()), 0.5 * float(np.ptp(u))))

    @property
    def spec(self) -> dict[str, Any]:
        """What builds the system again."""
        return {"name": "p_system", "parameters": dict(self.parameters._asdict())}


class IsentropicGas(System):
    """Isentropic or isothermal gas in space; see `isentropic_gas`."""

    name = "isentropic_gas"
    formula = "rho_t + (rho u)_x = 0, (rho u)_t + (rho u^2 + k rho^gamma)_x = 0"
    source = "Courant and Friedrichs 1948"
    conserved = (Variable("rho", "density"), Variable("rho u", "momentum"))
    primitive = (Variable("rho", "density"), Variable("u", "velocity"))
    walls = True
    galilean = True

    def __init__(self, gamma: float, coefficient: float) -> None:
        super().__init__(EulerianParameters(gamma, coefficient))

    def to_primitive(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return (rho, u), shape of `state`; a vacuum has velocity 0."""
        rho, momentum = self._parts(state)
        return np.stack([rho, np.divide(momentum, rho, out=np.zeros_like(rho), where=rho > 0.0)], axis=-1)

    def from_primitive(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return (rho, rho u), shape of `state`."""
        rho, u = self._parts(state)
        return np.stack([rho, rho * u], axis=-1)

    def sound_speed(self, rho: ArrayLike) -> NDArray[np.float64]:
        """Return the sound speed, shape of `rho`."""
        gamma, k = self.parameters
        return np.sqrt(gamma * k * np.asarray(rho, dtype=float) ** (gamma - 1.0))

    def characteristic_speeds(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return u - c and u + c, shape of `state`."""
        rho, u = np.moveaxis(self.to_primitive(state), -1, 0)
        c = self.sound_speed(rho)
        return np.stack([u - c, u + c], axis=-1)

    def entropy_pair(self, state: ArrayLike) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Return kinetic and internal energy and its flux, shapes (...)."""
        rho, u = np.moveaxis(self.to_primitive(state), -1, 0)
        gamma, k = self.parameters
        p = k * rho**gamma
        stored = k * rho * np.log(np.where(rho > 0.0, rho, 1.0)) if gamma == 1.0 else p / (gamma - 1.0)
        energy = 0.5 * rho * u * u + stored
        return energy, u * (energy + p)

    def check_primitive(self, state: NDArray[np.float64], key: str) -> None:
        """Raise InputError for the first state with a negative density, or a vacuum of isothermal gas."""
        bad = state[:, 0] <= 0.0 if self.parameters.gamma == 1.0 else state[:, 0] < 0.0
        least = "above 0" if self.parameters.gamma == 1.0 else "of 0 (vacuum) or above"
        self._refuse(bad, state, key, f"must have a density {least}", "check its sign")

    def scales(self, primitive: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the largest sound speed or half range of velocity in the data, for both families."""
        rho, u = self._parts(primitive)
        return np.full(2, max(float(self.sound_speed(rho).max()), 0.5 * float(np.ptp(u))))

    @property
    def spec(self) -> dict[str, Any]:
        """What builds the system again."""
        return {"name": "isentropic_gas", "parameters": dict(self.parameters._asdict())}


def p_system(gamma: float = 1.4, coefficient: float = 1.0) -> PSystem:
    """Return the p-system: isentropic (gamma > 1) or isothermal (gamma = 1) gas in Lagrangian coordinates.

    Parameters
    ----------
    gamma : float
        Exponent of p = coefficient v^-gamma (-), from 1.
    coefficient : float
        Its coefficient, above 0; the square of the sound speed where gamma = 1.

    Notes
    -----
    States are (v, u): specific volume and velocity; x is the mass passed. A vacuum has no finite volume, so data
    that would open one are refused.
    """
    return PSystem(at_least("gamma", gamma, 1.0, "1 is isothermal gas"), positive("coefficient", coefficient))


def isentropic_gas(gamma: float = 1.4, coefficient: float = 1.0) -> IsentropicGas:
    """Return isentropic (gamma > 1) or isothermal (gamma = 1) gas in space.

    Parameters
    ----------
    gamma : float
        Exponent of p = coefficient rho^gamma (-), from 1.
    coefficient : float
        Its coefficient, above 0; the square of the sound speed where gamma = 1.

    Notes
    -----
    States are (rho, rho u), primitive (rho, u). Vacuum may be given or open inside, save for gamma = 1.
    """
    return IsentropicGas(at_least("gamma", gamma, 1.0, "1 is isothermal gas"), positive("coefficient", coefficient))
