"""Gas dynamics with mass, momentum and energy: ideal, covolume and stiffened gas, vacuum included.

With the volume w = 1/rho - b and the pressure P = p + p_inf the jump conditions and the isentropes of the three
gases are those of the ideal gas in (w, u, P), and the mass flux through a wave is the same number. So one solve
serves all; only speeds use the true density.
"""

from __future__ import annotations

import math
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray
from wavekin.errors import InputError
from wavekin.laws.parameters import at_least, number
from wavekin.records import CONTACT, FAN, SHOCK
from wavekin.systems.cores import CORES, EPSILON, LAST_STEP, NEWTON_STEPS, NO_WAVE_ULPS, REFUSED_VACUUM, Core, put_wave
from wavekin.systems.system import System, Variable


class EulerParameters(NamedTuple):
    """Parameters of the gas: ratio of heats (-), covolume (volume per mass), stiffening pressure."""

    gamma: float
    covolume: float
    stiffness: float


# The solve for the middle pressure, pure floats


def velocity_change(p: float, rho: float, pressure: float, sound: float, gamma: float) -> tuple[float, float]:
    """Return the velocity change over a wave from (rho, pressure) to the pressure p, and its derivative by p."""
    rise = (p - pressure) / pressure
    if rise > 0.0:
        root = math.sqrt(2.0 / ((gamma + 1.0) * rho * (p + (gamma - 1.0) / (gamma + 1.0) * pressure)))
        change = (p - pressure) * root
        slope = root * (1.0 - 0.5 * (p - pressure) / (p + (gamma - 1.0) / (gamma + 1.0) * pressure))
        return change, slope
    if p <= 0.0:
        return -2.0 * sound / (gamma - 1.0), math.inf
    power = 0.5 * (gamma - 1.0) / gamma
    stretch = math.expm1(power * math.log1p(rise))
    return 2.0 * sound / (gamma - 1.0) * stretch, sound / (gamma * p) * (stretch + 1.0)


def first_guess(
    rho_l: float, u_l: float, p_l: float, rho_r: float, u_r: float, p_r: float, gamma: float, sounds: float
) -> float:
    """Return a guess of the middle pressure: from linear waves, then from shocks of about that strength."""
    linear = 0.5 * (p_l + p_r) - 0.125 * (u_r - u_l) * (rho_l + rho_r) * sounds
    p = max(linear, min(p_l, p_r))
    share = (gamma - 1.0) / (gamma + 1.0)
    root_l = math.sqrt(2.0 / ((gamma + 1.0) * rho_l * (p + share * p_l)))
    root_r = math.sqrt(2.0 / ((gamma + 1.0) * rho_r * (p + share * p_r)))
    return (root_l * p_l + root_r * p_r - (u_r - u_l)) / (root_l + root_r)


def solve_star(
    rho_l: float, u_l: float, p_l: float, rho_r: float, u_r: float, p_r: float, gamma: float
) -> tuple[float, float, float, float]:
    """Return pressure and velocity between the waves, and the velocity change over the left and the right wave.

    Where both waves are fans in closed form; else Newton's iteration on the increasing concave function of p inside
    a bracket, bisected whenever a step leaves it. It ends where the function is within the rounding of its own
    terms, or after a step whose square is below rounding. A vacuum has pressure 0.
    """
    c_l, c_r = math.sqrt(gamma * p_l / rho_l), math.sqrt(gamma * p_r / rho_r)
    rest = u_r - u_l
    low, high = min(p_l, p_r), math.inf
    at_low = velocity_change(low, rho_l, p_l, c_l, gamma)[0] + velocity_change(low, rho_r, p_r, c_r, gamma)[0] + rest
    if at_low >= 0.0:
        whole = c_l + c_r - 0.5 * (gamma - 1.0) * rest
        p = 0.0
        if whole > 0.0:
            top, power = max(p_l, p_r), 0.5 * (gamma - 1.0) / gamma
            p = top * (whole / (c_l * (top / p_l) ** power + c_r * (top / p_r) ** power)) ** (1.0 / power)
            p = min(p, low)
        change_l = velocity_change(p, rho_l, p_l, c_l, gamma)[0]
        change_r = velocity_change(p, rho_r, p_r, c_r, gamma)[0]
        return p, 0.5 * (u_l + u_r) + 0.5 * (change_r - change_l), change_l, change_r
    p = first_guess(rho_l, u_l, p_l, rho_r, u_r, p_r, gamma, c_l + c_r)
    if not low < p < high:
        p = max(p_l, p_r)
    change_l = change_r = 0.0
    for step in range(2 * NEWTON_STEPS):
        change_l, slope_l = velocity_change(p, rho_l, p_l, c_l, gamma)
        change_r, slope_r = velocity_change(p, rho_r, p_r, c_r, gamma)
        value = change_l + change_r + rest
        if abs(value) <= EPSILON * (abs(change_l) + abs(change_r)):
            break
        if value > 0.0:
            high = p
        else:
            low = p
        move = -value / (slope_l + slope_r)
        if abs(move) <= LAST_STEP * p:
            p += move
            change_l += slope_l * move
            change_r += slope_r * move
            break
        following = p + move
        if step >= NEWTON_STEPS or not low < following < high:
            following = math.sqrt(low) * math.sqrt(high) if high < math.inf else 4.0 * p
            if not low < following < high:
                break
        p = following
    return p, 0.5 * (u_l + u_r) + 0.5 * (change_r - change_l), change_l, change_r


def star_density(p: float, rho: float, pressure: float, gamma: float) -> float:
    """Return the density behind a wave that takes (rho, pressure) to the pressure p."""
    ratio = p / pressure
    if ratio > 1.0:
        share = (gamma - 1.0) / (gamma + 1.0)
        return rho * (ratio + share) / (share * ratio + 1.0)
    return rho * ratio ** (1.0 / gamma)


def mass_flux(p: float, rho: float, pressure: float, gamma: float) -> float:
    """Return the mass flux through the shock that takes (rho, pressure) to the pressure p."""
    return math.sqrt(0.5 * rho * ((gamma + 1.0) * p + (gamma - 1.0) * pressure))


# The core, on (rho, u, p)


def thin(rho: float, covolume: float) -> float:
    """Return the density 1/w of the ideal gas that stands for a gas with covolume."""
    return rho / (1.0 - covolume * rho)


def thick(rho: float, covolume: float) -> float:
    """Return the true density from that of the ideal gas."""
    return rho / (1.0 + covolume * rho)


def sound_of(parameters, state):  # type: ignore[no-untyped-def]
    """Return the sound speed of the ideal gas that stands for the gas."""
    if state[0] <= 0.0:
        return 0.0
    return math.sqrt(
        parameters.gamma * (state[2] + parameters.stiffness) / thin(state[0], parameters.covolume)
    )  # fmt: skip


def put_state(parameters, out, rho, u, p):  # type: ignore[no-untyped-def]
    """Enter a state given by density and pressure of the ideal gas that stands for the gas."""
    out[0], out[1], out[2] = thick(rho, parameters.covolume), u, p - parameters.stiffness


def vacuum_waves(parameters, left, right, states, kinds, families, speeds):  # type: ignore[no-untyped-def]
    """Enter the fans beside a vacuum that is given or opens between the states; return their number."""
    gamma, covolume = parameters.gamma, parameters.covolume
    k = 0
    if left[0] > 0.0:
        sound = sound_of(parameters, left)
        true = sound / (1.0 - covolume * left[0])
        k = put_wave(k, kinds, families, speeds, FAN, 0, left[1] - true, left[1] + 2.0 * sound / (gamma - 1.0))
        states[k, 0], states[k, 1], states[k, 2] = 0.0, 0.0, 0.0
    if right[0] > 0.0:
        sound = sound_of(parameters, right)
        true = sound / (1.0 - covolume * right[0])
        k = put_wave(k, kinds, families, speeds, FAN, 2, right[1] - 2.0 * sound / (gamma - 1.0), right[1] + true)
        states[k, 0], states[k, 1], states[k, 2] = right[0], right[1], right[2]
    return k


def local(parameters, left, right, states, kinds, families, speeds):  # type: ignore[no-untyped-def]
    """Solve the local problem; see `wavekin.systems.cores.Core`."""
    gamma, covolume, stiffness = parameters.gamma, parameters.covolume, parameters.stiffness
    for i in range(3):
        states[0, i] = left[i]
    if left[0] == right[0] and left[1] == right[1] and left[2] == right[2]:
        return 0
    c_l, c_r = sound_of(parameters, left), sound_of(parameters, right)
    u_l, u_r = left[1], right[1]
    if left[0] <= 0.0 or right[0] <= 0.0 or u_r - u_l >= 2.0 * (c_l + c_r) / (gamma - 1.0):
        if stiffness > 0.0:
            return REFUSED_VACUUM
        return vacuum_waves(parameters, left, right, states, kinds, families, speeds)
    rho_l, p_l = thin(left[0], covolume), left[2] + stiffness
    rho_r, p_r = thin(right[0], covolume), right[2] + stiffness
    p, u, change_l, change_r = solve_star(rho_l, u_l, p_l, rho_r, u_r, p_r, gamma)
    if p <= 0.0:  # a middle pressure that underflows is a vacuum
        if stiffness > 0.0:
            return REFUSED_VACUUM
        return vacuum_waves(parameters, left, right, states, kinds, families, speeds)
    noise = NO_WAVE_ULPS * EPSILON * (abs(u_l) + abs(u_r) + c_l + c_r)
    has_left, has_right = abs(change_l) > noise, abs(change_r) > noise
    middle_l = star_density(p, rho_l, p_l, gamma) if has_left else rho_l
    middle_r = star_density(p, rho_r, p_r, gamma) if has_right else rho_r
    apart = abs(middle_r - middle_l) > (middle_l + middle_r) * (
        NO_WAVE_ULPS * EPSILON + noise / min(c_l, c_r)
    )  # fmt: skip
    k = 0
    if has_left:
        if p > p_l:
            first = last = u_l - mass_flux(p, rho_l, p_l, gamma) / left[0]
        else:
            c = math.sqrt(gamma * p / middle_l)
            first, last = u_l - c_l / (1.0 - covolume * left[0]), u - c * (1.0 + covolume * middle_l)
        k = put_wave(k, kinds, families, speeds, SHOCK if p > p_l else FAN, 0, first, last)
        put_state(parameters, states[k], middle_l, u, p)
    if apart or not (has_left or has_right):
        k = put_wave(k, kinds, families, speeds, CONTACT, 1, u, u)
        put_state(parameters, states[k], middle_r, u, p)
    if has_right:
        if p > p_r:
            first = last = u_r + mass_flux(p, rho_r, p_r, gamma) / right[0]
        else:
            c = math.sqrt(gamma * p / middle_r)
            first, last = u + c * (1.0 + covolume * middle_r), u_r + c_r / (1.0 - covolume * right[0])
        k = put_wave(k, kinds, families, speeds, SHOCK if p > p_r else FAN, 2, first, last)
    for i in range(3):
        states[k, i] = right[i]
    return k


def inside(parameters, family, left, right, share, out):  # type: ignore[no-untyped-def]
    """Fill in the state of a fan at which `share` of the sound speed's change is done."""
    gamma = parameters.gamma
    c_l, c_r = sound_of(parameters, left), sound_of(parameters, right)
    c = c_l + share * (c_r - c_l)
    base, c_base, sign = (left, c_l, -1.0) if family == 0 else (right, c_r, 1.0)
    u = base[1] + sign * 2.0 / (gamma - 1.0) * (c - c_base)
    ratio = (c / c_base) ** (2.0 / (gamma - 1.0))
    rho = thin(base[0], parameters.covolume) * ratio
    put_state(parameters, out, rho, u, c * c * rho / gamma)


def strength(parameters, family, left, right):  # type: ignore[no-untyped-def]
    """Return the change of velocity over a sound wave, that of the sound speed over a contact."""
    c_l, c_r = sound_of(parameters, left), sound_of(parameters, right)
    if family == 1:
        return c_r - c_l
    if left[0] <= 0.0 or right[0] <= 0.0:
        return 2.0 * max(c_l, c_r) / (parameters.gamma - 1.0)
    return right[1] - left[1]


def measure(parameters, state, conserved, flux):  # type: ignore[no-untyped-def]
    """Fill in mass, momentum and energy and their fluxes."""
    rho, u, p = state[0], state[1], state[2]
    inner = (p + parameters.gamma * parameters.stiffness) * (1.0 - parameters.covolume * rho)
    if rho <= 0.0:
        inner = 0.0
    energy = inner / (parameters.gamma - 1.0) + 0.5 * rho * u * u
    conserved[0], conserved[1], conserved[2] = rho, rho * u, energy
    flux[0], flux[1], flux[2] = rho * u, rho * u * u + p, u * (energy + p)


def mirror(parameters, state, out):  # type: ignore[no-untyped-def]
    """Fill in the state with the velocity turned round."""
    out[0], out[1], out[2] = state[0], -state[1], state[2]


def jump_speed(parameters, family, left, right):  # type: ignore[no-untyped-def]
    """Return the speed of a step of a fan that keeps the mass."""
    if left[0] <= 0.0:
        return right[1]
    if right[0] <= 0.0:
        return left[1]
    return (right[0] * right[1] - left[0] * left[1]) / (right[0] - left[0])


CORES[EulerParameters] = Core(
    local, inside, strength, measure, mirror, jump_speed,
    (velocity_change, first_guess, solve_star, star_density, mass_flux, thin, thick, sound_of, put_state, vacuum_waves),
)  # fmt: skip


class Euler(System):
    """Gas dynamics; see `euler`."""

    name = "euler"
    formula = "rho_t + (rho u)_x = 0, (rho u)_t + (rho u^2 + p)_x = 0, E_t + (u (E + p))_x = 0"
    source = "Courant and Friedrichs 1948; stiffened gas with covolume: Le Metayer and Saurel 2016"
    conserved = (Variable("rho", "density"), Variable("rho u", "momentum"), Variable("E", "energy"))
    primitive = (Variable("rho", "density"), Variable("u", "velocity"), Variable("p", "pressure"))
    walls = True
    galilean = True

    def __init__(self, gamma: float, covolume: float, stiffness: float) -> None:
        super().__init__(EulerParameters(gamma, covolume, stiffness))

    def to_primitive(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return (rho, u, p), shape of `state`, from conserved variables; a vacuum has velocity 0."""
        rho, momentum, energy = self._parts(state)
        some = rho > 0.0
        u = np.divide(momentum, rho, out=np.zeros_like(rho), where=some)
        gamma, covolume, stiffness = self.parameters
        inner = (gamma - 1.0) * (energy - 0.5 * momentum * u)
        p = np.divide(inner, 1.0 - covolume * rho) - gamma * stiffness
        return np.stack([rho, u, np.where(some, p, 0.0)], axis=-1)

    def from_primitive(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return (rho, rho u, E), shape of `state`, from (rho, u, p)."""
        rho, u, p = self._parts(state)
        gamma, covolume, stiffness = self.parameters
        inner = np.where(rho > 0.0, (p + gamma * stiffness) * (1.0 - covolume * rho), 0.0)
        return np.stack([rho, rho * u, inner / (gamma - 1.0) + 0.5 * rho * u * u], axis=-1)

    def sound_speed(self, primitive: ArrayLike) -> NDArray[np.float64]:
        """Return the sound speed, shape (...), of primitive states; 0 in a vacuum."""
        rho, _, p = self._parts(primitive)
        gamma, covolume, stiffness = self.parameters
        square = np.divide(gamma * (p + stiffness), rho * (1.0 - covolume * rho), out=np.zeros_like(rho), where=rho > 0)
        return np.sqrt(np.maximum(square, 0.0))

    def characteristic_speeds(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return u - c, u, u + c, shape of `state`."""
        primitive = self.to_primitive(state)
        u, c = primitive[..., 1], self.sound_speed(primitive)
        return np.stack([u - c, u, u + c], axis=-1)

    def entropy_pair(self, state: ArrayLike) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Return -rho ln((p + p_inf) w^gamma) and its flux, shapes (...)."""
        rho, u, p = np.moveaxis(self.to_primitive(state), -1, 0)
        gamma, covolume, stiffness = self.parameters
        some = rho > 0.0
        safe = np.where(some, rho, 1.0)
        heat = np.log(np.where(some, p + stiffness, 1.0)) + gamma * np.log(1.0 / safe - covolume)
        entropy = np.where(some, -rho * heat, 0.0)
        return entropy, u * entropy

    def check_primitive(self, state: NDArray[np.float64], key: str) -> None:
        """Raise InputError for the first state with a negative density or pressure, or one that is too dense."""
        _, covolume, stiffness = self.parameters
        rho, _, p = np.moveaxis(state, -1, 0)
        self._refuse(rho < 0.0, state, key, "must have a density of 0 (vacuum) or above", "check its sign")
        self._refuse(
            (rho > 0.0) & (p + stiffness <= 0.0), state, key, f"must have a pressure above {-stiffness:g}",
            "check its sign and the energy",
        )  # fmt: skip
        self._refuse(rho * covolume >= 1.0, state, key, "must be less dense than 1/covolume", "check the unit")
        self._refuse((rho == 0.0) & (p != 0.0), state, key, "must have no pressure in a vacuum", "give 0, 0, 0")

    def scales(self, primitive: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the largest sound speed or half range of velocity in the data, for every family."""
        c, u = self.sound_speed(primitive), primitive[..., 1]
        return np.full(3, max(float(c.max()), 0.5 * float(np.ptp(u))))

    @property
    def spec(self) -> dict[str, Any]:
        """What builds the system again."""
        gamma, covolume, stiffness = self.parameters
        return {"name": "euler", "parameters": {"gamma": gamma, "covolume": covolume, "stiffness": stiffness}}


def euler(gamma: float = 1.4, covolume: float = 0.0, stiffness: float = 0.0) -> Euler:
    """Return gas dynamics with energy.

    Parameters
    ----------
    gamma : float
        Ratio of the specific heats (-), above 1.
    covolume : float
        Volume b that the molecules of a mass take up (volume per mass); 0 for the ideal gas.
    stiffness : float
        Pressure p_inf of a stiffened gas (unit of pressure); 0 for the ideal gas.

    Notes
    -----
    States are (rho, rho u, E), primitive (rho, u, p), in any consistent units. A vacuum (0, 0, 0) may be given or
    open inside, save in a stiffened gas, which refuses it.
    """
    if not number("gamma", gamma) > 1.0:
        raise InputError("must be above 1", key="gamma", value=gamma, mend="air has 1.4")
    mend = "leave it out for the ideal gas"
    return Euler(
        float(gamma), at_least("covolume", covolume, 0.0, mend), at_least("stiffness", stiffness, 0.0, mend)
    )  # fmt: skip
