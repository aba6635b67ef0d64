"""What the engine asks of a law with several states, and the register of such laws."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Callable
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray
from wavekin.errors import InputError
from wavekin.systems.cores import CORES, REFUSALS, Core
from wavekin.systems.waves import Wave


class Variable(NamedTuple):
    """Symbol, name and unit of a variable; "-" where the units are the user's own consistent ones."""

    symbol: str
    name: str
    unit: str = "-"


class System(ABC):
    """A hyperbolic system of n conservation laws u_t + f(u)_x = 0 with its exact local solve.

    To write a new one, you must

    1. write the seven functions of `wavekin.systems.cores.Core` (the last, `helpers`, is a tuple of what they call)
       on *inner* variables of your choice, as plain functions of floats and arrays, so that numba can compile them;
    2. give the parameters a type of their own, a `NamedTuple` of floats and arrays, and enter
       ``CORES[YourParameters] = Core(...)``; a type that is no named tuple works too, but is not compiled;
    3. subclass `System`, set the class attributes below and call ``super().__init__(parameters)``;
    4. write `to_primitive`, `from_primitive`, `characteristic_speeds`, `check_primitive`, `scales` and `spec`,
       vectorised over (..., n); `to_inner` and `from_inner` too where inner variables are not the primitive ones;
       `flux` where the one made from `Core.measure` is too slow for you;
    5. see to it that the local solve is exact to rounding, fails with a code of `cores.REFUSALS` rather than
       return something else, and hands back the two given states to the last bit;
    6. call ``check(system, samples)`` of `wavekin.systems.checking`, and `register` it by its name, or name its
       factory in the entry point group "wavekin.systems".

    Attributes
    ----------
    conserved, primitive : tuple of Variable
    walls : bool
        Whether waves can be reflected: `Core.mirror` turns a state round, families 0 and n - 1 move left and right.
    galilean : bool
        Whether the law is the same for a moving observer.
    exact_steps : bool
        Whether shock and fan curves coincide (Temple 1983) or there are no fans: steps of fans then conserve all.
    most_waves : int
        Most waves that a local solution can have.
    """

    name: str
    formula: str = ""
    source: str = ""
    conserved: tuple[Variable, ...]
    primitive: tuple[Variable, ...]
    walls: bool = False
    galilean: bool = False
    exact_steps: bool = False
    most_waves: int = 0

    def __init__(self, parameters: Any) -> None:
        self.parameters = parameters
        self.core: Core = CORES[type(parameters)]

    @property
    def n(self) -> int:
        """Number of conserved variables."""
        return len(self.conserved)

    def __repr__(self) -> str:
        spec = self.spec
        inside = ", ".join(f"{name}={value!r}" for name, value in spec["parameters"].items())
        return f"{spec['name']}({inside})"

    # What a system supplies

    @property
    @abstractmethod
    def spec(self) -> dict[str, Any]:
        """What builds the system again: its name and parameters."""

    @abstractmethod
    def to_primitive(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return primitive variables, shape of `state` (..., n), from conserved ones."""

    @abstractmethod
    def from_primitive(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return conserved variables, shape of `state` (..., n), from primitive ones."""

    @abstractmethod
    def characteristic_speeds(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return the speed of each family, shape of `state`, from conserved variables."""

    @abstractmethod
    def check_primitive(self, state: NDArray[np.float64], key: str) -> None:
        """Raise InputError for the first inadmissible one of states of shape (k, n)."""

    @abstractmethod
    def scales(self, primitive: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the size, shape (n,), in each family's measure, of which strength limits are shares."""

    def entropy_pair(self, state: ArrayLike) -> tuple[NDArray[np.float64], NDArray[np.float64]] | None:
        """Return a convex entropy and its flux, shapes (...); None where the system has none."""
        return None

    def to_inner(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return inner variables, shape of `state`, from conserved ones."""
        return self.to_primitive(state)

    def from_inner(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return conserved variables, shape of `state`, from inner ones."""
        return self.from_primitive(state)

    # What it can do

    def flux(self, state: ArrayLike) -> NDArray[np.float64]:
        """Return the flux, shape of `state` (..., n), from conserved variables."""
        array = np.asarray(state, dtype=float)
        inner = self.to_inner(array).reshape(-1, self.n)
        fluxes, conserved = np.empty_like(inner), np.empty(self.n)
        for row, out in zip(inner, fluxes, strict=True):
            self.core.measure(self.parameters, row, conserved, out)
        return fluxes.reshape(array.shape)

    def admissible(self, state: ArrayLike, key: str = "state") -> NDArray[np.float64]:
        """Return conserved states as an array (..., n), or raise InputError for the first that cannot be."""
        array = self._numbers(state, key)
        with np.errstate(all="ignore"):
            primitive = self.to_primitive(array).reshape(-1, self.n)
        self.check_primitive(primitive, key)
        self._refuse(~np.isfinite(primitive).all(axis=1), primitive, key, "must have finite values", "check the state")
        return array

    def solve(self, left: ArrayLike, right: ArrayLike) -> tuple[Wave, ...]:
        """Return the waves of the local problem between two conserved states, from left to right.

        Raises
        ------
        InputError
            Where a state is inadmissible or the system has no solution between them.
        """
        left, right = self.admissible(left, "left"), self.admissible(right, "right")
        inner, kinds, families, speeds = self._local(self.to_inner(left), self.to_inner(right))
        states = self.from_inner(inner)
        states[0], states[-1] = left, right
        return tuple(
            Wave(
                self, int(families[k]), int(kinds[k]), states[k], states[k + 1], float(speeds[k, 0]),
                float(speeds[k, 1]), inner[k], inner[k + 1],
            )
            for k in range(len(kinds))
        )  # fmt: skip

    def star_states(self, left: ArrayLike, right: ArrayLike) -> NDArray[np.float64]:
        """Return the states between the waves of `solve`, shape (waves - 1, n), in primitive variables."""
        left, right = self.admissible(left, "left"), self.admissible(right, "right")
        inner = self._local(self.to_inner(left), self.to_inner(right))[0]
        return self.to_primitive(self.from_inner(inner[1:-1]))

    def strength(self, left: ArrayLike, right: ArrayLike, family: int) -> float:
        """Return the signed strength of a wave of a family between two conserved states."""
        left, right = self.to_inner(np.asarray(left, dtype=float)), self.to_inner(np.asarray(right, dtype=float))
        return float(self.core.strength(self.parameters, family, left, right))

    def _local(self, left: NDArray, right: NDArray) -> tuple[NDArray, NDArray, NDArray, NDArray]:
        """Return inner states, kinds, families and speeds of the local solution between two inner states."""
        room = self.most_waves or self.n
        states, kinds = np.empty((room + 1, self.n)), np.empty(room, dtype=np.int64)
        families, speeds = np.empty(room, dtype=np.int64), np.empty((room, 2))
        count = self.core.local(self.parameters, left, right, states, kinds, families, speeds)
        if count < 0:
            raise InputError(
                REFUSALS[count], key="left, right", value=[left.tolist(), right.tolist()],
                mend="bring the two states nearer to each other",
            )  # fmt: skip
        return states[: count + 1], kinds[:count], families[:count], speeds[:count]

    def local_inner(self, left: NDArray, right: NDArray) -> NDArray[np.float64]:
        """Return the inner states between and beside the waves, shape (waves + 1, n), of two inner states."""
        return self._local(np.asarray(left, dtype=float), np.asarray(right, dtype=float))[0]

    # For subclasses

    def _parts(self, state: ArrayLike) -> tuple[NDArray[np.float64], ...]:
        """Return the n variables of states as arrays of shape (...)."""
        return tuple(np.moveaxis(np.asarray(state, dtype=float), -1, 0))

    def _numbers(self, state: ArrayLike, key: str) -> NDArray[np.float64]:
        try:
            array = np.array(state, dtype=float)
        except (TypeError, ValueError) as error:
            raise InputError("must be numbers", key=key, value=state, mend="give plain numbers") from error
        if array.ndim == 0 or array.shape[-1] != self.n:
            names = ", ".join(variable.symbol for variable in self.conserved)
            raise InputError(f"must hold {self.n} numbers a state ({names})", key=key, value=state, mend="give all")
        if not np.isfinite(array).all():
            raise InputError("must be finite", key=key, value=state, mend="give plain numbers")
        return array

    @staticmethod
    def _refuse(bad: Any, state: NDArray[np.float64], key: str, rule: str, mend: str) -> None:
        """Raise InputError for the first of states (k, n) that is marked in `bad`, shape (k,)."""
        where = np.flatnonzero(bad)
        if where.size:
            place = key if len(state) == 1 else f"{key}[{where[0]}]"
            raise InputError(rule, key=place, value=state[where[0]].tolist(), mend=mend)


# The register

FACTORIES: dict[str, Callable[..., System]] = {}
"""Factories of systems by name, the built-in ones and those that were registered."""

ENTRY_POINTS = "wavekin.systems"


def register(name: str, factory: Callable[..., System], *, replace: bool = False) -> None:
    """Make a system known by name to case files and stored histories.

    Raises
    ------
    InputError
        Where the name is taken and `replace` is not set.
    """
    if name in FACTORIES and not replace:
        raise InputError("is taken by another system", key="name", value=name, mend="choose another name")
    FACTORIES[name] = factory


def system_from_spec(spec: dict[str, Any]) -> System:
    """Return the system that a spec describes: built in, registered, or from an installed entry point.

    Raises
    ------
    InputError
        Where no system has that name or its factory does not know a parameter.
    """
    from wavekin.laws.parameters import nearest

    name = spec.get("name")
    if name not in FACTORIES:
        _load_entry_points()
    if name not in FACTORIES:
        raise InputError("is not the name of a system", key="name", value=name, mend=nearest(name, FACTORIES))
    try:
        return FACTORIES[name](**spec.get("parameters", {}))
    except TypeError as error:
        raise InputError(f"does not fit {name}: {error}", key="parameters", mend="see its docstring") from error


def _load_entry_points() -> None:
    """Register what installed packages offer; a built-in name stays what it is."""
    from importlib.metadata import entry_points

    for entry in entry_points(group=ENTRY_POINTS):
        if entry.name not in FACTORIES:
            register(entry.name, entry.load())
