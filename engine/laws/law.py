"""A scalar law: its flux, where the flux bends which way, and the words for its axes."""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from wavekin.errors import InputError

Flux = Callable[[NDArray[np.float64]], Any]

#: Points at which the curvature of a flux without known inflections is sampled.
CURVATURE_SAMPLES = 4097
#: Second differences below this many roundings of the flux count as zero.
CURVATURE_ULPS = 64.0
#: Shares of a piece between which its bend is tested.
BEND_TEST = np.linspace(0.0, 1.0, 9)


@dataclass(frozen=True)
class Units:
    """Units and labels of a law's quantities; "-" is dimensionless."""

    state: str = "-"
    flux: str = "-"
    x: str = "-"
    t: str = "-"
    state_label: str = "state"
    state_symbol: str = "u"
    x_label: str = "place"
    t_label: str = "time"


@dataclass(frozen=True)
class Piece:
    """An interval of states on which the flux bends one way: 1 convex, -1 concave, 0 straight."""

    start: float
    end: float
    bend: int


@dataclass(frozen=True, eq=False)
class Law:
    """The scalar conservation law u_t + f(u)_x = 0.

    Parameters
    ----------
    flux : callable
        f, vectorised: states, shape (k,), to fluxes, shape (k,).
    range : tuple of float
        The admissible states a < b; f must be finite on [a, b].
    derivative, second_derivative : callable, optional
        f' and f'', vectorised; f' is found by differences where it is not given.
    kinks : iterable of float
        States at which f' jumps.
    inflections : iterable of float, optional
        States at which f'' changes its sign; located by sampling 4,097 second differences where not given. What
        is sampled, not given, is only as sure as that: the proven bound rests on it.
    linear : iterable of (float, float)
        Intervals on which f is exactly straight.
    name, formula, source : str
        For people.
    parameters : mapping
    units : Units
    polygon : (ndarray, ndarray), optional
        Corners (u, f) where the law is itself a polygon, so that front tracking is exact.
    spec : dict, optional
        What `wavekin.laws.law_from_spec` needs to build the law again.

    Raises
    ------
    InputError
        Where the range is not two finite numbers in order, or f is not finite and vectorised on it.
    """

    flux: Flux
    range: tuple[float, float]
    derivative: Flux = field(default=None, kw_only=True)  # type: ignore[assignment]
    second_derivative: Flux | None = field(default=None, kw_only=True)
    kinks: tuple[float, ...] = field(default=(), kw_only=True)
    inflections: tuple[float, ...] | None = field(default=None, kw_only=True)
    linear: tuple[tuple[float, float], ...] = field(default=(), kw_only=True)
    name: str = field(default="", kw_only=True)
    formula: str = field(default="", kw_only=True)
    parameters: Mapping[str, Any] = field(default_factory=dict, kw_only=True)
    source: str = field(default="", kw_only=True)
    units: Units = field(default=Units(), kw_only=True)
    polygon: tuple[NDArray[np.float64], NDArray[np.float64]] | None = field(default=None, kw_only=True)
    spec: dict[str, Any] | None = field(default=None, kw_only=True)
    pieces: tuple[Piece, ...] = field(init=False)
    special: NDArray[np.float64] = field(init=False)

    def __post_init__(self) -> None:
        a, b = _two_numbers(self.range)
        put = object.__setattr__
        put(self, "range", (a, b))
        self._check_flux()
        inside = [float(k) for k in self.kinks if a < k < b]
        put(self, "kinks", tuple(sorted(inside)))
        if self.derivative is None:
            put(self, "derivative", _differences(self.flux, a, b, self.kinks))
        if self.inflections is None:
            found = () if self.polygon is not None else self._located_inflections()
            put(self, "inflections", found)
        else:
            put(self, "inflections", tuple(sorted(float(k) for k in self.inflections if a < k < b)))
        ends = [end for interval in self.linear for end in interval if a < end < b]
        put(self, "special", np.unique([*self.kinks, *(self.inflections or ()), *ends]))
        put(self, "pieces", self._bends())

    def __repr__(self) -> str:
        return f"Law({self.name or self.formula or 'unnamed'}, states {self.range[0]:g} to {self.range[1]:g})"

    def speed(self, left: ArrayLike, right: ArrayLike) -> NDArray[np.float64]:
        """Return the speed of jumps (Rankine-Hugoniot), f' where the states are equal; shapes broadcast."""
        left, right = np.broadcast_arrays(np.asarray(left, dtype=float), np.asarray(right, dtype=float))
        flat_left, flat_right = left.ravel(), right.ravel()
        jump = flat_right - flat_left
        rise = np.asarray(self.flux(flat_right)) - np.asarray(self.flux(flat_left))
        same = jump == 0.0
        speeds = rise / np.where(same, 1.0, jump)
        if same.any():
            speeds[same] = np.asarray(self.derivative(flat_left[same]))
        return speeds.reshape(left.shape)

    def check_states(self, states: ArrayLike, key: str) -> None:
        """Raise InputError where a state is outside the law's range."""
        states = np.atleast_1d(np.asarray(states, dtype=float))
        a, b = self.range
        bad = np.flatnonzero(~((states >= a) & (states <= b)))
        if bad.size:
            raise InputError(
                f"must lie in the law's range from {a!r} to {b!r}",
                key=f"{key}[{bad[0]}]",
                value=float(states[bad[0]]),
                mend="change the state or the law",
            )

    def _check_flux(self) -> None:
        a, b = self.range
        trial = np.linspace(a, b, 65)
        with np.errstate(all="ignore"):
            try:
                fluxes = np.asarray(self.flux(trial), dtype=float)
            except (TypeError, ValueError) as error:
                raise InputError(
                    "must take an array of states and return their fluxes", key="flux", value=str(error),
                    mend="write it with numpy functions or wrap it in numpy.vectorize",
                ) from error  # fmt: skip
        if fluxes.shape != trial.shape:
            raise InputError(
                "must return one flux for each state", key="flux", value=fluxes.shape,
                mend="write it with numpy functions or wrap it in numpy.vectorize",
            )  # fmt: skip
        bad = np.flatnonzero(~np.isfinite(fluxes))
        if bad.size:
            raise InputError(
                f"must be finite from {a!r} to {b!r}, and is not at {float(trial[bad[0]])!r}", key="flux",
                value=float(fluxes[bad[0]]), mend="narrow the range or change the flux",
            )  # fmt: skip

    def _smooth_intervals(self) -> list[tuple[float, float]]:
        """Return the intervals between the ends of the range, kinks and straight pieces."""
        marks = [end for interval in self.linear for end in interval]
        bounds = np.unique([*self.range, *self.kinks, *marks]).clip(*self.range)
        bounds = np.unique(bounds)
        return list(zip(bounds[:-1].tolist(), bounds[1:].tolist(), strict=True))

    def _located_inflections(self) -> tuple[float, ...]:
        """Return the states where the sampled curvature changes sign, refined by bisection."""
        from scipy.optimize import brentq

        found: list[float] = []
        for a, b in self._smooth_intervals():
            if any(start <= a and b <= end for start, end in self.linear):
                continue
            u = np.linspace(a, b, CURVATURE_SAMPLES)
            step = u[1] - u[0]

            def curvature(state: float, step: float = step, a: float = a, b: float = b) -> float:
                middle = min(max(state, a + step), b - step)
                f = np.asarray(self.flux(np.array([middle - step, middle, middle + step])))
                return float((f[2] - f[1]) - (f[1] - f[0]))

            f = np.asarray(self.flux(u), dtype=float)
            bends = np.diff(f, 2)
            noise = CURVATURE_ULPS * np.finfo(float).eps * np.abs(f).max(initial=0.0)
            sign = np.where(np.abs(bends) > noise, np.sign(bends), 0.0)
            known = np.flatnonzero(sign)
            for i, j in itertools.pairwise(known):
                if sign[i] != sign[j]:
                    if self.second_derivative is not None:
                        second = self.second_derivative
                        low, high = float(u[i + 1]), float(u[j + 1])
                        values = [float(np.asarray(second(np.array([x])))[0]) for x in (low, high)]
                        if values[0] * values[1] < 0.0:
                            root = brentq(
                                lambda x, f=second: float(np.asarray(f(np.array([x])))[0]), low, high, xtol=1e-15
                            )
                            found.append(float(root))
                            continue
                    found.append(float(brentq(curvature, u[i + 1], u[j + 1], xtol=1e-15)))
        return tuple(found)

    def _bends(self) -> tuple[Piece, ...]:
        """Return the pieces between special states with the bend that secants of each show."""
        if self.polygon is not None:
            corners = np.asarray(self.polygon[0])
            return tuple(Piece(float(a), float(b), 0) for a, b in itertools.pairwise(corners))
        bounds = [self.range[0], *self.special.tolist(), self.range[1]]
        pieces = []
        for a, b in itertools.pairwise(bounds):
            if any(start <= a and b <= end for start, end in self.linear):
                pieces.append(Piece(a, b, 0))
                continue
            u = a + (b - a) * BEND_TEST
            f = np.asarray(self.flux(u), dtype=float)
            excess = float((np.interp(u, u[[0, -1]], f[[0, -1]]) - f)[1:-1].mean())
            noise = CURVATURE_ULPS * np.finfo(float).eps * float(np.abs(f).max())
            pieces.append(Piece(a, b, 0 if abs(excess) <= noise else int(np.sign(excess))))
        return tuple(pieces)


def _two_numbers(ends: Iterable[float]) -> tuple[float, float]:
    """Return the ends of a range of states."""
    try:
        a, b = (float(end) for end in ends)
    except (TypeError, ValueError) as error:
        raise InputError("must be two numbers", key="range", value=ends, mend="give range = [a, b]") from error
    if not (np.isfinite(a) and np.isfinite(b) and a < b):
        raise InputError("must be two finite numbers in order", key="range", value=[a, b], mend="give range = [a, b]")
    return a, b


def _differences(flux: Flux, a: float, b: float, kinks: tuple[float, ...]) -> Flux:
    """Return f' by differences of fourth order that stay between kinks and range ends."""
    bounds = np.array([a, *kinks, b])

    def derivative(states: NDArray[np.float64]) -> NDArray[np.float64]:
        u = np.asarray(states, dtype=float)
        piece = np.searchsorted(bounds[1:-1], u, side="right")
        low, high = bounds[piece], bounds[piece + 1]
        h = 1e-3 * (high - low)
        centre = u.clip(low + 2.0 * h, high - 2.0 * h)
        # The derivative of the parabola-exact five-point interpolant, taken at u itself.
        s = (u - centre) / h
        f = [np.asarray(flux(centre + k * h)) for k in (-2, -1, 0, 1, 2)]
        weights = (
            (4 * s**3 - 6 * s**2 - 2 * s + 2) / 24,
            -(4 * s**3 - 3 * s**2 - 8 * s + 4) / 6,
            (4 * s**3 - 10 * s) / 4,
            -(4 * s**3 + 3 * s**2 - 8 * s - 4) / 6,
            (4 * s**3 + 6 * s**2 - 2 * s - 2) / 24,
        )
        return sum(w * value for w, value in zip(weights, f, strict=True)) / h

    return derivative
