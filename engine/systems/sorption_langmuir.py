"""Chromatography of n competing substances with Langmuir isotherms (Rhee, Aris and Amundson 1970).

Written in its characteristic parameters omega, the roots of sum K_i n_i / (H_i - omega) = 1, the system falls apart:
a wave of one family changes one omega alone, shock and fan curves coincide (Temple 1983), and the states between the
waves are known without any iteration.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray
from wavekin.errors import InputError
from wavekin.laws.parameters import positive
from wavekin.records import FAN, SHOCK
from wavekin.systems.cores import CORES, EPSILON, NO_WAVE_ULPS, Core, no_mirror, put_wave
from wavekin.systems.system import System, Variable


class LangmuirParameters(NamedTuple):
    """Henry constants and affinities of the substances, phase ratio and velocity."""

    henry: NDArray[np.float64]
    affinity: NDArray[np.float64]
    phase_ratio: float
    velocity: float


# The core, on omega, the largest first: the slowest family


def retention(parameters, left, right, family):  # type: ignore[no-untyped-def]
    """Return [n] / [c] over a wave of a family; at one state its characteristic value."""
    value = right[family]
    for i in range(len(left)):
        value *= left[i] / parameters.henry[i]
    return value


def speed_of(parameters, left, right, family):  # type: ignore[no-untyped-def]
    """Return the speed of a jump in one omega; at one state the characteristic speed."""
    return parameters.velocity / (1.0 + parameters.phase_ratio * retention(parameters, left, right, family))


def local(parameters, left, right, states, kinds, families, speeds):  # type: ignore[no-untyped-def]
    """Solve the local problem; see `wavekin.systems.cores.Core`."""
    n = len(left)
    k = 0
    same = True
    for i in range(n):
        states[0, i] = left[i]
        same = same and left[i] == right[i]
    if same:
        return 0
    for family in range(n):
        if abs(right[family] - left[family]) <= NO_WAVE_ULPS * EPSILON * left[family]:
            continue
        for i in range(n):
            states[k + 1, i] = right[i] if i <= family else left[i]
        here, there = states[k], states[k + 1]
        if right[family] > left[family]:
            speed = speed_of(parameters, here, there, family)
            k = put_wave(k, kinds, families, speeds, SHOCK, family, speed, speed)
        else:
            first, last = speed_of(parameters, here, here, family), speed_of(parameters, there, there, family)
            k = put_wave(k, kinds, families, speeds, FAN, family, first, last)
    if k == 0:
        speed = speed_of(parameters, left, right, 0)
        k = put_wave(k, kinds, families, speeds, SHOCK, 0, speed, speed)
    for i in range(n):
        states[k, i] = right[i]
    return k


def inside(parameters, family, left, right, share, out):  # type: ignore[no-untyped-def]
    """Fill in the state of a fan at which `share` of the change of omega is done."""
    for i in range(len(left)):
        out[i] = left[i]
    out[family] = left[family] + share * (right[family] - left[family])


def strength(parameters, family, left, right):  # type: ignore[no-untyped-def]
    """Return the fall of the family's omega, above 0 for a fan."""
    return left[family] - right[family]


def measure(parameters, state, conserved, flux):  # type: ignore[no-untyped-def]
    """Fill in the amounts in both phases and their fluxes."""
    n = len(state)
    spread = 1.0
    for i in range(n):
        spread *= parameters.henry[i] / state[i]
    for i in range(n):
        own = parameters.henry[i]
        held = own - state[i]
        for j in range(n):
            if j != i:
                held *= (own - state[j]) / (own - parameters.henry[j])
        held /= parameters.affinity[i]
        conserved[i] = held * spread / own + parameters.phase_ratio * held
        flux[i] = parameters.velocity * held * spread / own


def jump_speed(parameters, family, left, right):  # type: ignore[no-untyped-def]
    """Return the speed of a step of a fan, the one that keeps all totals."""
    return speed_of(parameters, left, right, family)


CORES[LangmuirParameters] = Core(local, inside, strength, measure, no_mirror, jump_speed, (retention, speed_of))


class Langmuir(System):
    """Chromatography; see `langmuir`."""

    name = "langmuir"
    formula = "(c_i + F n_i)_t + v (c_i)_x = 0, n_i = H_i c_i / (1 + sum K_j c_j)"
    source = "Langmuir 1918; Rhee, Aris and Amundson 1970"
    exact_steps = True

    def __init__(self, parameters: LangmuirParameters) -> None:
        super().__init__(parameters)
        number = [str(i + 1) for i in range(len(parameters.henry))]
        self.conserved = tuple(Variable(f"c{i} + F n{i}", f"substance {i} in both phases") for i in number)
        self.primitive = tuple(Variable(f"c{i}", f"concentration of substance {i}") for i in number)

    def _crowding(self, concentration: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return 1 + sum K c, shape (..., 1)."""
        return 1.0 + (self.parameters.affinity * concentration).sum(axis=-1, keepdims=True)

    def to_primitive(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return concentrations, shape of `state` (..., n).

        The crowding D = 1 + sum K c solves D = 1 + sum K u D / (D + F H), whose right side is concave: Newton's
        iteration from above falls to the root and stops where it falls no further.
        """
        amounts = np.asarray(state, dtype=float)
        held = self.parameters.phase_ratio * self.parameters.henry
        weights = self.parameters.affinity * amounts
        crowding = 1.0 + weights.sum(axis=-1, keepdims=True)
        for _ in range(200):
            share = crowding / (crowding + held)
            value = 1.0 + (weights * share).sum(axis=-1, keepdims=True) - crowding
            slope = (weights * held / (crowding + held) ** 2).sum(axis=-1, keepdims=True) - 1.0
            following = np.minimum(crowding, crowding - value / slope)
            if np.array_equal(following, crowding, equal_nan=True):
                break
            crowding = following
        return amounts * (crowding / (crowding + held))

    def from_primitive(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return c + F n, shape of `state`."""
        c = np.asarray(state, dtype=float)
        return c * (1.0 + self.parameters.phase_ratio * self.parameters.henry / self._crowding(c))

    def to_inner(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return omega, largest first, shape of `state` (..., n)."""
        c = self.to_primitive(state)
        held = self.parameters.affinity * self.parameters.henry * c / self._crowding(c)
        rows = [self._omega(row) for row in held.reshape(-1, self.n)]
        return np.array(rows).reshape(held.shape)

    def _omega(self, held: NDArray[np.float64]) -> list[float]:
        """Return the roots of sum held / (H - omega) = 1, largest first; a substance that is absent leaves its H."""
        henry = self.parameters.henry
        present = sorted((float(h), float(k)) for h, k in zip(henry, held, strict=True) if k > 0.0)
        roots = [float(h) for h, k in zip(henry, held, strict=True) if not k > 0.0]
        low = 0.0
        for high, _ in present:
            roots.append(_between(low, high, present))
            low = high
        return sorted(roots, reverse=True)

    def from_inner(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return c + F n, shape of `state`, from omega."""
        omega = np.asarray(state, dtype=float)
        henry = self.parameters.henry
        spread = np.prod(henry / omega, axis=-1)
        held = np.empty_like(omega)
        for i, own in enumerate(henry):
            others = np.delete(henry, i)
            held[..., i] = (own - omega[..., 0]) * np.prod((own - omega[..., 1:]) / (own - others), axis=-1)
        # a difference own - omega is paired with a pole of its own size in any order; the product is the same
        held = np.maximum(held / self.parameters.affinity, 0.0)
        return held * (spread[..., None] / henry + self.parameters.phase_ratio)

    def characteristic_speeds(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return the speed of each family, slowest first, shape of `state`."""
        omega = self.to_inner(state)
        _, _, ratio, velocity = self.parameters
        return velocity / (1.0 + ratio * omega * np.prod(omega / self.parameters.henry, axis=-1)[..., None])

    def check_primitive(self, state: NDArray[np.float64], key: str) -> None:
        """Raise InputError for the first state with a negative concentration."""
        self._refuse(
            np.any(state < 0.0, axis=1), state, key, "must have concentrations of 0 or above", "check the signs"
        )

    def scales(self, primitive: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the range of each family's omega in the data."""
        omega = self.to_inner(self.from_primitive(primitive)).reshape(-1, self.n)
        return np.maximum(np.ptp(omega, axis=0), 1e-9 * self.parameters.henry.max())

    @property
    def spec(self) -> dict[str, Any]:
        """What builds the system again."""
        henry, affinity, ratio, velocity = self.parameters
        return {
            "name": "langmuir",
            "parameters": {
                "henry": henry.tolist(), "affinity": affinity.tolist(), "phase_ratio": ratio, "velocity": velocity,
            },
        }  # fmt: skip


def _between(low: float, high: float, present: list[tuple[float, float]]) -> float:
    """Return the root of sum k / (h - omega) = 1 between two neighbouring poles (or 0), by bisection to the last bit.

    Measured from the nearer pole, so that a trace of a substance keeps its relative accuracy.
    """

    def value(base: float, offset: float) -> float:
        return sum(k / ((h - base) - offset) for h, k in present) - 1.0

    width = high - low
    base, a, b = (high, -0.5 * width, 0.0) if value(high, -0.5 * width) < 0.0 else (low, 0.0, 0.5 * width)
    while True:
        middle = 0.5 * (a + b)
        if not a < middle < b:
            return base + middle
        if value(base, middle) < 0.0:
            a = middle
        else:
            b = middle


def langmuir(
    henry: Sequence[float], affinity: Sequence[float], phase_ratio: float = 1.0, velocity: float = 1.0
) -> Langmuir:
    """Return chromatography of n substances that compete for the same sites.

    Parameters
    ----------
    henry : sequence of float, length n
        Slopes H of the isotherms at zero concentration (-), above 0 and all different.
    affinity : sequence of float, length n
        Affinities K (1 / concentration), above 0.
    phase_ratio : float
        F, volume of the solid over that of the fluid (-).
    velocity : float
        Velocity of the fluid (unit of x over unit of t).

    Notes
    -----
    States are c + F n, primitive the concentrations c in the fluid.

    Raises
    ------
    InputError
        Where the lists differ in length, or two substances have the same H and so cannot be told apart.
    """
    h = np.array([positive(f"henry[{i}]", value) for i, value in enumerate(henry)])
    k = np.array([positive(f"affinity[{i}]", value) for i, value in enumerate(affinity)])
    if len(h) == 0 or len(h) != len(k):
        raise InputError("must hold one number a substance", key="affinity", value=affinity, mend="give all")
    if len(np.unique(h)) < len(h):
        raise InputError("must be all different", key="henry", value=list(henry), mend="count equals as one")
    return Langmuir(LangmuirParameters(h, k, positive("phase_ratio", phase_ratio), positive("velocity", velocity)))
