"""What the records of a run need from the polygon: kinds of front and departures."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from wavekin.polygon import Polygon
from wavekin.records import CONTACT, FAN, SHOCK

#: Rows treated at a time, which bounds the working memory.
BLOCK = 1 << 20


def complete(fronts: NDArray[np.void], collisions: NDArray[np.void], polygon: Polygon) -> None:
    """Fill in kind and departure of fronts, and put states in the place of breakpoint numbers (in place)."""
    for begin in range(0, len(fronts), BLOCK):
        block = fronts[begin : begin + BLOCK]
        left, right = block["left"].astype(np.int64), block["right"].astype(np.int64)
        block["kind"] = kinds(polygon, left, right)
        block["departure"] = polygon.departures(left, right)
        block["left"], block["right"] = polygon.u[left], polygon.u[right]
    for side in ("left", "right"):
        collisions[side] = polygon.u[collisions[side].astype(np.int64)]


def kinds(polygon: Polygon, left: NDArray[np.int64], right: NDArray[np.int64]) -> NDArray[np.uint8]:
    """Return the kind of each front, shape of `left`.

    A front within one straight piece of the polygon is part of a fan where the true flux opens there, a
    contact where the true flux is straight too, else a (weak) shock; a front across several pieces is a shock.
    """
    low, high = np.minimum(left, right), np.maximum(left, right)
    run = np.asarray(polygon.walk.run)
    straight = run[low] == run[high - 1] if len(run) else np.zeros(len(left), dtype=bool)
    bend = polygon.bend[low] if len(polygon.bend) else np.zeros(len(left))
    opens = bend * np.sign(right - left) > 0
    return np.where(straight & opens, FAN, np.where(straight & (bend == 0), CONTACT, SHOCK)).astype(np.uint8)
