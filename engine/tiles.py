"""Space-time tiles for the compiled loop: small queues and near look-ups, whatever the number of fronts.

A single queue over millions of fronts leaves the processor's cache, and so do the fronts it names. Here time is
cut into slabs and space into blocks. Inside a block everything is decided that lies in the trapezoid cut off by
the largest speeds: no front enters it from outside, so it can be finished alone. The triangles left between two
trapezoids come next; all that enters them is known by then. Deciding collisions by locally earliest pairs
without such a bound on speed would be wrong.

The order in which collisions were found is then sorted into the one order of a history: time, then place.
"""

from __future__ import annotations

import heapq
import math
from typing import TYPE_CHECKING

import numpy as np
from numba import njit
from numpy.typing import NDArray

from wavekin.kernel import FRONTS, NO_FRONT, NOT_DUE, Queues, Region, at, enqueue, wrapped
from wavekin.motion import same_place
from wavekin.tracker import Progress

if TYPE_CHECKING:
    from wavekin.kernel import Kernel

#: Fronts in a tile at the start of a slab: their records fill a share of a core's own cache.
TILE = 2048
#: Below this many tiles the rest of the run is one region.
FEWEST_TILES = 4
#: Part of a block's width that the fastest signals may cross during a slab; below a half the trapezoids keep a top.
CROSSED = 0.3
#: A slab that resolves fewer collisions than this share of its fronts is followed by slabs with larger tiles.
WORTHWHILE = 0.1
#: Meetings this many times the tolerance of one point from a trapezoid's side are left to the triangle beside it.
SIDE_MARGIN = 64.0


@njit(cache=True)
def line_up(fronts, live, count, since, ring):  # type: ignore[no-untyped-def]
    """Return the rows of the fronts alive, from left to right, and their places at time `since`.

    On a ring the first one has a gap before it and places go on rising through the seam.
    """
    some = count[0] - 1
    while some >= 0 and fronts[some].ended_at >= 0:
        some -= 1
    if some < 0:
        return np.zeros(0, dtype=np.int64), np.zeros(0)
    head = some
    if ring[1] == 0.0:
        while live[head].prior != NO_FRONT:
            head = live[head].prior
    else:
        while True:
            before = live[head].prior
            gap = at(live, head, since) + live[before].turn * ring[1] - at(live, before, since)
            if gap > 0.0 or before == some:
                break
            head = before
    alive = 1
    i = live[head].next
    while i != NO_FRONT and i != head:
        alive += 1
        i = live[i].next
    rows, places = np.empty(alive, dtype=np.int64), np.empty(alive)
    i, lap = head, 0
    for k in range(alive):
        rows[k], places[k] = i, at(live, i, since) + lap * ring[1]
        lap += live[i].turn
        i = live[i].next
    return rows, places


@njit(cache=True)
def fill(live, rows, inside, left_side, right_side, sizes, region, ring):  # type: ignore[no-untyped-def]
    """Queue the meetings noted in some fronts that are due in a region or beside it."""
    for i in rows:
        t = live[i].due
        if t != NOT_DUE and t <= region.until:
            enqueue(inside, left_side, right_side, sizes, region, t, wrapped(at(live, i, t), ring[0], ring[1])[0], i)


def run_tiled(kernel: Kernel, until: float, max_fronts: int, progress: Progress | None, tile: int) -> bool:
    """Resolve every collision up to `until` in slabs of tiles; return False where `max_fronts` stopped it."""
    since, slabs = 0.0, 0
    while True:
        rows, places = line_up(kernel.fronts, kernel.live, kernel.count, since, kernel.ring)
        bounds, end = _slab(kernel, rows, places, since, until, tile)
        resolved = int(kernel.count[1])
        if len(bounds) == 0:
            finished = _one_region(kernel, rows, until, max_fronts, progress)
        else:
            finished = _tiles(kernel, rows, places, bounds, since, end, max_fronts, progress)
        slabs += 1
        if not finished:
            return False
        if len(bounds) == 0 or end >= until:
            break
        if kernel.count[1] - resolved < WORTHWHILE * len(rows):
            tile *= 2
        since = end
    if slabs > 1 or len(bounds):
        kernel.fronts, kernel.collisions = in_order(
            kernel.fronts[: kernel.count[FRONTS]], kernel.collisions[: kernel.count[1]]
        )
    return True


def _slab(
    kernel: Kernel, rows: NDArray[np.int64], places: NDArray[np.float64], since: float, until: float, tile: int
) -> tuple[NDArray[np.float64], float]:
    """Return the bounds between blocks (none: one region does) and the time at which the slab ends."""
    none = np.zeros(0)
    blocks = len(rows) // tile
    slopes = np.asarray(kernel.walk.run_slope)
    spread = 0.5 * float(slopes.max() - slopes.min()) if len(slopes) else 0.0
    if blocks < FEWEST_TILES or spread == 0.0:
        return none, until
    length = kernel.ring[1]
    if length:
        first = places[0] - 0.5 * (places[0] + length - places[-1])
        width = length / blocks
    else:
        first, width = places[0], (places[-1] - places[0]) / blocks
    end = min(since + CROSSED * width / spread, until)
    if not width > 8.0 * _margin(kernel, places, end):
        return none, until
    return first + width * np.arange(blocks + 1), end


def _margin(kernel: Kernel, places: NDArray[np.float64], t: float) -> float:
    size = max(abs(float(places[0])), abs(float(places[-1]))) + kernel.ring[1]
    return SIDE_MARGIN * same_place(size, t, kernel.top_speed)


def _one_region(
    kernel: Kernel, rows: NDArray[np.int64], until: float, max_fronts: int, progress: Progress | None
) -> bool:
    """Resolve all that is left with one queue."""
    queues = Queues(len(rows) + 64, 2, 2)
    region = Region.everywhere(until)
    fill(kernel.live, rows, *queues.heaps, queues.sizes, region, kernel.ring)
    return kernel.resolve(queues, region, max_fronts, progress)


def _tiles(
    kernel: Kernel,
    rows: NDArray[np.int64],
    places: NDArray[np.float64],
    bounds: NDArray[np.float64],
    since: float,
    end: float,
    max_fronts: int,
    progress: Progress | None,
) -> bool:
    """Resolve one slab: block after block its trapezoid, then the triangle between it and the block before."""
    slopes = np.asarray(kernel.walk.run_slope)
    drift, spread = 0.5 * float(slopes.max() + slopes.min()), 0.5 * float(slopes.max() - slopes.min())
    margin, length = _margin(kernel, places, end), kernel.ring[1]
    starts = np.searchsorted(places, bounds)
    starts[0], starts[-1] = 0, len(rows)
    last = len(bounds) - 2
    half = 0.5 * float(bounds[1] - bounds[0]) - margin
    triangle = Region.everywhere(end)
    queues, between = Queues(4 * TILE, 4 * TILE, 4 * TILE), Queues(2, 2, 2)
    seam, seam_size = np.empty((0, 3)), 0
    for block in range(last + 1):
        mine = rows[starts[block] : starts[block + 1]]
        region = Region(
            0.5 * float(bounds[block] + bounds[block + 1]),
            math.inf if length == 0.0 and block == 0 else half,
            math.inf if length == 0.0 and block == last else half,
            drift, spread, since, end, length,
        )  # fmt: skip
        if block == last:  # what is right of the last block is left of the first
            queues.heaps[2], queues.sizes[2] = seam, seam_size
        queues.make_room(len(mine) + 64)
        fill(kernel.live, mine, *queues.heaps, queues.sizes, region, kernel.ring)
        if not kernel.resolve(queues, region, max_fronts, progress):
            return False
        if block == 0:
            seam, seam_size = queues.heaps[1].copy(), int(queues.sizes[1])
            queues.sizes[1] = 0
        elif not _resolve_side(kernel, queues, between, triangle, max_fronts, progress):
            return False
        queues.turn()
    return _resolve_side(kernel, queues, between, triangle, max_fronts, progress)


def _resolve_side(
    kernel: Kernel, queues: Queues, between: Queues, triangle: Region, max_fronts: int, progress: Progress | None
) -> bool:
    """Resolve the triangle left of a block, whose meetings are on the left heap."""
    between.heaps[0], between.sizes[0] = queues.heaps[1], queues.sizes[1]
    finished = kernel.resolve(between, triangle, max_fronts, progress)
    queues.heaps[1], queues.sizes[1] = between.heaps[0], between.sizes[0]
    return finished


def in_order(
    fronts: NDArray[np.void], collisions: NDArray[np.void]
) -> tuple[NDArray[np.void], NDArray[np.void]]:
    """Return fronts and collisions renumbered in the one order of a history: time, then place.

    Collisions at one time that cause each other keep the order of cause, as a single queue would find them.
    """
    t, x = collisions["t"].copy(), collisions["x"].copy()
    order = np.argsort(t, kind="stable")  # a merge sort, quick on the sorted stretches that the tiles are
    if np.any(t[order[1:]] == t[order[:-1]]):
        order = np.lexsort((x, t))
    rank = np.empty(len(order), dtype=np.int32)
    rank[order] = np.arange(len(order), dtype=np.int32)
    causes, effects = fronts["born_at"].copy(), fronts["ended_at"].copy()
    between = (causes >= 0) & (effects >= 0)
    causes, effects = causes[between], effects[between]
    if np.any(rank[causes] >= rank[effects]):
        order = _by_cause(order, collisions, causes, effects)
        rank[order] = np.arange(len(order), dtype=np.int32)
    initial = int(np.count_nonzero(fronts["born_at"] < 0))
    born = collisions["fronts_out"].astype(np.int64)
    first = initial + np.cumsum(born) - born  # rows are born in the order in which collisions were found
    begun = np.cumsum(born[order]) - born[order]
    moved = np.repeat(first[order] - begun, born[order]) + np.arange(len(fronts) - initial)
    fronts = _taken(fronts, np.concatenate([np.arange(initial), moved]))
    for column in ("born_at", "ended_at"):
        old = fronts[column].copy()
        fronts[column] = np.where(old >= 0, rank[old], old)
    return fronts, _taken(collisions, order)


def _taken(records: NDArray[np.void], rows: NDArray[np.int64]) -> NDArray[np.void]:
    """Return some rows of records, copied as plain words, which is several times faster than as records."""
    words = records.view(np.uint64).reshape(len(records), -1)
    return words.take(rows, axis=0).reshape(-1).view(records.dtype)


def _by_cause(
    order: NDArray[np.int64], collisions: NDArray[np.void], causes: NDArray[np.int32], effects: NDArray[np.int32]
) -> NDArray[np.int64]:
    """Return an order by time in which, at one time, the leftmost collision whose causes are past comes first."""
    t, x = collisions["t"], collisions["x"]
    tied = t[causes] == t[effects]
    waiting: dict[int, int] = {}
    following: dict[int, list[int]] = {}
    for cause, effect in zip(causes[tied].tolist(), effects[tied].tolist(), strict=True):
        waiting[effect] = waiting.get(effect, 0) + 1
        following.setdefault(cause, []).append(effect)
    result: list[int] = []
    steps = np.flatnonzero(np.diff(t[order])) + 1
    for group in np.split(order, steps):
        ready = [(float(x[c]), int(c)) for c in group.tolist() if not waiting.get(c)]
        heapq.heapify(ready)
        while ready:
            _, c = heapq.heappop(ready)
            result.append(c)
            for effect in following.get(c, ()):
                waiting[effect] -= 1
                if waiting[effect] == 0:
                    heapq.heappush(ready, (float(x[effect]), effect))
    return np.array(result, dtype=np.int64)
