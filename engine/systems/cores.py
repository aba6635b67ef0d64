"""The core of a system: seven plain functions of floats that the loop calls, compiled or as they stand.

Cores work on a system's *inner* variables, those in which its waves are simplest (usually the primitive ones), so
that a state passes from front to front without conversion. The functions below choose the core by the type of the
parameters; `wavekin.systems.compilation` gives numba the same choice.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, NamedTuple

#: What a local solve returns in place of a number of waves where it must refuse.
REFUSED_VACUUM, REFUSED_ROOT = -1, -2

REFUSALS = {
    REFUSED_VACUUM: "opens a vacuum, for which this system has no state",
    REFUSED_ROOT: "has no admissible solution of its local problem",
}

EPSILON = 2.0**-52
#: A wave whose jump is within this many roundings of the terms it is computed from is no wave.
NO_WAVE_ULPS = 32.0
#: A bracketed Newton iteration ends by bisection alone after this many steps, which no data tried have needed.
NEWTON_STEPS = 60


#: A Newton step this small in relation to its variable leaves an error of its square, which is rounding.
LAST_STEP = 2.0**-27


class Core(NamedTuple):
    """The functions of one system, all on inner variables; arrays named `out` are filled."""

    local: Callable[..., int]
    """(parameters, left, right, states, kinds, families, speeds) -> number of waves, or a refusal below 0.

    ``states[k]`` and ``states[k + 1]`` bound wave k; ``states[0]`` and the last are the given ones, to the last bit;
    ``speeds[k]`` holds the two edges of a fan, twice the same for a jump. Waves of no strength are left out.
    """
    inside: Callable[..., None]
    """(parameters, family, left, right, share, out): the state in a fan at a share in (0, 1) of its strength."""
    strength: Callable[..., float]
    """(parameters, family, left, right) -> signed strength of a wave, above 0 for a fan, below 0 for a shock."""
    measure: Callable[..., None]
    """(parameters, state, conserved, flux): the conserved variables and their flux."""
    mirror: Callable[..., None]
    """(parameters, state, out): the state seen in a mirror, as behind a wall."""
    jump_speed: Callable[..., float]
    """(parameters, family, left, right) -> speed of a small step of a fan that keeps the first conserved total."""
    helpers: tuple[Callable[..., Any], ...] = ()
    """What these functions call, so that it can be compiled too."""


CORES: dict[type, Core] = {}


def local(parameters, left, right, states, kinds, families, speeds):  # type: ignore[no-untyped-def]
    """Solve one local problem; see `Core.local`."""
    return CORES[type(parameters)].local(parameters, left, right, states, kinds, families, speeds)


def inside(parameters, family, left, right, share, out):  # type: ignore[no-untyped-def]
    """Fill in a state inside a fan; see `Core.inside`."""
    CORES[type(parameters)].inside(parameters, family, left, right, share, out)


def strength(parameters, family, left, right):  # type: ignore[no-untyped-def]
    """Return the strength of a wave; see `Core.strength`."""
    return CORES[type(parameters)].strength(parameters, family, left, right)


def measure(parameters, state, conserved, flux):  # type: ignore[no-untyped-def]
    """Fill in conserved variables and flux; see `Core.measure`."""
    CORES[type(parameters)].measure(parameters, state, conserved, flux)


def mirror(parameters, state, out):  # type: ignore[no-untyped-def]
    """Fill in the mirrored state; see `Core.mirror`."""
    CORES[type(parameters)].mirror(parameters, state, out)


def jump_speed(parameters, family, left, right):  # type: ignore[no-untyped-def]
    """Return the speed of a step of a fan; see `Core.jump_speed`."""
    return CORES[type(parameters)].jump_speed(parameters, family, left, right)


GENERIC = (local, inside, strength, measure, mirror, jump_speed)


def put_wave(k, kinds, families, speeds, kind, family, first, last):  # type: ignore[no-untyped-def]
    """Enter wave k; return the number of waves so far."""
    kinds[k], families[k] = kind, family
    speeds[k, 0], speeds[k, 1] = first, last
    return k + 1


def no_mirror(parameters, state, out):  # type: ignore[no-untyped-def]
    """Leave the state as it is: for systems that know no walls."""
    for i in range(len(state)):
        out[i] = state[i]
