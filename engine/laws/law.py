"""A scalar law: its flux, where the flux bends which way, and the words for its axes."""

from __future__ import annotations

import itertools
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from wavekin.errors import InputError
from wavekin.laws.shape import Flux, bend_of, differences, inflections_of, kinks_of, straight_parts

#: States at which a flux is tried when a law is made.
TRIALS = 1025


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
        The admissible states a < b; f must be finite and continuous on [a, b].
    derivative, second_derivative : callable, optional
        f' and f'', vectorised; f' is found by differences where it is not given. They may be infinite at the ends.
    kinks : iterable of float, optional
        States at which f' jumps; located by sampling where neither they nor the inflections are given.
    inflections : iterable of float, optional
        States at which f'' changes its sign; located by sampling where not given. What is sampled, not given, is
        only as sure as that: the proven bound rests on it.
    linear : iterable of (float, float)
        Intervals on which f is exactly straight; recognised where kinks and inflections are located.
    name, formula, source : str
        For people.
    parameters : mapping
    units : Units
    polygon : (ndarray, ndarray), optional
        Corners (u, f) where the law is itself a polygon, so that front tracking is exact.
    spec : dict, optional
        What `wavekin.laws.law_from_spec` needs to build the law again.

    Attributes
    ----------
    pieces : tuple of Piece
        The range, cut at the special states, with the bend of each part.
    special : ndarray
        Kinks, inflections and ends of straight parts strictly inside the range, increasing (unit of state).

    Raises
    ------
    InputError
        Where the range is not two finite numbers in order; where f is not vectorised, finite and continuous on
        it; where it bends both ways between the inflections given.
    """

    flux: Flux
    range: tuple[float, float]
    derivative: Flux = field(default=None, kw_only=True)  # type: ignore[assignment]
    second_derivative: Flux | None = field(default=None, kw_only=True)
    kinks: tuple[float, ...] = field(default=None, kw_only=True)  # type: ignore[arg-type]
    inflections: tuple[float, ...] = field(default=None, kw_only=True)  # type: ignore[arg-type]
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
        self._set("range", two_numbers(self.range))
        self._check_flux()
        self._set("linear", tuple((float(a), float(b)) for a, b in self.linear))
        if self.polygon is not None:
            self._take_polygon()
        elif self.inflections is None:
            self._locate()
        self._set("kinks", self._inside(self.kinks or ()))
        self._set("inflections", self._inside(self.inflections))
        if self.derivative is None:
            self._set("derivative", differences(self.flux, np.array([self.range[0], *self.kinks, self.range[1]])))
        ends = self._inside(end for interval in self.linear for end in interval)
        self._set("special", np.unique([*self.kinks, *self.inflections, *ends]))
        if self.polygon is None:
            self._set("pieces", self._bends())

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
                value=float(states.ravel()[bad[0]]),
                mend="change the state or the law",
            )

    def _set(self, attribute: str, value: Any) -> None:
        object.__setattr__(self, attribute, value)

    def _inside(self, states: Iterable[float]) -> tuple[float, ...]:
        """Return the different states strictly inside the range, increasing."""
        a, b = self.range
        return tuple(sorted({float(state) + 0.0 for state in states if a < state < b}))

    def _check_flux(self) -> None:
        """Raise InputError where the flux is not vectorised and finite."""
        if not callable(self.flux):
            raise InputError("must be a function of the state", key="flux", value=self.flux, mend="try wk.table_law")
        a, b = self.range
        trial = np.linspace(a, b, TRIALS)
        with np.errstate(all="ignore"):
            try:
                fluxes = np.asarray(self.flux(trial), dtype=float)
            except (TypeError, ValueError) as error:
                raise InputError(
                    "must be vectorised: take an array of states and return their fluxes", key="flux",
                    value=str(error), mend="write it with numpy functions or wrap it in numpy.vectorize",
                ) from error  # fmt: skip
        if fluxes.shape != trial.shape:
            raise InputError(
                f"must be vectorised: return one flux for each state, shape {trial.shape}", key="flux",
                value=fluxes.shape, mend="write it with numpy functions or wrap it in numpy.vectorize",
            )  # fmt: skip
        bad = np.flatnonzero(~np.isfinite(fluxes))
        if bad.size:
            raise InputError(
                f"must be finite from {a!r} to {b!r}, and is not at {float(trial[bad[0]])!r}", key="flux",
                value=float(fluxes[bad[0]]), mend="narrow the range or change the flux",
            )  # fmt: skip

    def _take_polygon(self) -> None:
        """Take corners and pieces from the polygon that the law is."""
        assert self.polygon is not None
        u, f = (np.asarray(column, dtype=float) for column in self.polygon)
        if u.shape != f.shape or u.ndim != 1 or (u[0], u[-1]) != self.range or not (np.diff(u) > 0.0).all():
            raise InputError(
                "must hold increasing states over the whole range and their fluxes", key="polygon",
                value=[u.shape, f.shape], mend="try wk.table_law",
            )  # fmt: skip
        self._set("polygon", (u, f))
        if self.kinks is None:
            self._set("kinks", tuple(u[1:-1].tolist()))
        self._set("inflections", self.inflections or ())
        self._set("pieces", tuple(Piece(float(a), float(b), 0) for a, b in itertools.pairwise(u)))

    def _locate(self) -> None:
        """Locate inflections, and kinks and straight parts where they are not given either."""
        a, b = self.range
        if self.kinks is None:
            self._set("kinks", kinks_of(self.flux, a, b))
        if not self.linear:
            corners = [a, *self._inside(self.kinks), b]
            parts = (straight_parts(self.flux, low, high) for low, high in itertools.pairwise(corners))
            self._set("linear", tuple(itertools.chain.from_iterable(parts)))
        ends = (end for interval in self.linear for end in interval)
        marks = [a, *self._inside([*self.kinks, *ends]), b]
        found: list[float] = []
        for low, high in itertools.pairwise(marks):
            if not self._is_straight(low, high):
                found += inflections_of(self.flux, self.second_derivative, low, high)
        self._set("inflections", tuple(found))

    def _is_straight(self, low: float, high: float) -> bool:
        return any(start <= low and high <= end for start, end in self.linear)

    def _bends(self) -> tuple[Piece, ...]:
        """Return the pieces between special states with the bend that their secants show."""
        pieces = []
        for low, high in itertools.pairwise([self.range[0], *self.special.tolist(), self.range[1]]):
            bend = 0 if self._is_straight(low, high) else bend_of(self.flux, low, high)
            if bend is None:
                raise InputError(
                    f"must hold each state where the bend changes; the flux bends both ways from {low!r} to {high!r}",
                    key="inflections", value=list(self.inflections),
                    mend="complete them, or leave them out to have them located",
                )  # fmt: skip
            pieces.append(Piece(low, high, bend))
        return tuple(pieces)


def two_numbers(ends: Iterable[float]) -> tuple[float, float]:
    """Return the ends of a range of states."""
    try:
        a, b = (float(end) for end in ends)
    except (TypeError, ValueError, OverflowError) as error:
        raise InputError("must be two numbers", key="range", value=ends, mend="give range = [a, b]") from error
    if not (np.isfinite(a) and np.isfinite(b) and a < b):
        raise InputError("must be two finite numbers in order", key="range", value=[a, b], mend="give range = [a, b]")
    return a, b
