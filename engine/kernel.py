"""The loop of `wavekin.tracker`, compiled for scalar polygonal laws; it writes the same history to the last bit.

The arithmetic is not written twice: `wavekin.envelope` and `wavekin.motion` are compiled from their own text.
The queue is a binary heap on an array whose outdated entries are recognised when they surface. Links between
neighbours are arrays that run beside the rows of the fronts.
"""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np
from numba import njit
from numba.extending import register_jitable
from numpy.typing import NDArray
from wavekin import envelope, motion
from wavekin.compilation import use_own_cache
from wavekin.envelope import MIXED, SINGLE, next_run_end, scan, slope, turning
from wavekin.motion import meeting_time, position, same_place
from wavekin.polygon import Polygon, mixed
from wavekin.records import COLLISION, FRONT, NONE
from wavekin.tracker import Progress

use_own_cache()

for _function in (
    motion.same_place, motion.position, motion.meeting_time,
    envelope.slope, envelope.turning, envelope.next_run_end, envelope.scan,
):  # fmt: skip
    register_jitable(_function)

#: Polygons up to this many breakpoints get a table of all first vertices, if their envelopes need scanning.
TABLE_LIMIT = 4097
#: Collisions between two returns to Python, where progress is shown and Ctrl-C is heard.
PAUSE_EVERY = 200_000
#: Rows by which arrays that have run full grow, as a factor.
GROWTH = 1.6

DONE, FULL, PAUSE = 0, 1, 2
NO_FRONT = -1
NOT_DUE = -1.0

#: What the loop reads of a front: its way, its states as breakpoint numbers, when it meets its right neighbour
#: (NOT_DUE: it does not), its neighbours, and the laps of the ring to add to the next one's place. One record of
#: one cache line beside the row of the history, which is only written: look-ups far apart in memory cost most.
LIVE = np.dtype(
    {
        "names": ["due", "birth_t", "birth_x", "speed", "left", "right", "prior", "next", "turn", "opened"],
        "formats": ["f8", "f8", "f8", "f8", "i4", "i4", "i4", "i4", "i4", "i4"],
        "itemsize": 64,
    }
)

#: Places in the array of counts.
FRONTS, COLLISIONS, ALIVE = range(3)


# The queue: rows (time, place, left front), the earliest at index 0


@njit(cache=True)
def before(heap, i, j):  # type: ignore[no-untyped-def]
    """Return whether row i comes before row j: time, then place."""
    return heap[i, 0] < heap[j, 0] or (heap[i, 0] == heap[j, 0] and heap[i, 1] < heap[j, 1])


@njit(cache=True)
def heap_push(heap, size, t, x, front):  # type: ignore[no-untyped-def]
    """Add a row to the heap of `size` rows."""
    i = size
    while i > 0:
        parent = (i - 1) >> 1
        if not (t < heap[parent, 0] or (t == heap[parent, 0] and x < heap[parent, 1])):
            break
        heap[i, 0], heap[i, 1], heap[i, 2] = heap[parent, 0], heap[parent, 1], heap[parent, 2]
        i = parent
    heap[i, 0], heap[i, 1], heap[i, 2] = t, x, front


@njit(cache=True)
def heap_drop(heap, size):  # type: ignore[no-untyped-def]
    """Remove the first row of the heap of `size` rows."""
    last = size - 1
    t, x, front = heap[last, 0], heap[last, 1], heap[last, 2]
    i = 0
    child = 1
    while child < last:
        if child + 1 < last and before(heap, child + 1, child):
            child += 1
        if not (heap[child, 0] < t or (heap[child, 0] == t and heap[child, 1] < x)):
            break
        heap[i, 0], heap[i, 1], heap[i, 2] = heap[child, 0], heap[child, 1], heap[child, 2]
        i = child
        child = 2 * i + 1
    heap[i, 0], heap[i, 1], heap[i, 2] = t, x, front


# The parts of a step, named as in the readable loop


@njit(cache=True)
def first_vertices(walk):  # type: ignore[no-untyped-def]
    """Return the table of `envelope.scan` for all pairs of states: entry [left, right]."""
    m = len(walk.u)
    table = np.zeros((m, m), dtype=np.int16)
    stack, speeds = np.empty(m, dtype=np.int64), np.empty(m)
    for right in range(m):
        for step in (-1, 1):
            top = 0
            stack[0] = right
            state = right + step
            while 0 <= state < m:
                speed = slope(walk, state, stack[top])
                while top > 0 and speed >= speeds[top]:
                    top -= 1
                    speed = slope(walk, state, stack[top])
                top += 1
                stack[top] = state
                speeds[top] = speed
                table[state, right] = stack[top - 1]
                state += step
    return table


@njit(cache=True)
def wrapped(place, ring_start, ring_length):  # type: ignore[no-untyped-def]
    """Return a place within the ring and the laps taken off it."""
    if ring_length == 0.0:
        return place, 0
    lap = math.floor((place - ring_start) / ring_length)
    inside = place - lap * ring_length
    if inside >= ring_start + ring_length:  # a hair left of the seam, rounded onto it
        return ring_start, lap + 1
    return max(inside, ring_start), lap


@njit(cache=True)
def at(live, i, t):  # type: ignore[no-untyped-def]
    """Return the place of front i at time t."""
    return position(live[i].birth_t, live[i].birth_x, live[i].speed, t)


@njit(cache=True)
def solution(walk, table, scratch, fronts, live, count, left, right, t, x, born_at):  # type: ignore[no-untyped-def]
    """Append the fronts of the local solve between two states, linked with each other; return how many."""
    stack, speeds = scratch
    if left == right:
        return 0
    turns = turning(walk, left, right)
    tabled = table.shape[0] > 1
    top = scan(walk, left, right, stack, speeds) if turns == MIXED and not tabled else 0
    state = left
    born = 0
    while state != right:
        if turns == SINGLE:
            next_state = right
        elif turns != MIXED:
            next_state = next_run_end(walk, state, right)
        elif tabled:
            next_state = int(table[state, right])
        else:
            next_state = stack[top - 1 - born]
        i = count[FRONTS]
        speed = slope(walk, state, next_state)
        row = fronts[i]
        row.birth_t, row.birth_x = t, x
        row.death_t, row.death_x = math.inf, math.nan
        row.left, row.right = state, next_state
        row.speed, row.departure = speed, 0.0
        row.born_at, row.ended_at = born_at, NONE
        row.kind, row.opened = 0, 0
        front = live[i]
        front.birth_t, front.birth_x, front.speed = t, x, speed
        front.left, front.right = state, next_state
        front.prior, front.next, front.turn = NO_FRONT, NO_FRONT, 0
        front.due, front.opened = NOT_DUE, 0
        if born > 0:
            fronts[i - 1].opened, live[i - 1].opened = 1, 1
            live[i - 1].next, front.prior = i, i - 1
        count[FRONTS] += 1
        born += 1
        state = next_state
    return born


@njit(cache=True)
def enqueue(inside, left_side, right_side, sizes, region, t, x, front):  # type: ignore[no-untyped-def]
    """Put a meeting on the queue of its place: inside the region's trapezoid, left or right of it.

    A meeting after the region's end goes on no queue; it stays noted in the live front.
    """
    if t > region.until:
        return
    since = t - region.since
    offset = x - region.drift * since - region.centre
    if region.length > 0.0:
        offset -= np.round(offset / region.length) * region.length
    reach = region.spread * since
    if offset < reach - region.left_half:
        heap_push(left_side, sizes[1], t, x, float(front))
        sizes[1] += 1
    elif offset > region.right_half - reach:
        heap_push(right_side, sizes[2], t, x, float(front))
        sizes[2] += 1
    else:
        heap_push(inside, sizes[0], t, x, float(front))
        sizes[0] += 1


@njit(cache=True)
def join(live, inside, left_side, right_side, sizes, region, left, right, turns, now, ring):  # type: ignore[no-untyped-def]
    """Make two fronts neighbours and queue their meeting."""
    if left != NO_FRONT:
        live[left].next, live[left].turn, live[left].due = right, turns, NOT_DUE
    if right != NO_FRONT:
        live[right].prior = left
    if left == NO_FRONT or right == NO_FRONT:
        return
    a, b = live[left], live[right]
    seen_x = b.birth_x + turns * ring[1]
    t = meeting_time(a.birth_t, a.birth_x, a.speed, b.birth_t, seen_x, b.speed, now)
    if t < math.inf:
        a.due = t
        enqueue(inside, left_side, right_side, sizes, region, t, wrapped(at(live, left, t), ring[0], ring[1])[0], left)


@njit(cache=True)
def full(inside, left_side, right_side, sizes):  # type: ignore[no-untyped-def]
    """Return whether a queue has no room for what one collision may add."""
    return sizes[0] + 2 > len(inside) or sizes[1] + 2 > len(left_side) or sizes[2] + 2 > len(right_side)


@njit(cache=True)
def start(walk, table, scratch, fronts, live, inside, left_side, right_side, sizes, region, count, edges, states, ring):  # type: ignore[no-untyped-def]
    """Put the fronts of the initial jumps in place; return FULL if there is no room for them."""
    on_ring = ring[1] > 0.0
    room = len(fronts)
    first_front, last_front = NO_FRONT, NO_FRONT
    for i in range(len(edges)):
        left = states[i - 1] if on_ring else states[i]
        right = states[i] if on_ring else states[i + 1]
        if count[FRONTS] + len(walk.u) > room or full(inside, left_side, right_side, sizes):
            return FULL
        head = count[FRONTS]
        born = solution(walk, table, scratch, fronts, live, count, left, right, 0.0, edges[i], NONE)
        if born == 0:
            continue
        if last_front != NO_FRONT:
            join(live, inside, left_side, right_side, sizes, region, last_front, head, 0, 0.0, ring)
        else:
            first_front = head
        last_front = count[FRONTS] - 1
    if on_ring and first_front != NO_FRONT:
        join(live, inside, left_side, right_side, sizes, region, last_front, first_front, 1, 0.0, ring)
    count[ALIVE] = count[FRONTS]
    return DONE


@njit(cache=True)
def advance(  # type: ignore[no-untyped-def]
    walk,
    table,
    scratch,
    fronts,
    live,
    inside,
    left_side,
    right_side,
    sizes,
    region,
    collisions,
    count,
    ring,
    top_speed,
    pause,
):  # type: ignore[no-untyped-def]
    """Resolve the region's collisions in order until none is left, an array is full, or `pause` of them are done."""
    start_x, length = ring
    done = 0
    while sizes[0] > 0:
        now, first = inside[0, 0], int(inside[0, 2])
        if live[first].due != now:
            heap_drop(inside, sizes[0])
            sizes[0] -= 1
            continue
        if (
            count[FRONTS] + len(walk.u) > len(fronts)
            or count[COLLISIONS] + 1 > len(collisions)
            or full(inside, left_side, right_side, sizes)
        ):
            return FULL
        if done == pause:
            return PAUSE
        heap_drop(inside, sizes[0])
        sizes[0] -= 1
        done += 1

        # All fronts at this point, with their laps as seen from the left one of the pair
        last, first_lap, last_lap = live[first].next, 0, live[first].turn
        near = same_place(at(live, first, now), now, top_speed)
        members = 2
        while live[first].prior != NO_FRONT and live[first].prior != last:
            i = live[first].prior
            lap = first_lap - live[i].turn
            if at(live, first, now) + first_lap * length - (at(live, i, now) + lap * length) > near:
                break
            first, first_lap = i, lap
            members += 1
        while live[last].next != NO_FRONT and live[last].next != first:
            i = live[last].next
            lap = last_lap + live[last].turn
            if at(live, i, now) + lap * length - (at(live, last, now) + last_lap * length) > near:
                break
            last, last_lap = i, lap
            members += 1

        # Their place: the mean weighted with the jumps
        place_first = at(live, first, now) + first_lap * length
        place_last = at(live, last, now) + last_lap * length
        left, right = live[first].left, live[last].right
        place = 0.5 * (place_first + place_last)
        jump = walk.u[right] - walk.u[left]
        if jump != 0.0:
            moment = 0.0
            i, lap = first, first_lap
            while True:
                step = walk.u[live[i].right] - walk.u[live[i].left]
                moment += step * (at(live, i, now) + lap * length - place)
                if i == last:
                    break
                lap += live[i].turn
                i = live[i].next
            low, high = min(place_first, place_last), max(place_first, place_last)
            place = min(max(place + moment / jump, low), high)
        place, lap = wrapped(place, start_x, length)

        # They end; the solution between the outer states begins
        row = count[COLLISIONS]
        outer_left, outer_right = live[first].prior, live[last].next
        left_lap = first_lap - (live[outer_left].turn if outer_left != NO_FRONT else 0)
        right_lap = last_lap + live[last].turn
        if outer_left == last:  # the whole ring met in one point
            outer_left = outer_right = NO_FRONT
        i = first
        while True:
            front = fronts[i]
            front.death_t, front.death_x, front.ended_at = now, place, row
            live[i].due = NOT_DUE
            if i == last:
                break
            i = live[i].next
        head = count[FRONTS]
        born = solution(walk, table, scratch, fronts, live, count, left, right, now, place, row)
        entry = collisions[row]
        entry.t, entry.x, entry.fronts_in, entry.fronts_out = now, place, members, born
        entry.left, entry.right = left, right
        count[COLLISIONS] += 1
        count[ALIVE] += born - members
        if born > 0:
            tail = count[FRONTS] - 1
            fronts[tail].opened = live[tail].opened = live[last].opened
            join(live, inside, left_side, right_side, sizes, region, outer_left, head, lap - left_lap, now, ring)
            join(live, inside, left_side, right_side, sizes, region, tail, outer_right, right_lap - lap, now, ring)
        else:
            join(
                live,
                inside,
                left_side,
                right_side,
                sizes,
                region,
                outer_left,
                outer_right,
                right_lap - left_lap,
                now,
                ring,
            )
    return DONE


class Queues:
    """Three heaps of rows (time, place, left front): inside a region, left and right of it; and their sizes."""

    def __init__(self, *rows: int) -> None:
        self.heaps = [np.empty((room, 3)) for room in rows]
        self.sizes = np.zeros(3, dtype=np.int64)

    def make_room(self, more: int) -> None:
        """Enlarge the heaps that have not the room for some more rows."""
        for i, heap in enumerate(self.heaps):
            if self.sizes[i] + more > len(heap):
                self.heaps[i] = _enlarged(heap, int(GROWTH * (self.sizes[i] + more)))

    def turn(self) -> None:
        """Let the right heap be the left one from here on, and the emptied left one the right."""
        self.heaps[1], self.heaps[2] = self.heaps[2], self.heaps[1]
        self.sizes[1], self.sizes[2] = self.sizes[2], self.sizes[1]


class Region(NamedTuple):
    """A trapezoid in space and time: what happens in it depends on nothing outside (`wavekin.tiles`).

    At time t it reaches from ``centre - left_half + spread (t - since)`` to ``centre + right_half - spread
    (t - since)`` in the frame that moves with `drift`, until `until`.
    """

    centre: float
    left_half: float
    right_half: float
    drift: float
    spread: float
    since: float
    until: float
    length: float

    @staticmethod
    def everywhere(until: float) -> Region:
        """Return the whole line or ring up to a time."""
        return Region(0.0, math.inf, math.inf, 0.0, 0.0, 0.0, until, 0.0)


class Kernel:
    """The compiled loop with its arrays; the counterpart of `Tracker`, with the same parameters."""

    def __init__(
        self,
        polygon: Polygon,
        edges: NDArray[np.float64],
        states: NDArray[np.int64],
        ring: tuple[float, float] | None = None,
    ) -> None:
        self.polygon = polygon
        self.edges, self.states = np.ascontiguousarray(edges), np.ascontiguousarray(states, dtype=np.int64)
        self.ring = (float(ring[0]), float(ring[1] - ring[0])) if ring else (0.0, 0.0)
        self.top_speed = polygon.top_speed
        self.walk = polygon.walk
        table_wanted = len(polygon) <= TABLE_LIMIT and mixed(polygon)
        self.table = first_vertices(self.walk) if table_wanted else np.zeros((1, 1), dtype=np.int16)
        self.scratch = (np.empty(len(polygon), dtype=np.int64), np.empty(len(polygon)))
        self.count = np.zeros(3, dtype=np.int64)
        self.make_room(2 * len(edges) + 2 * len(polygon) + 64)

    def make_room(self, rows: int) -> None:
        """Start afresh with room for some fronts."""
        self.fronts = np.empty(rows, dtype=FRONT)
        self.collisions = np.empty(rows, dtype=COLLISION)
        self.live = _lines(rows)

    def grow(self) -> None:
        """Enlarge what is about to run full."""
        count = self.count
        if count[FRONTS] + len(self.polygon) > len(self.fronts):
            rows = int(GROWTH * len(self.fronts)) + len(self.polygon)
            self.fronts = _enlarged(self.fronts, rows)
            longer = _lines(rows)
            longer[: len(self.live)] = self.live
            self.live = longer
        if count[COLLISIONS] + 1 > len(self.collisions):
            self.collisions = _enlarged(self.collisions, int(GROWTH * len(self.collisions)) + 1)

    def run(self, until: float, max_fronts: int, progress: Progress | None = None) -> bool:
        """Resolve every collision up to `until` (inclusive); return False where `max_fronts` stopped it."""
        from wavekin.tiles import TILE, run_tiled

        idle = Region.everywhere(-1.0)  # the first fronts note when they meet; queues are filled afterwards
        none = Queues(2, 2, 2)
        while True:
            self.count[:] = 0
            status = start(
                self.walk, self.table, self.scratch, self.fronts, self.live, *none.heaps, none.sizes, idle,
                self.count, self.edges, self.states, self.ring,
            )  # fmt: skip
            if self.count[FRONTS] > max_fronts:
                return False
            if status == DONE:
                break
            self.make_room(2 * len(self.fronts))
        return run_tiled(self, until, max_fronts, progress, TILE)

    def resolve(self, queues: Queues, region: Region, max_fronts: int, progress: Progress | None) -> bool:
        """Resolve all collisions queued in a region; return False where `max_fronts` stopped it."""
        while True:
            status = advance(
                self.walk, self.table, self.scratch, self.fronts, self.live, *queues.heaps, queues.sizes, region,
                self.collisions, self.count, self.ring, self.top_speed, PAUSE_EVERY,
            )  # fmt: skip
            if self.count[FRONTS] > max_fronts:
                return False
            if status == DONE:
                return True
            if status == FULL:
                self.grow()
                queues.make_room(2)
            elif progress is not None:
                progress(float(queues.heaps[0][0, 0]), int(self.count[ALIVE]), int(self.count[COLLISIONS]))

    def records(self) -> tuple[NDArray[np.void], NDArray[np.void]]:
        """Return the fronts and collisions as rows; left and right still breakpoint numbers, departure still 0."""
        return _trimmed(self.fronts, self.count[FRONTS]), _trimmed(self.collisions, self.count[COLLISIONS])


def _lines(rows: int) -> NDArray[np.void]:
    """Return an array of `LIVE` records that begin at cache lines."""
    size = LIVE.itemsize
    memory = np.empty((rows + 1) * size, dtype=np.uint8)
    skip = -memory.ctypes.data % size
    return memory[skip : skip + rows * size].view(LIVE)


def _enlarged(array: NDArray, rows: int) -> NDArray:
    """Return a longer copy of an array."""
    larger = np.empty((rows, *array.shape[1:]), dtype=array.dtype)
    larger[: len(array)] = array
    return larger


def _trimmed(array: NDArray, rows: int) -> NDArray:
    """Return the first rows of an array that owns its memory and no more."""
    array.resize((int(rows),), refcheck=False)
    return array
