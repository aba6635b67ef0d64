"""An audit of a finished history: every claim that can be checked from the records is checked from them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from wavekin.motion import EPSILON
from wavekin.polygon import unique_pairs
from wavekin.replay import Replay, replay

if TYPE_CHECKING:
    from wavekin.history import History

#: Mass may drift by this share of the amount that the solution moves about.
MASS_RTOL = 1e-12
#: Jump speeds may miss the Rankine-Hugoniot condition by this many roundings of flux and state.
SPEED_ULPS = 32.0
#: Places may miss a meeting point by this many roundings of place and way.
PLACE_ULPS = 64.0
#: States at which each front is held against the true flux.
ADMISSIBILITY_SAMPLES = 33


@dataclass(frozen=True)
class Check:
    """One line of an audit: `worst` is the largest figure found and must not exceed `limit`."""

    name: str
    worst: float
    limit: float
    text: str

    @property
    def holds(self) -> bool:
        """Whether the check holds; a figure that is not a number never does."""
        return bool(self.worst <= self.limit)

    def __str__(self) -> str:
        verdict = "holds" if self.holds else "FAILS"
        return f"{verdict}  {self.name:<14} {self.worst:10.3g} <= {self.limit:<10.3g} {self.text}"


@dataclass(frozen=True)
class Audit:
    """The checks of one history."""

    checks: tuple[Check, ...]

    @property
    def holds(self) -> bool:
        """Whether every check holds."""
        return all(check.holds for check in self.checks)

    def __str__(self) -> str:
        return "\n".join(str(check) for check in self.checks)


def audit(history: History) -> Audit:
    """Check a history against conservation, the jump condition, the entropy condition and its own graph.

    The neighbourhoods are rebuilt from the rows (`wavekin.replay`), the entropy condition is sampled on the
    true flux where it is known, and the mass is measured at every keyframe and at the end.
    """
    found = replay(history)
    return Audit(
        (
            _mass(history),
            _jump_speed(history),
            _admissibility(history),
            _variation(history),
            *_order(history, found),
            _graph(history),
            *_budget(history),
        )
    )


def _times(history: History) -> NDArray[np.float64]:
    return np.unique(np.concatenate([[0.0], history.keyframe_times, [history.until]]))


def _mass(history: History) -> Check:
    """Mass at keyframes against that at the start; the scale is the variation times the way between the ends."""
    masses = np.array([history.mass(t) for t in _times(history)])
    scale = max(_amount(history), float(np.abs(masses).max()), np.finfo(float).tiny)
    worst = float(np.abs(masses - masses[0]).max()) / scale
    return Check("mass", worst, MASS_RTOL, "drift of the conserved total, as a share of the amount in play")


def _amount(history: History) -> float:
    """Return the size of the amounts whose sum is the mass (unit of state times unit of x)."""
    if history.ring is not None:
        return float(np.abs(history.start.values).max() * (history.ring[1] - history.ring[0]))
    jumps = np.abs(np.diff(history.start.values))
    reach = np.abs(history.start.edges) + history.until * float(np.abs(history.fronts["speed"]).max(initial=0.0))
    return float(np.dot(jumps, reach))


def _jump_speed(history: History) -> Check:
    """Speed times jump of state against jump of flux (Rankine-Hugoniot), in roundings."""
    fronts = history.fronts
    left, right = (np.searchsorted(history.levels, fronts[side]) for side in ("left", "right"))
    jump, flux = fronts["right"] - fronts["left"], history.level_fluxes
    miss = np.abs(fronts["speed"] * jump - (flux[right] - flux[left]))
    size = (
        np.abs(flux[left])
        + np.abs(flux[right])
        + np.abs(fronts["speed"]) * (np.abs(fronts["left"]) + np.abs(fronts["right"]))
    )
    worst = float((miss / np.maximum(EPSILON * size, np.finfo(float).tiny)).max(initial=0.0))
    return Check("jump speed", worst, SPEED_ULPS, "roundings by which speed x jump of state misses the jump of flux")


def _admissibility(history: History) -> Check:
    """Every front's chord against the true flux between its states (Oleinik 1957).

    The flux may pass the chord to the wrong side by no more than half the departure booked for the front.
    """
    fronts = history.fronts
    if not len(fronts):
        return Check("admissibility", 0.0, 1.0, "no front")
    sides = [np.searchsorted(history.levels, fronts[side]) for side in ("left", "right")]
    states, which = unique_pairs(sides[0], sides[1], len(history.levels))
    pairs = np.stack([history.levels[states[0]], history.levels[states[1]]], axis=1)
    booked = np.full(len(pairs), np.inf)
    np.minimum.at(booked, which, fronts["departure"])
    worst = 0.0
    for begin in range(0, len(pairs), 4096):
        worst = max(worst, _chord_excess(history, pairs[begin : begin + 4096], booked[begin : begin + 4096]))
    text = "flux beyond a front's chord on the wrong side, over the departure booked for it"
    return Check("admissibility", worst, 1.0, text)


def _chord_excess(history: History, pairs: NDArray[np.float64], booked: NDArray[np.float64]) -> float:
    """Return the largest ratio of sampled excess to what is booked (with room for rounding)."""
    share = np.linspace(0.0, 1.0, ADMISSIBILITY_SAMPLES)
    left, right = pairs[:, :1], pairs[:, 1:]
    states = left + share * (right - left)
    if history.law is not None and history.law.polygon is None:
        flux = np.asarray(history.law.flux(states.ravel())).reshape(states.shape)
    else:
        flux = np.interp(states, history.levels, history.level_fluxes)
    ends = np.interp(pairs, history.levels, history.level_fluxes)
    chord = ends[:, :1] + share * (ends[:, 1:] - ends[:, :1])
    excess = (np.sign(right - left) * (chord - flux)).max(axis=1)
    room = 16.0 * EPSILON * np.maximum(np.abs(flux).max(axis=1), np.abs(history.level_fluxes).max(initial=0.0))
    return float((excess / np.maximum(0.5 * booked + room, np.finfo(float).tiny)).max(initial=0.0))


def _variation(history: History) -> Check:
    """The variation of the fronts born at each collision against that of the fronts ended there."""
    fronts, count = history.fronts, len(history.collisions)
    strength = np.abs(fronts["right"] - fronts["left"])
    ended, born = fronts["ended_at"] >= 0, fronts["born_at"] >= 0
    before = np.bincount(fronts["ended_at"][ended], strength[ended], count)
    after = np.bincount(fronts["born_at"][born], strength[born], count)
    worst = float(((after - before) / np.maximum(before, np.finfo(float).tiny)).max(initial=0.0))
    return Check("variation", worst, 64.0 * EPSILON, "growth of the total variation at any collision, as a share")


def _order(history: History, found: Replay) -> tuple[Check, Check, Check]:
    """What the replay says: no front passes another, all that meet do meet, neighbours share their states."""
    fronts = history.fronts
    ways = np.abs(fronts["speed"]) * (np.minimum(fronts["death_t"], history.until) - fronts["birth_t"])
    top = float(np.abs(fronts["speed"]).max(initial=0.0))
    size = float(np.abs(fronts["birth_x"]).max(initial=0.0) + ways.max(initial=0.0)) + top * history.until
    limit = PLACE_ULPS * EPSILON * max(size, np.finfo(float).tiny)
    return (
        Check("order", -found.narrowest, limit, "deepest overlap of neighbours at any time: no front passes another"),
        Check("meeting", found.widest_meeting, limit, "distance at a collision between fronts recorded as meeting"),
        Check("neighbours", float(found.broken), 0.0, "collisions or neighbours whose states do not fit"),
    )


def _graph(history: History) -> Check:
    """Each birth and each death has its collision, at its time and place, in the numbers that it states."""
    fronts, collisions = history.fronts, history.collisions
    faults = 0
    for column, t, x, counted in (
        ("ended_at", "death_t", "death_x", "fronts_in"),
        ("born_at", "birth_t", "birth_x", "fronts_out"),
    ):
        rows = np.flatnonzero(fronts[column] >= 0)
        at = fronts[column][rows]
        faults += int(np.count_nonzero((at >= len(collisions)) | (at < -1)))
        at = at.clip(0, max(len(collisions) - 1, 0))
        if len(rows):
            same = (fronts[t][rows] == collisions["t"][at]) & (fronts[x][rows] == collisions["x"][at])
            faults += int(np.count_nonzero(~same))
        faults += int(np.count_nonzero(np.bincount(at, minlength=len(collisions)) != collisions[counted]))
    faults += int(np.count_nonzero((fronts["ended_at"] < 0) != np.isinf(fronts["death_t"])))
    faults += int(np.count_nonzero(np.diff(fronts["birth_t"]) < 0.0) + np.count_nonzero(np.diff(collisions["t"]) < 0.0))
    faults += int(np.count_nonzero(fronts["death_t"] < fronts["birth_t"]))
    return Check("graph", float(faults), 0.0, "births and deaths without their collision")


def _budget(history: History) -> tuple[Check, ...]:
    """The bound at the end against the budget, where there was one."""
    if history.run.get("budget") is None:
        return ()
    bound = history.error_bound(history.until)
    return (Check("budget", bound, float(history.run["budget"]), "proven L1 bound at the end, within the budget"),)
