"""Laws of no single trade: Burgers, the cubic law, plain transport."""

from __future__ import annotations

import numpy as np
from wavekin.laws.law import Law, Units
from wavekin.laws.parameters import number

#: Burgers' law and plain transport admit states of this size unless told otherwise.
WIDE = 1e6


def burgers(low: float = -WIDE, high: float = WIDE) -> Law:
    """Return Burgers' law, f = u^2 / 2 (Burgers 1948; Hopf 1950), convex; states from `low` to `high`."""
    low, high = number("low", low), number("high", high)
    return Law(
        lambda u: 0.5 * np.square(u),
        (low, high),
        derivative=lambda u: 1.0 * np.asarray(u),
        second_derivative=np.ones_like,
        inflections=(),
        name="burgers",
        formula="f = u^2 / 2",
        parameters={"low": low, "high": high},
        source="J. M. Burgers 1948; E. Hopf 1950",
        units=Units(state_label="velocity", state_symbol="u"),
    )


def cubic(low: float = -100.0, high: float = 100.0) -> Law:
    """Return the cubic law, f = u^3, concave below 0 and convex above; states from `low` to `high`."""
    low, high = number("low", low), number("high", high)
    return Law(
        lambda u: np.asarray(u) ** 3,
        (low, high),
        derivative=lambda u: 3.0 * np.square(u),
        second_derivative=lambda u: 6.0 * np.asarray(u),
        inflections=(0.0,),
        name="cubic",
        formula="f = u^3",
        parameters={"low": low, "high": high},
        source="the simplest law that is neither convex nor concave",
    )


def transport(speed: float = 1.0, low: float = -WIDE, high: float = WIDE) -> Law:
    """Return plain transport at one speed, f = speed u: all fronts are contacts."""
    speed, low, high = number("speed", speed), number("low", low), number("high", high)
    ends = np.array([low, high])
    return Law(
        lambda u: speed * np.asarray(u),
        (low, high),
        derivative=lambda u: np.full_like(np.asarray(u, dtype=float), speed),
        second_derivative=lambda u: np.zeros_like(np.asarray(u, dtype=float)),
        inflections=(),
        name="transport",
        formula="f = speed u",
        parameters={"speed": speed, "low": low, "high": high},
        source="linear advection",
        polygon=(ends, speed * ends),
    )
