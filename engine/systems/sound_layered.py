"""Sound in layered media: linear waves that every change of medium partly reflects."""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray
from wavekin.records import CONTACT
from wavekin.systems.cores import CORES, EPSILON, NO_WAVE_ULPS, Core, put_wave
from wavekin.systems.system import System, Variable


class AcousticParameters(NamedTuple):
    """No parameter: each state carries its medium. The field keeps the type a plain one for numba."""

    media: float


# The core, on (p, u, rho, c)


def local(parameters, left, right, states, kinds, families, speeds):  # type: ignore[no-untyped-def]
    """Solve the local problem; see `wavekin.systems.cores.Core`. Pressure and velocity pass a change of medium."""
    same = same_medium = True
    for i in range(4):
        states[0, i] = left[i]
        same = same and left[i] == right[i]
        same_medium = same_medium and (i < 2 or left[i] == right[i])
    if same:
        return 0
    z_l, z_r = left[2] * left[3], right[2] * right[3]
    p = left[0] + z_l / (z_l + z_r) * ((right[0] - left[0]) + z_r * (left[1] - right[1]))
    u = left[1] + (z_r * (right[1] - left[1]) + (left[0] - right[0])) / (z_l + z_r)
    noise = NO_WAVE_ULPS * EPSILON * (abs(left[0]) + abs(right[0]) + min(z_l, z_r) * (abs(left[1]) + abs(right[1])))
    has_left, has_right = abs(p - left[0]) > noise, abs(p - right[0]) > noise
    k = 0
    if has_left or (same_medium and not has_right):
        k = put_wave(k, kinds, families, speeds, CONTACT, 0, -left[3], -left[3])
        states[k, 0], states[k, 1], states[k, 2], states[k, 3] = p, u, left[2], left[3]
    if not same_medium:
        k = put_wave(k, kinds, families, speeds, CONTACT, 1, 0.0, 0.0)
        states[k, 0], states[k, 1], states[k, 2], states[k, 3] = p, u, right[2], right[3]
    if has_right:
        k = put_wave(k, kinds, families, speeds, CONTACT, 3, right[3], right[3])
    for i in range(4):
        states[k, i] = right[i]
    return k


def inside(parameters, family, left, right, share, out):  # type: ignore[no-untyped-def]
    """Fill in a state between two; linear waves have no fans."""
    for i in range(4):
        out[i] = left[i] + share * (right[i] - left[i])


def strength(parameters, family, left, right):  # type: ignore[no-untyped-def]
    """Return the change of pressure over a wave, that of the impedance over a change of medium."""
    if family == 1:
        return right[2] * right[3] - left[2] * left[3]
    return right[0] - left[0]


def measure(parameters, state, conserved, flux):  # type: ignore[no-untyped-def]
    """Fill in compression, momentum, density and stiffness, and their fluxes."""
    p, u, rho, c = state[0], state[1], state[2], state[3]
    conserved[0], conserved[1], conserved[2], conserved[3] = p / (rho * c * c), rho * u, rho, rho * c * c
    flux[0], flux[1], flux[2], flux[3] = u, p, 0.0, 0.0


def mirror(parameters, state, out):  # type: ignore[no-untyped-def]
    """Fill in the state with the velocity turned round."""
    out[0], out[1], out[2], out[3] = state[0], -state[1], state[2], state[3]


def jump_speed(parameters, family, left, right):  # type: ignore[no-untyped-def]
    """Return the speed of a wave."""
    if family == 0:
        return -left[3]
    return right[3] if family == 3 else 0.0


CORES[AcousticParameters] = Core(local, inside, strength, measure, mirror, jump_speed)


class Acoustics(System):
    """Sound in layered media; see `acoustics`."""

    name = "acoustics"
    formula = "(p / K)_t + u_x = 0, (rho u)_t + p_x = 0, rho_t = 0, K_t = 0, K = rho c^2"
    source = "Rayleigh 1877"
    conserved = (
        Variable("p / K", "compression", "-"), Variable("rho u", "momentum", "kg/(m2 s)"),
        Variable("rho", "density", "kg/m3"), Variable("K", "stiffness", "Pa"),
    )  # fmt: skip
    primitive = (
        Variable("p", "pressure", "Pa"), Variable("u", "velocity", "m/s"),
        Variable("rho", "density", "kg/m3"), Variable("c", "sound speed", "m/s"),
    )  # fmt: skip
    walls = True
    exact_steps = True

    def __init__(self) -> None:
        super().__init__(AcousticParameters(0.0))

    def to_primitive(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return (p, u, rho, c), shape of `state`."""
        compression, momentum, rho, stiffness = self._parts(state)
        return np.stack([compression * stiffness, momentum / rho, rho, np.sqrt(stiffness / rho)], axis=-1)

    def from_primitive(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return (p / K, rho u, rho, K), shape of `state`."""
        p, u, rho, c = self._parts(state)
        stiffness = rho * c * c
        return np.stack([p / stiffness, rho * u, rho, stiffness], axis=-1)

    def characteristic_speeds(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return -c, 0, 0, c, shape of `state`."""
        c = self.to_primitive(state)[..., 3]
        return np.stack([-c, 0.0 * c, 0.0 * c, c], axis=-1)

    def entropy_pair(self, state: ArrayLike) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Return the sound energy (J/m3), which every wave conserves, and its flux, shapes (...)."""
        p, u, rho, c = np.moveaxis(self.to_primitive(state), -1, 0)
        return 0.5 * (p * p / (rho * c * c) + rho * u * u), p * u

    def check_primitive(self, state: NDArray[np.float64], key: str) -> None:
        """Raise InputError for the first state whose medium has no density or sound speed above 0."""
        self._refuse(state[:, 2] <= 0.0, state, key, "must have a density above 0", "check the medium")
        self._refuse(~(state[:, 3] > 0.0), state, key, "must have a sound speed above 0", "check the medium")

    def scales(self, primitive: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the largest change of pressure that the data can make; for media the largest impedance."""
        p, u, rho, c = self._parts(primitive)
        size = max(float(np.ptp(p)) + float((rho * c).max() * np.ptp(u)), 1e-300)
        return np.array([size, float((rho * c).max()), 1.0, size])

    @property
    def spec(self) -> dict[str, Any]:
        """What builds the system again."""
        return {"name": "acoustics", "parameters": {}}


def acoustics() -> Acoustics:
    """Return linear sound in layered media.

    Notes
    -----
    States carry their medium: primitive (p, u, rho, c), conserved (p / K, rho u, rho, K) with K = rho c^2, so that
    a change of medium is a front at rest. A wave from impedance Z1 = rho1 c1 to Z2 is reflected with the pressure
    coefficient (Z2 - Z1) / (Z2 + Z1) and passes with 2 Z2 / (Z1 + Z2). Everything is exact. The family at rest is
    double: it counts as family 1 and there is no wave of family 2.
    """
    return Acoustics()
