"""Laws from a table of states and fluxes."""

from __future__ import annotations

import itertools

import numpy as np
from numpy.typing import ArrayLike
from wavekin.errors import InputError
from wavekin.laws.law import Law, Units

READINGS = ("polygon", "smooth")


def table_law(u: ArrayLike, f: ArrayLike, reading: str = "polygon", units: Units | None = None, name: str = "") -> Law:
    """Return the law that a table gives.

    Parameters
    ----------
    u, f : array_like, shape (m,), m >= 2
        States, strictly increasing, and fluxes.
    reading : {"polygon", "smooth"}
        "polygon" takes the straight lines between the rows as the law itself, so that front tracking is exact;
        "smooth" puts a shape-preserving cubic through the rows (Fritsch and Carlson 1980).

    Raises
    ------
    InputError
        Where the columns differ in length, have fewer than two rows, are not finite, or u does not increase.
    """
    states, fluxes = np.array(u, dtype=float), np.array(f, dtype=float)
    if reading not in READINGS:
        raise InputError('must be "polygon" or "smooth"', key="reading", value=reading, mend='try "polygon"')
    if states.ndim != 1 or states.shape != fluxes.shape or len(states) < 2:
        raise InputError(
            "must be two columns of the same length with two rows or more", key="table",
            value=[states.shape, fluxes.shape], mend="give one flux for each state",
        )  # fmt: skip
    bad = np.flatnonzero(~(np.isfinite(states) & np.isfinite(fluxes)))
    if bad.size:
        row = int(bad[0])
        raise InputError(
            "must be finite", key=f"table row {row + 1}", value=[float(states[row]), float(fluxes[row])], mend="mend it"
        )
    bad = np.flatnonzero(np.diff(states) <= 0.0)
    if bad.size:
        row = int(bad[0]) + 1
        raise InputError(
            "must have states that increase strictly", key=f"table row {row + 1}", value=float(states[row]),
            mend="sort the rows and drop doubles",
        )  # fmt: skip
    spec = {"table": {"u": states.tolist(), "f": fluxes.tolist()}, "reading": reading}
    common = {"name": name or f"table ({reading})", "source": "measured table", "units": units or Units(), "spec": spec}
    if reading == "polygon":
        return Law(
            lambda s: np.interp(s, states, fluxes),
            (states[0], states[-1]),
            derivative=lambda s: (np.diff(fluxes) / np.diff(states))[
                np.searchsorted(states[1:-1], np.asarray(s), side="right")
            ],
            kinks=tuple(states[1:-1]),
            inflections=(),
            formula="straight lines between the table's rows",
            polygon=(states, fluxes),
            **common,  # type: ignore[arg-type]
        )
    return _smooth(states, fluxes, common)


def _smooth(states: np.ndarray, fluxes: np.ndarray, common: dict) -> Law:
    """Return the law of the shape-preserving cubic: its bends change at knots and within single cubics."""
    from scipy.interpolate import PchipInterpolator

    curve = PchipInterpolator(states, fluxes)
    second = curve.derivative(2)
    marks = []
    for a, b in itertools.pairwise(states):
        at_a, at_b = float(second(a)), float(second(np.nextafter(b, a)))
        if at_a * at_b < 0.0:
            marks.append(float(a + (b - a) * at_a / (at_a - at_b)))  # f'' is linear within a cubic
    marks += states[1:-1].tolist()  # f'' jumps at the knots
    return Law(
        curve,
        (states[0], states[-1]),
        derivative=curve.derivative(1),
        second_derivative=second,
        inflections=tuple(marks),
        formula="shape-preserving cubic through the table's rows",
        **common,
    )
