"""The compiled loop against its floor: the same heap pushes and pops, with the same keys, and nothing else.

A copy of the kernel's own text with two added lines writes down every push and pop of a run; the floor then
repeats just these on the kernel's heap.
"""

from __future__ import annotations

import importlib.util
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
from numba import njit
from numpy.typing import NDArray
from wavekin import kernel
from wavekin.laws import NAMED
from wavekin.ordering import in_order
from wavekin.polygon import Polygon, polygon_of

#: A logged pop, in the place of a front's number.
POP = -1.0


@njit(cache=True)
def repeat(log: NDArray[np.float64], heap: NDArray[np.float64]) -> int:
    """Do the logged pushes and pops on a heap; return its final size."""
    size = 0
    for i in range(len(log)):
        if log[i, 2] == POP:
            kernel_drop(heap, size)
            size -= 1
        else:
            kernel_push(heap, size, log[i, 0], log[i, 1], log[i, 2])
            size += 1
    return size


kernel_push, kernel_drop = kernel.heap_push, kernel.heap_drop


def logged(problem: tuple, until: float) -> NDArray[np.float64]:
    """Return all pushes and pops of one queue over the whole run, from a logging copy of the kernel's text.

    The copy logs in the last rows of the queue's own array, which is made long enough.
    """
    text = Path(kernel.__file__).read_text().replace("cache=True", "")
    note = "    n = int(heap[-1, 0])\n    heap[-2 - n, 0], heap[-2 - n, 1], heap[-2 - n, 2] = {row}\n"
    note += "    heap[-1, 0] = n + 1\n"
    push, drop = (
        '"""Add a row to the heap of `size` rows."""\n',
        '"""Remove the first row of the heap of `size` rows."""\n',
    )
    assert push in text and drop in text
    text = text.replace(push, push + note.format(row="t, x, front"))
    text = text.replace(drop, drop + note.format(row=f"0.0, 0.0, {POP}"))
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "logging_kernel.py"
        path.write_text(text)
        spec = importlib.util.spec_from_file_location("logging_kernel", path)
        assert spec is not None and spec.loader is not None
        module = importlib.util.module_from_spec(spec)
        sys.modules["logging_kernel"] = module
        spec.loader.exec_module(module)
        loop = module.Kernel(*problem)
        everywhere = module.Region.everywhere(until)
        rows = 64 * len(problem[1])
        loop.make_room(rows)
        queues = module.Queues(6 * rows, 2, 2)
        queues.heaps[0][-1, 0] = 0.0
        state = (loop.walk, loop.table, loop.scratch, loop.fronts, loop.live, *queues.heaps, queues.sizes, everywhere)
        assert module.start(*state, loop.count, loop.edges, loop.states, loop.ring) == module.DONE
        loop.resolve(queues, everywhere, 10**9, None)
    queue = queues.heaps[0]
    noted = int(queue[-1, 0])
    return np.ascontiguousarray(queue[-2 : -2 - noted : -1])


def _problem(name: str, jumps: int, levels: int) -> tuple[Polygon, NDArray[np.float64], NDArray[np.int64]]:
    """Return random data on all breakpoints of a law between 0 and 1."""
    law = NAMED[name]() if name != "corey" else NAMED[name](viscosity_ratio=0.5)
    grid = np.linspace(0.0, 1.0, levels)
    polygon = polygon_of(law, grid, grid, grid[:0])
    rng = np.random.default_rng(20261201)
    return polygon, np.sort(rng.random(jumps)) * jumps, rng.integers(0, len(polygon), jumps + 1)


def measure(
    name: str, jumps: int = 100_000, levels: int = 65, until: float = 200.0, repeats: int = 5
) -> dict[str, float]:
    """Return kernel and floor times (s, least of the repeats, on memory used before), their ratio and the counts."""
    problem = _problem(name, jumps, levels)
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "log.npy"
        problem_text = f"floor._problem({name!r}, {jumps}, {levels})"
        command = f"import floor, numpy; numpy.save({str(path)!r}, floor.logged({problem_text}, {until}))"
        # in a process of its own, so that its memory does not lie in the way of what is measured
        subprocess.run([sys.executable, "-c", command], check=True, cwd=Path(__file__).parent)
        log = np.load(path)
    deepest = int(np.max(np.cumsum(np.where(log[:, 2] == POP, -1, 1))))
    loop = kernel.Kernel(*problem)
    loop.make_room(30 * jumps)
    room = loop.fronts, loop.collisions, loop.live
    heap = np.zeros((deepest + 1, 3))
    kernel_times, floor_times = [], []
    for _ in range(repeats + 1):  # the first round only makes the system hand over the memory
        loop.fronts, loop.collisions, loop.live = room
        begin = time.perf_counter()
        loop.run(until, 10**9)
        in_order(loop.fronts[: loop.count[kernel.FRONTS]], loop.collisions[: loop.count[kernel.COLLISIONS]])
        kernel_times.append(time.perf_counter() - begin)
        begin = time.perf_counter()
        repeat(log, heap)
        floor_times.append(time.perf_counter() - begin)
    collisions = int(loop.count[kernel.COLLISIONS])
    return {
        "collisions": collisions,
        "operations": len(log),
        "kernel": min(kernel_times),
        "floor": min(floor_times),
        "ratio": min(kernel_times) / min(floor_times),
        "collisions per second": collisions / min(kernel_times),
    }


def main() -> None:
    """Print the table."""
    print(f"{'law':<10}{'collisions':>12}{'kernel s':>10}{'floor s':>10}{'ratio':>8}{'collisions/s':>14}")
    for name in ("burgers", "corey"):
        result = measure(name)
        print(
            f"{name:<10}{result['collisions']:>12}{result['kernel']:>10.3f}{result['floor']:>10.3f}"
            f"{result['ratio']:>8.2f}{result['collisions per second']:>14.3g}"
        )


if __name__ == "__main__":
    main()
