"""Space-time tiles for the compiled loop: small queues and near look-ups, whatever the number of fronts.

A single queue over millions of fronts leaves the processor's cache, and so do the fronts it names. Here time is
cut into slabs and space into blocks. Inside a block everything is decided that lies in the trapezoid cut off by
the largest speeds: no front enters it from outside, so it can be finished alone. The triangles left between two
trapezoids come next; all that enters them is known by then. Deciding collisions by locally earliest pairs
without such a bound on speed would be wrong.

The order in which collisions were found is no order of time; `wavekin.ordering` gives them that.
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np
from numba import njit
from numpy.typing import NDArray
from wavekin.kernel import COLLISIONS, NO_FRONT, NOT_DUE, Queues, Region, at, enqueue, wrapped
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
SIDE_MARGIN = 16.0


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
    since = 0.0
    while True:
        rows, places = line_up(kernel.fronts, kernel.live, kernel.count, since, kernel.ring)
        bounds, end = _slab(kernel, rows, places, since, until, tile)
        resolved = int(kernel.count[COLLISIONS])
        if len(bounds) == 0:
            finished = _one_region(kernel, rows, until, max_fronts, progress)
        else:
            finished = _tiles(kernel, rows, places, bounds, since, end, max_fronts, progress)
        if not finished or len(bounds) == 0 or end >= until:
            return finished
        if kernel.count[COLLISIONS] - resolved < WORTHWHILE * len(rows):
            tile *= 2
        since = end


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
