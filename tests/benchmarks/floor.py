"""The compiled loop against its floor: the same heap pushes and pops, with the same keys, and nothing else.

A copy of the kernel's own text with two added lines writes down every push and pop of a run; the floor then
repeats just these on the kernel's heap.
"""

from __future__ import annotations

import importlib.util
import sys
import tempfile
import time
from pathlib import Path
from types import ModuleType

import numpy as np
from numba import njit
from numpy.typing import NDArray
from wavekin import kernel
from wavekin.laws import NAMED
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


def logging_kernel() -> ModuleType:
    """Return a copy of the kernel module that logs its heap in the last rows of the heap's array."""
    text = Path(kernel.__file__).read_text().replace("cache=True", "")
    note = "    n = int(heap[-1, 0])\n    heap[-2 - n, 0], heap[-2 - n, 1], heap[-2 - n, 2] = {row}\n    heap[-1, 0] = n + 1\n"
    push, drop = '"""Add a row to the heap of `size` rows."""\n', '"""Remove the first row of the heap of `size` rows."""\n'
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
        problem = _problem("burgers", 10, 5)
        module.Kernel(*problem).run(1.0, 10**9)  # compiles while the text is there
    return module


def _problem(name: str, jumps: int, levels: int) -> tuple[Polygon, NDArray[np.float64], NDArray[np.int64]]:
    """Return random data on all breakpoints of a law between 0 and 1."""
    law = NAMED[name]() if name != "corey" else NAMED[name](viscosity_ratio=0.5)
    grid = np.linspace(0.0, 1.0, levels)
    polygon = polygon_of(law, grid, grid, grid[:0])
    rng = np.random.default_rng(20261201)
    return polygon, np.sort(rng.random(jumps)) * jumps, rng.integers(0, len(polygon), jumps + 1)


def measure(name: str, jumps: int = 100_000, levels: int = 65, until: float = 200.0, repeats: int = 5) -> dict[str, float]:
    """Return kernel and floor times (s, least of the repeats), their ratio and the counts of one problem."""
    problem = _problem(name, jumps, levels)
    logger = logging_kernel().Kernel(*problem)
    logger.heap = np.zeros((len(logger.heap) + 64 * jumps, 3))
    logger._make_room = lambda rows: _grow_rows(logger, rows)
    logger._make_room(64 * jumps)
    logger.run(until, 10**9)
    noted = int(logger.heap[-1, 0])
    log = np.ascontiguousarray(logger.heap[-2 : -2 - noted : -1])
    deepest = int(np.max(np.cumsum(np.where(log[:, 2] == POP, -1, 1))))
    kernel_times, floor_times = [], []
    for _ in range(repeats):
        loop = kernel.Kernel(*problem)
        loop._make_room(int(logger.count[kernel.FRONTS] * 1.1) + 1000)
        begin = time.perf_counter()
        loop.run(until, 10**9)
        kernel_times.append(time.perf_counter() - begin)
        heap = np.zeros((deepest + 1, 3))
        begin = time.perf_counter()
        repeat(log, heap)
        floor_times.append(time.perf_counter() - begin)
    collisions = int(loop.count[kernel.COLLISIONS])
    return {
        "collisions": collisions,
        "operations": noted,
        "kernel": min(kernel_times),
        "floor": min(floor_times),
        "ratio": min(kernel_times) / min(floor_times),
        "collisions per second": collisions / min(kernel_times),
    }


def _grow_rows(loop: object, rows: int) -> None:
    """Make room for rows and a log behind the heap."""
    kernel.Kernel._make_room(loop, rows)  # type: ignore[arg-type]
    loop.heap = np.zeros((12 * rows, 3))  # type: ignore[attr-defined]


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
