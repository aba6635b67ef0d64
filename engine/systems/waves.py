"""One wave of a local solution: a shock, a contact or a fan between two states."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from wavekin.errors import InputError
from wavekin.records import FAN, KINDS

if TYPE_CHECKING:
    from wavekin.systems.system import System

#: Steps of the bisection that finds the state of a fan at a speed.
BISECTIONS = 60


@dataclass(frozen=True, eq=False)
class Step:
    """One front that stands for a part of a fan.

    Attributes
    ----------
    left, right : ndarray, shape (n,)
        Conserved states.
    speed : float
    defect : ndarray, shape (n,)
        Jump of flux less speed times jump of state: the rate at which the step fails to conserve. The first
        conserved total is always kept.
    """

    left: NDArray[np.float64]
    right: NDArray[np.float64]
    speed: float
    defect: NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Wave:
    """A wave between two conserved states.

    Attributes
    ----------
    family : int
        Characteristic family, 0 to n - 1.
    kind : int
        Number in `wavekin.records.KINDS`: shock, fan or contact.
    left, right : ndarray, shape (n,)
        Conserved states on its two sides.
    head, tail : float
        Speeds of its left and its right edge; the same number for a jump.
    """

    system: System
    family: int
    kind: int
    left: NDArray[np.float64]
    right: NDArray[np.float64]
    head: float
    tail: float
    inner_left: NDArray[np.float64]
    inner_right: NDArray[np.float64]

    def __repr__(self) -> str:
        speed = f"{self.head:.6g}" if self.head == self.tail else f"{self.head:.6g} to {self.tail:.6g}"
        return f"Wave({KINDS[self.kind]} of family {self.family}, speed {speed})"

    @property
    def speed(self) -> float:
        """Speed of a jump; the mean of the two edges' for a fan."""
        return self.head if self.head == self.tail else 0.5 * (self.head + self.tail)

    @property
    def strength(self) -> float:
        """Signed strength in the system's measure: above 0 for a fan, below 0 for a shock."""
        return float(self.system.core.strength(self.system.parameters, self.family, self.inner_left, self.inner_right))

    def at_share(self, share: float) -> NDArray[np.float64]:
        """Return the conserved state, shape (n,), at a share of a fan's strength, from 0 (left) to 1 (right).

        Raises
        ------
        InputError
            Where the wave is a jump or the share lies outside.
        """
        if self.kind != FAN:
            raise InputError("must be asked of a fan", key="share", value=share, mend="a jump has two states only")
        if not 0.0 <= share <= 1.0:
            raise InputError("must lie from 0 to 1", key="share", value=share, mend="give a share of the strength")
        return self.system.from_inner(self._inner(share))

    def state_at(self, xi: float) -> NDArray[np.float64]:
        """Return the conserved state, shape (n,), on the ray x = xi t; at a jump the one on its right."""
        if xi < self.head:
            return self.left
        if xi >= self.tail:
            return self.right
        low, high = 0.0, 1.0
        for _ in range(BISECTIONS):
            middle = 0.5 * (low + high)
            if middle in (low, high):
                break
            state = self.system.from_inner(self._inner(middle))
            if self.system.characteristic_speeds(state)[self.family] > xi:
                high = middle
            else:
                low = middle
        return self.system.from_inner(self._inner(0.5 * (low + high)))

    def split(self, limit: float) -> tuple[Step, ...]:
        """Cut the wave into fronts no stronger than `limit`; a jump stays one front.

        Each moves at the speed that keeps the first conserved total, which for a fan lies between the speeds at
        its two states; what the other totals then miss is returned with it.
        """
        pieces = max(1, math.ceil(abs(self.strength) / limit)) if self.kind == FAN else 1
        inner = [self.inner_left, *(self._inner(k / pieces) for k in range(1, pieces)), self.inner_right]
        states = [self.left, *(self.system.from_inner(state) for state in inner[1:-1]), self.right]
        steps = []
        for k in range(pieces):
            speed = self.head
            if self.kind == FAN:
                speed = self.system.core.jump_speed(self.system.parameters, self.family, inner[k], inner[k + 1])
            left, right = states[k], states[k + 1]
            defect = self.system.flux(right) - self.system.flux(left) - speed * (right - left)
            steps.append(Step(left, right, float(speed), defect))
        return tuple(steps)

    def _inner(self, share: float) -> NDArray[np.float64]:
        if share in (0.0, 1.0):
            return self.inner_right if share else self.inner_left
        out = np.empty(len(self.inner_left))
        self.system.core.inside(self.system.parameters, self.family, self.inner_left, self.inner_right, share, out)
        return out
