"""Statistics of wave interactions over a whole history."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from wavekin.errors import InputError
from wavekin.records import CONTACT, FAN, SHOCK

if TYPE_CHECKING:
    from wavekin.history import History


@dataclass(frozen=True)
class Decay:
    """A power law fitted to a quantity: quantity ~ t^exponent, with the 95 % interval of the exponent."""

    exponent: float
    low: float
    high: float
    times: NDArray[np.float64]
    values: NDArray[np.float64]


#: What meets at a collision, and what comes of it.
MEETINGS, OUTCOMES = ("shock-shock", "shock-fan", "fan-fan", "with contact"), ("fan-cancel", "vanished", "split")


def collision_kinds(history: History) -> dict[str, int]:
    """Return how many collisions there were of each kind.

    By what meets, each collision once (`MEETINGS`): ``shock-shock``, ``shock-fan`` (at least one of each),
    ``fan-fan``, ``with contact``. By what comes of it (`OUTCOMES`), where a collision may count more than once or
    not at all: ``fan-cancel`` (part of a fan was cancelled: a fan front met one and variation was lost),
    ``vanished`` (no front is left), ``split`` (more fronts than one leave).
    """
    fronts, count = history.fronts, len(history.collisions)
    ended = fronts["ended_at"] >= 0
    at, kind = fronts["ended_at"][ended], fronts["kind"][ended]
    has = {k: np.bincount(at[kind == k], minlength=count) > 0 for k in (SHOCK, FAN, CONTACT)}
    gone = np.bincount(at, weights=np.abs(fronts["right"] - fronts["left"])[ended], minlength=count)
    left = np.abs(history.collisions["right"] - history.collisions["left"])
    out = history.collisions["fronts_out"]
    plain = ~has[CONTACT]
    found = (
        plain & has[SHOCK] & ~has[FAN],
        plain & has[SHOCK] & has[FAN],
        plain & ~has[SHOCK] & has[FAN],
        has[CONTACT],
        has[FAN] & (gone - left > 1e-12 * gone),
        out == 0,
        out > 1,
    )
    return {name: int(np.sum(which)) for name, which in zip(MEETINGS + OUTCOMES, found, strict=True)}


def strength_histogram(history: History, bins: int = 20) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
    """Return edges (even in the logarithm) and counts of the strengths of all fronts."""
    strength = np.abs(history.fronts["right"] - history.fronts["left"])
    if not len(strength):
        return np.array([0.0, 1.0]), np.zeros(1, dtype=np.int64)
    low, high = float(strength.min()), float(strength.max())
    edges = np.geomspace(low * (1.0 - 1e-12), high * (1.0 + 1e-12), bins + 1)
    return edges, np.histogram(strength, edges)[0]


def series(history: History, times: NDArray[np.float64]) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Return the number of fronts and the total variation at times, from births and deaths alone: O((n + k) log n)."""
    fronts = history.fronts
    strength = np.abs(fronts["right"] - fronts["left"])
    ended = np.isfinite(fronts["death_t"])
    order = np.argsort(fronts["death_t"][ended], kind="stable")
    deaths, gone = fronts["death_t"][ended][order], np.concatenate(([0.0], np.cumsum(strength[ended][order])))
    come = np.concatenate(([0.0], np.cumsum(strength)))
    i = np.searchsorted(fronts["birth_t"], times, side="right")
    j = np.searchsorted(deaths, times, side="right")
    return i - j, come[i] - gone[j]


def decay(history: History, quantity: str = "variation", since: float | None = None) -> Decay:
    """Fit a power of time to the variation or the number of fronts over the later part of a run.

    Parameters
    ----------
    quantity : {"variation", "fronts"}
    since : float, optional
        Begin of the fit; until / 10 where not given.

    Returns
    -------
    Decay
        By least squares of the logarithms at 60 times even in the logarithm; the interval is Student's and tells
        scatter about the power law, not whether there is one yet. The variation of an N-wave falls as t^(-1/2) on
        the line and as 1 / t on a ring (Lax 1957).

    Raises
    ------
    InputError
        For another quantity, a `since` outside the run, or a quantity that has died out.
    """
    from scipy.stats import linregress
    from scipy.stats import t as student

    since = history.until / 10.0 if since is None else since
    if not 0.0 < since < history.until:
        raise InputError(f"must lie between 0 and {history.until!r}", key="since", value=since, mend="choose another")
    times = np.geomspace(since, history.until, 60)
    counts, variation = series(history, times)
    values = {"variation": variation, "fronts": counts.astype(float)}.get(quantity)
    if values is None:
        raise InputError('must be "variation" or "fronts"', key="quantity", value=quantity, mend="choose one")
    good = values > 1e-14 * max(float(values.max(initial=0.0)), 1e-300)
    if good.sum() < 3:
        raise InputError("has died out", key="quantity", value=quantity, mend="fit an earlier part of the run")
    fit = linregress(np.log(times[good]), np.log(values[good]))
    room = float(student.ppf(0.975, good.sum() - 2) * fit.stderr)
    return Decay(float(fit.slope), float(fit.slope) - room, float(fit.slope) + room, times, values)
