"""Polymer flooding: water that carries polymer displaces oil; the two characteristic speeds can coincide.

s is the saturation of water, c the polymer's concentration as a share of that injected; the water's mobility falls as
c grows. The polymer adsorbs in proportion to c. Over a jump of c the quantity f / (s + D) is the same on both sides
and is its speed, and both sides lie on the same side of the curve where the two characteristic speeds coincide
(Isaacson 1980; Johansen and Winther 1988, here with linear adsorption). That rule makes the solution unique: other
states that satisfy the jump conditions are never used.
"""

from __future__ import annotations

import math
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray
from wavekin.laws.parameters import at_least, positive
from wavekin.records import CONTACT, FAN, SHOCK
from wavekin.systems.cores import CORES, EPSILON, NO_WAVE_ULPS, Core, no_mirror, put_wave
from wavekin.systems.system import System, Variable

#: Steps after which a bracketed root is finished by bisection alone.
SECANT_STEPS = 40


class PolymerParameters(NamedTuple):
    """Mobility ratios oil to water without and with full polymer, and adsorption (all dimensionless)."""

    ratio: float
    polymer_ratio: float
    adsorption: float


# The flux s^2 / (s^2 + m (1 - s)^2) and its geometry, pure floats


def bed(s: float, m: float) -> float:
    """Return the denominator of the flux."""
    return s * s + m * (1.0 - s) * (1.0 - s)


def flux_of(s: float, m: float) -> float:
    """Return the fractional flow of water."""
    return s * s / bed(s, m)


def slope_of(s: float, m: float) -> float:
    """Return its derivative by s."""
    return 2.0 * m * s * (1.0 - s) / (bed(s, m) * bed(s, m))


def chord_of(s: float, other: float, m: float) -> float:
    """Return the slope of the chord between two saturations, free of cancellation."""
    return m * (s + other - 2.0 * s * other) / (bed(s, m) * bed(other, m))


def tangent_from(s: float, m: float) -> float:
    """Return the saturation, other than s, at which the chord from s is a tangent; s itself at the inflection."""
    a = -(1.0 + m) * (1.0 - 2.0 * s)
    b = -2.0 * bed(s, m) - (1.0 + m) * s + 2.0 * m * (1.0 - 2.0 * s) + a * s
    root = math.sqrt(max(b * b - 4.0 * a * m, 0.0))
    far = -0.5 * (b + (root if b >= 0.0 else -root))
    near = m / far  # one of the two roots of a s^2 + b s + m lies in (0, 1)
    return near if 0.0 <= near <= 1.0 or a == 0.0 else far / a


def residual(which: int, s: float, m: float, adsorption: float, speed: float) -> float:
    """Return the function whose root is sought: 0 inflection, 1 speed of a jump of c, 2 largest such speed."""
    if which == 0:
        return (1.0 - 2.0 * s) * bed(s, m) - 4.0 * s * (1.0 - s) * (s - m * (1.0 - s))
    if which == 1:
        return s * s - speed * (s + adsorption) * bed(s, m)
    return 2.0 * m * (1.0 - s) * (s + adsorption) - s * bed(s, m)


def bracketed(which: int, low: float, high: float, m: float, adsorption: float, speed: float) -> float:
    """Return the root of `residual` between two saturations at which it has opposite signs.

    Regula falsi that halves the weight of an end that stays (Dowell and Jarratt 1971), then bisection, down to
    neighbouring numbers or an exact 0. Where rounding leaves no change of sign the nearer end is the root.
    """
    at_low, at_high = residual(which, low, m, adsorption, speed), residual(which, high, m, adsorption, speed)
    if at_low == 0.0 or at_high == 0.0 or (at_low > 0.0) == (at_high > 0.0):
        return low if abs(at_low) <= abs(at_high) else high
    side = 0
    for step in range(4 * SECANT_STEPS):
        middle = 0.5 * (low + high)
        if step < SECANT_STEPS:
            secant = (low * at_high - high * at_low) / (at_high - at_low)
            if low < secant < high:
                middle = secant
        if not low < middle < high:
            break
        value = residual(which, middle, m, adsorption, speed)
        if value == 0.0:
            return middle
        if (value > 0.0) == (at_low > 0.0):
            low, at_low = middle, value
            if side == -1:
                at_high *= 0.5
            side = -1
        else:
            high, at_high = middle, value
            if side == 1:
                at_low *= 0.5
            side = 1
        if high - low <= EPSILON * high:
            break
    return low if abs(at_low) <= abs(at_high) else high


def ratio_at(parameters, c):  # type: ignore[no-untyped-def]
    """Return the mobility ratio at a concentration."""
    return parameters.ratio + (parameters.polymer_ratio - parameters.ratio) * c


def carry_speed(s: float, m: float, adsorption: float) -> float:
    """Return f / (s + D), the speed of polymer; 0 without water."""
    return s / bed(s, m) * (s / (s + adsorption)) if s > 0.0 else 0.0


def joined(left, right, adsorption, m_l, m_r):  # type: ignore[no-untyped-def]
    """Return the saturations left and right of the jump of c, and its speed.

    Saturations up to the one of the largest polymer speed are *low*, those above it *high*. On the left every high
    one can be reached, or the given low one and high ones of no larger speed; on the right the mirror image of it.
    Of these the pair that is low-low or high-high is the solution; there is always exactly one.
    """
    top_l = bracketed(2, bracketed(0, 0.0, 1.0, m_l, 0.0, 0.0), 1.0, m_l, adsorption, 0.0)
    top_r = bracketed(2, bracketed(0, 0.0, 1.0, m_r, 0.0, 0.0), 1.0, m_r, adsorption, 0.0)
    most_l, most_r = carry_speed(top_l, m_l, adsorption), carry_speed(top_r, m_r, adsorption)
    high_l, high_r = left >= top_l, right > top_r
    own_l = most_l if high_l else carry_speed(left, m_l, adsorption)
    own_r = carry_speed(right, m_r, adsorption) if high_r else most_r
    if own_l <= own_r:  # both low: the left one is given, or the turning point
        s_l = top_l if high_l else left
        return s_l, bracketed(1, 0.0, top_r, m_r, adsorption, own_l) if own_l > 0.0 else 0.0, own_l
    s_r = right if high_r else top_r
    return bracketed(1, top_l, 1.0, m_l, adsorption, own_r), s_r, own_r


# The core, on (s, c)


def water_waves(parameters, k, c, target, states, kinds, families, speeds):  # type: ignore[no-untyped-def]
    """Append the waves at one concentration from the last state's saturation to another; return the number so far."""
    start = states[k, 0]
    if abs(target - start) <= NO_WAVE_ULPS * EPSILON:
        return k
    m = ratio_at(parameters, c)
    bend = bracketed(0, 0.0, 1.0, m, 0.0, 0.0)
    rising = start < target
    if (rising and target <= bend) or (not rising and target >= bend):
        turn = target
    else:
        turn = tangent_from(target, m)
        if (turn <= start) if rising else (turn >= start):
            turn = start
    if turn != start:
        k = put_wave(k, kinds, families, speeds, FAN, 0, slope_of(start, m), slope_of(turn, m))
        states[k, 0], states[k, 1] = turn, c
    if turn != target:
        speed = chord_of(turn, target, m)
        k = put_wave(k, kinds, families, speeds, SHOCK, 0, speed, speed)
        states[k, 0], states[k, 1] = target, c
    return k


def local(parameters, left, right, states, kinds, families, speeds):  # type: ignore[no-untyped-def]
    """Solve the local problem; see `wavekin.systems.cores.Core`."""
    states[0, 0], states[0, 1] = left[0], left[1]
    if left[0] == right[0] and left[1] == right[1]:
        return 0
    k = 0
    if left[1] == right[1]:
        k = water_waves(parameters, k, left[1], right[0], states, kinds, families, speeds)
        if k == 0:
            k = put_wave(k, kinds, families, speeds, CONTACT, 0, 0.0, 0.0)
            speeds[0, 0] = speeds[0, 1] = slope_of(left[0], ratio_at(parameters, left[1]))
    else:
        m_l, m_r = ratio_at(parameters, left[1]), ratio_at(parameters, right[1])
        s_l, s_r, speed = joined(left[0], right[0], parameters.adsorption, m_l, m_r)
        k = water_waves(parameters, k, left[1], s_l, states, kinds, families, speeds)
        k = put_wave(k, kinds, families, speeds, CONTACT, 1, speed, speed)
        states[k, 0], states[k, 1] = s_r, right[1]
        k = water_waves(parameters, k, right[1], right[0], states, kinds, families, speeds)
    states[k, 0], states[k, 1] = right[0], right[1]
    return k


def inside(parameters, family, left, right, share, out):  # type: ignore[no-untyped-def]
    """Fill in the state of a fan at which `share` of the change of saturation is done."""
    out[0], out[1] = left[0] + share * (right[0] - left[0]), left[1]


def strength(parameters, family, left, right):  # type: ignore[no-untyped-def]
    """Return the change of saturation over a water wave (below 0 for a shock), that of c over a polymer front."""
    if family == 1:
        return right[1] - left[1]
    m = ratio_at(parameters, left[1])
    opens = slope_of(right[0], m) >= slope_of(left[0], m)
    return abs(right[0] - left[0]) if opens else -abs(right[0] - left[0])


def measure(parameters, state, conserved, flux):  # type: ignore[no-untyped-def]
    """Fill in water and polymer in place and their fluxes."""
    f = flux_of(state[0], ratio_at(parameters, state[1]))
    conserved[0], conserved[1] = state[0], state[1] * (state[0] + parameters.adsorption)
    flux[0], flux[1] = f, state[1] * f


def jump_speed(parameters, family, left, right):  # type: ignore[no-untyped-def]
    """Return the speed of a step of a fan, the one that keeps both totals."""
    return chord_of(left[0], right[0], ratio_at(parameters, left[1]))


CORES[PolymerParameters] = Core(
    local, inside, strength, measure, no_mirror, jump_speed,
    (bed, flux_of, slope_of, chord_of, tangent_from, residual, bracketed, ratio_at, carry_speed, joined, water_waves),
)  # fmt: skip


class Polymer(System):
    """Polymer flooding; see `polymer`."""

    name = "polymer"
    formula = "s_t + f(s, c)_x = 0, (c (s + D))_t + (c f)_x = 0, f = s^2 / (s^2 + m(c) (1 - s)^2)"
    source = "Isaacson 1980; Pope 1980; Johansen and Winther 1988"
    conserved = (Variable("s", "water saturation", "-"), Variable("c (s + D)", "polymer in place", "-"))
    primitive = (Variable("s", "water saturation", "-"), Variable("c", "polymer concentration", "-"))
    exact_steps = True
    most_waves = 5

    def __init__(self, ratio: float, polymer_ratio: float, adsorption: float) -> None:
        super().__init__(PolymerParameters(ratio, polymer_ratio, adsorption))

    def to_primitive(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return (s, c), shape of `state`; without water or adsorption c is 0."""
        s, load = self._parts(state)
        room = s + self.parameters.adsorption
        return np.stack([s, np.divide(load, room, out=np.zeros_like(s), where=room > 0.0)], axis=-1)

    def from_primitive(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return (s, c (s + D)), shape of `state`."""
        s, c = self._parts(state)
        return np.stack([s, c * (s + self.parameters.adsorption)], axis=-1)

    def characteristic_speeds(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return df/ds and f / (s + D), shape of `state`; they need not be in order."""
        s, c = np.moveaxis(self.to_primitive(state), -1, 0)
        m = ratio_at(self.parameters, c)
        denominator = s * s + m * (1.0 - s) ** 2
        carried = np.divide(s * s, s + self.parameters.adsorption, out=np.zeros_like(s), where=s > 0.0) / denominator
        return np.stack([2.0 * m * s * (1.0 - s) / denominator**2, carried], axis=-1)

    def check_primitive(self, state: NDArray[np.float64], key: str) -> None:
        """Raise InputError for the first saturation or concentration outside 0 to 1."""
        s, c = state.T
        self._refuse((s < 0.0) | (s > 1.0), state, key, "must have a saturation from 0 to 1", "use movable water")
        slack = 16.0 * EPSILON
        self._refuse(
            (c < -slack) | (c > 1.0 + slack), state, key, "must have a concentration from 0 to 1",
            "give it as a share of the highest one",
        )  # fmt: skip

    def scales(self, primitive: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return 1 for both: saturation and concentration."""
        return np.ones(2)

    @property
    def spec(self) -> dict[str, Any]:
        """What builds the system again."""
        return {"name": "polymer", "parameters": dict(self.parameters._asdict())}


def polymer(ratio: float = 0.2, polymer_ratio: float = 2.0, adsorption: float = 0.2) -> Polymer:
    """Return polymer flooding with quadratic relative permeabilities.

    Parameters
    ----------
    ratio : float
        m at c = 0: viscosity of water over that of oil, times the ratio of end-point permeabilities (-).
    polymer_ratio : float
        m at c = 1, between which m is linear (-).
    adsorption : float
        D: polymer on the rock is D c, in pore volumes of full concentration (-); 0 for none.

    Notes
    -----
    States are (s, c (s + D)), primitive (s, c); x in pore volumes, t in pore volumes injected.
    """
    held = at_least("adsorption", adsorption, 0.0, "0 is no adsorption")
    return Polymer(positive("ratio", ratio), positive("polymer_ratio", polymer_ratio), held)
