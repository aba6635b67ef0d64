"""The event queue: which neighbours meet next."""

from __future__ import annotations

from typing import Any, NamedTuple

from sortedcontainers import SortedKeyList


class Event(NamedTuple):
    """A meeting of two neighbours that is due unless one of them ends before."""

    t: float
    x: float
    front: Any
    """The left one of the two."""


class EventQueue:
    """Events in order of time, then place; nothing else decides.

    Two events with the same time and place belong to one collision, so their order cannot matter. An event
    is withdrawn when its pair parts, so whatever the queue holds is due.
    """

    def __init__(self) -> None:
        self._events: SortedKeyList = SortedKeyList(key=lambda event: (event.t, event.x))

    def __len__(self) -> int:
        return len(self._events)

    def push(self, event: Event) -> None:
        """Add an event, O(log n)."""
        self._events.add(event)

    def withdraw(self, event: Event) -> None:
        """Remove an event whose pair has parted, O(log n)."""
        self._events.remove(event)

    def peek(self) -> Event | None:
        """Return the next event and leave it there; None where there is none."""
        return self._events[0] if self._events else None

    def pop(self) -> Event:
        """Return the next event and remove it, O(log n)."""
        return self._events.pop(0)
