"""The readable loop: fronts move, neighbours meet, every meeting is one local solve.

`wavekin.kernel` is the same loop compiled; both must write the same history to the last bit.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray
from wavekin.envelope import slope
from wavekin.motion import meeting_time, position, same_place
from wavekin.polygon import Polygon
from wavekin.queue import Event, EventQueue
from wavekin.records import COLLISION, FRONT, NONE

Progress = Callable[[float, int, int], None]
"""Called now and then with the time reached, the fronts alive and the collisions so far."""

#: Collisions between two calls of the progress callback.
REPORT_EVERY = 2000


class Front:
    """A jump between two states on its straight way, linked to its neighbours in space."""

    __slots__ = (
        "before", "birth_t", "birth_x", "born_at", "death_t", "death_x", "due", "ended_at", "left", "next",
        "opened", "right", "speed", "turn",
    )  # fmt: skip

    def __init__(self, t: float, x: float, speed: float, left: int, right: int, born_at: int) -> None:
        self.birth_t, self.birth_x, self.speed = t, x, speed
        self.left, self.right = left, right
        self.born_at, self.ended_at = born_at, NONE
        self.death_t, self.death_x = math.inf, math.nan
        self.opened = False
        self.before: Front | None = None
        self.next: Front | None = None
        self.turn = 0  # laps of the ring to add to the next front's place to see it from here
        self.due: Event | None = None

    def at(self, t: float) -> float:
        """Return the place at time t."""
        return position(self.birth_t, self.birth_x, self.speed, t)


class Tracker:
    """Front tracking for a scalar polygonal law on the open line or a ring.

    Parameters
    ----------
    polygon : Polygon
    edges : ndarray, shape (n,)
        Places of the initial jumps.
    states : ndarray of int, shape (n + 1,) or (n,) on a ring
        Breakpoints between them, as in `Profile.values`.
    ring : tuple of float, optional
        Ends of the ring.
    """

    def __init__(
        self,
        polygon: Polygon,
        edges: NDArray[np.float64],
        states: NDArray[np.int64],
        ring: tuple[float, float] | None = None,
    ) -> None:
        self.polygon, self.walk = polygon, polygon.lists
        self.ring_start, self.ring_length = (ring[0], ring[1] - ring[0]) if ring else (0.0, 0.0)
        self.top_speed = polygon.top_speed
        self.queue = EventQueue()
        self.now = 0.0
        self.alive = 0
        self.fronts: list[Front] = []
        self.collisions: list[tuple[float, float, int, int, int, int]] = []
        self._start(edges.tolist(), states.tolist())

    # The loop

    def run(self, until: float, max_fronts: int, progress: Progress | None = None) -> bool:
        """Resolve every collision up to `until` (inclusive); return False where `max_fronts` stopped it."""
        while self.peek() <= until:
            if len(self.fronts) > max_fronts:
                return False
            self.step()
            if progress is not None and len(self.collisions) % REPORT_EVERY == 0:
                progress(self.now, self.alive, len(self.collisions))
        return True

    def peek(self) -> float:
        """Return the time of the next collision; infinity where none is left."""
        event = self.queue.peek()
        return event.t if event else math.inf

    def step(self) -> None:
        """Resolve the next collision: the fronts at its point end, the solution between their outer states begins."""
        event = self.queue.pop()
        event.front.due = None
        self.now = event.t
        fronts, laps = self._meeting(event.front)
        first, last = fronts[0], fronts[-1]
        place, lap = self._wrapped(self._place(fronts, laps))
        before, after = first.before, last.next
        before_lap = laps[0] - (before.turn if before else 0)
        after_lap = laps[-1] + last.turn
        if before is last:  # the whole ring met in one point
            before = after = None
        row = len(self.collisions)
        for front in fronts:
            self._withdraw(front)
            front.death_t, front.death_x, front.ended_at = self.now, place, row
        born = self._solution(first.left, last.right, place, row)
        self.collisions.append((self.now, place, len(fronts), len(born), first.left, last.right))
        self.alive += len(born) - len(fronts)
        if born:
            born[-1].opened = last.opened
            self._join(before, born[0], lap - before_lap)
            self._join(born[-1], after, after_lap - lap)
        else:
            self._join(before, after, after_lap - before_lap)

    # What a step consists of

    def _meeting(self, first: Front) -> tuple[list[Front], list[int]]:
        """Return the fronts at one point with `first` and its neighbour, and their laps as seen from `first`."""
        assert first.next is not None
        fronts, laps = [first, first.next], [0, first.turn]
        x = first.at(self.now)
        near = same_place(x, self.now, self.top_speed)
        while (front := fronts[0].before) is not None and front is not fronts[-1]:
            lap = laps[0] - front.turn
            place = front.at(self.now) + lap * self.ring_length
            if fronts[0].at(self.now) + laps[0] * self.ring_length - place > near:
                break
            fronts.insert(0, front)
            laps.insert(0, lap)
        while (front := fronts[-1].next) is not None and front is not fronts[0]:
            lap = laps[-1] + fronts[-1].turn
            place = front.at(self.now) + lap * self.ring_length
            if place - (fronts[-1].at(self.now) + laps[-1] * self.ring_length) > near:
                break
            fronts.append(front)
            laps.append(lap)
        return fronts, laps

    def _place(self, fronts: list[Front], laps: list[int]) -> float:
        """Return the one place of a collision: the mean weighted with the jumps, which keeps the mass.

        The meeting time is rounded, so the fronts stand a hair apart at it.
        """
        places = [front.at(self.now) + lap * self.ring_length for front, lap in zip(fronts, laps, strict=True)]
        low, high = min(places[0], places[-1]), max(places[0], places[-1])
        middle = 0.5 * (places[0] + places[-1])
        jump = self.walk.u[fronts[-1].right] - self.walk.u[fronts[0].left]
        if jump == 0.0:
            return middle
        moment = 0.0
        for front, place in zip(fronts, places, strict=True):
            moment += (self.walk.u[front.right] - self.walk.u[front.left]) * (place - middle)
        return min(max(middle + moment / jump, low), high)

    def _wrapped(self, place: float) -> tuple[float, int]:
        """Return a place within the ring and the laps taken off it."""
        if self.ring_length == 0.0:
            return place, 0
        lap = math.floor((place - self.ring_start) / self.ring_length)
        inside = place - lap * self.ring_length
        if inside >= self.ring_start + self.ring_length:  # a hair left of the seam, rounded onto it
            return self.ring_start, lap + 1
        return max(inside, self.ring_start), lap

    def _solution(self, left: int, right: int, place: float, born_at: int) -> list[Front]:
        """Return the fronts of the local solution between two states, linked with each other."""
        fronts: list[Front] = []
        state = left
        for next_state in self.polygon.waves(left, right):
            front = Front(self.now, place, slope(self.walk, state, next_state), state, next_state, born_at)
            if fronts:
                fronts[-1].opened = True
                fronts[-1].next, front.before = front, fronts[-1]
            fronts.append(front)
            state = next_state
        self.fronts += fronts
        return fronts

    def _join(self, left: Front | None, right: Front | None, turn: int) -> None:
        """Make two fronts neighbours and queue their meeting."""
        if left is not None:
            self._withdraw(left)
            left.next, left.turn = right, turn
        if right is not None:
            right.before = left
        if left is not None and right is not None:
            self._schedule(left, right)

    def _schedule(self, left: Front, right: Front) -> None:
        """Queue the meeting of two neighbours, if they ever meet."""
        seen_x = right.birth_x + left.turn * self.ring_length
        t = meeting_time(
            left.birth_t, left.birth_x, left.speed, right.birth_t, seen_x, right.speed, self.now
        )  # fmt: skip
        if t < math.inf:
            left.due = Event(t, self._wrapped(left.at(t))[0], left)
            self.queue.push(left.due)

    def _withdraw(self, front: Front) -> None:
        """Take the meeting of a front with its right neighbour off the queue."""
        if front.due is not None:
            self.queue.withdraw(front.due)
            front.due = None

    def _start(self, edges: list[float], states: list[int]) -> None:
        """Put the fronts of the initial jumps in place."""
        on_ring = self.ring_length > 0.0
        groups = []
        for i, x in enumerate(edges):
            born = self._solution(states[i - 1] if on_ring else states[i], states[i if on_ring else i + 1], x, NONE)
            if born:
                groups.append(born)
        self.alive = len(self.fronts)
        for group, following in itertools.pairwise(groups):
            self._join(group[-1], following[0], 0)
        if on_ring and groups:
            self._join(groups[-1][-1], groups[0][0], 1)

    # The records

    def records(self) -> tuple[NDArray[np.void], NDArray[np.void]]:
        """Return the fronts and collisions as rows; left and right still breakpoint numbers, departure still 0."""
        fronts = np.zeros(len(self.fronts), FRONT)
        for name in (
            "birth_t",
            "birth_x",
            "death_t",
            "death_x",
            "left",
            "right",
            "speed",
            "born_at",
            "ended_at",
            "opened",
        ):
            fronts[name] = [getattr(front, name) for front in self.fronts]
        collisions = np.array(self.collisions, COLLISION) if self.collisions else np.zeros(0, COLLISION)
        return fronts, collisions
