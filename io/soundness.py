"""What must hold of a history read from a file before anything walks its rows.

Rows point at one another; the compiled loops follow these pointers without looking whether they lead anywhere.
Whether the rows are *true* is for the audit to say.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from wavekin.errors import InputError
from wavekin.records import KINDS

if TYPE_CHECKING:
    from wavekin.history import History


def check_sound(history: History) -> None:
    """Check shapes, ranges and pointers of a history.

    Raises
    ------
    InputError
        For the first column that cannot be what it claims to be.
    """
    _check_scalars(history)
    _check_levels(history)
    _check_rows(history)
    _check_graph(history)
    _check_keyframes(history)


def _demand(good: bool | np.bool_, rule: str, key: str) -> None:
    if not good:
        raise InputError(rule, key=key, mend="run the case again")


def _finite(values: NDArray, low: float = -np.inf, high: float = np.inf) -> bool:
    """Return whether all values are finite and within two ends."""
    return bool(np.isfinite(values).all() and (values >= low).all() and (values <= high).all())


def _check_scalars(history: History) -> None:
    _demand(np.isfinite(history.until) and history.until > 0.0, "must be a finite time above 0", "until")
    for name in ("initial_defect", "initial_cumulative_defect", "flux_gap"):
        value = getattr(history, name)
        _demand(np.isfinite(value) and value >= 0.0, "must be finite and not below 0", name)
    if history.ring is not None:
        a, b = history.ring
        _demand(np.isfinite(a) and np.isfinite(b) and a < b, "must be two places in order", "ring")
    _demand(isinstance(history.run, dict), "must hold facts by name", "run")


def _check_levels(history: History) -> None:
    levels = history.levels
    _demand(len(levels) > 0 and _finite(levels) and bool((np.diff(levels) > 0.0).all()), "must increase", "levels")
    for name in ("level_fluxes", "smooth"):
        _demand(len(getattr(history, name)) == len(levels), "must have one entry a breakpoint", name)
    _demand(_finite(history.level_fluxes), "must be finite", "level_fluxes")
    edges, values = history.start.edges, history.start.values
    pieces = max(len(edges), 1) if history.ring is not None else len(edges) + 1
    _demand(len(values) == pieces, "must have one state a piece", "start")
    _demand(_finite(values, levels[0], levels[-1]), "must be states between the breakpoints", "start")


def _check_rows(history: History) -> None:
    fronts, collisions, levels, until = history.fronts, history.collisions, history.levels, history.until
    for name, rows, time in (("fronts", fronts, "birth_t"), ("collisions", collisions, "t")):
        _demand(_finite(rows[time], 0.0, until), "must be times of the run", f"{name}/{time}")
        for side in ("left", "right"):
            good = _finite(rows[side], levels[0], levels[-1])
            _demand(good, "must be states between the breakpoints", f"{name}/{side}")
    for key, column in (("birth_x", fronts), ("speed", fronts), ("x", collisions)):
        _demand(_finite(column[key]), "must be finite", key)
    _demand(_finite(fronts["departure"], 0.0), "must be finite and not below 0", "fronts/departure")
    _demand(_finite(fronts["kind"], high=len(KINDS) - 1), "must be a known kind", "fronts/kind")
    _demand(_finite(fronts["opened"], high=1), "must be 0 or 1", "fronts/opened")


def _check_graph(history: History) -> None:
    fronts, collisions = history.fronts, history.collisions
    count = len(collisions)
    for key, counted in (("born_at", "fronts_out"), ("ended_at", "fronts_in")):
        at = fronts[key]
        _demand(_finite(at, -1, count - 1), "must be rows of collisions", f"fronts/{key}")
        same = np.array_equal(np.bincount(at[at >= 0], minlength=count), collisions[counted])
        _demand(same, "must count the fronts that name the collision", f"collisions/{counted}")
    _demand(bool((np.diff(fronts["born_at"]) >= 0).all()), "must not decrease", "fronts/born_at")
    _demand(bool((collisions["fronts_in"] > 0).all()), "must be above 0", "collisions/fronts_in")


def _check_keyframes(history: History) -> None:
    times, starts, rows = history.keyframe_times, history.keyframe_starts, history.keyframe_ids
    good = _finite(times, 0.0, history.until) and bool((np.diff(times) >= 0.0).all())
    _demand(good, "must be times of the run in order", "keyframes/t")
    good = len(starts) == len(times) + 1 and starts[0] == 0 and starts[-1] == len(rows)
    _demand(good and bool((np.diff(starts) >= 0).all()), "must part the list of ids", "keyframes/first")
    _demand(_finite(rows, 0, len(history.fronts) - 1), "must be rows of fronts", "keyframes/ids")
