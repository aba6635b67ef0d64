"""The whole standing in one command; single parts: ``standing.py loops scaling store ...``."""

from __future__ import annotations

import platform
import resource
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import equal_error
import floor
import numpy as np
import wavekin as wk
from wavekin import kernel
from wavekin.io import load, save, save_run_figure
from wavekin.lineage import lineage_of, strongest
from wavekin.ordering import in_order
from wavekin.polygon import polygon_of
from wavekin.statistics import collision_kinds, decay
from wavekin.tracker import Tracker


def _timed(function: Callable[[], object], repeats: int = 3) -> float:
    best = np.inf
    for _ in range(repeats):
        begin = time.perf_counter()
        function()
        best = min(best, time.perf_counter() - begin)
    return best


def loops() -> None:
    """Compiled loop against the readable one at about 1e5 collisions."""
    grid = np.linspace(0.0, 1.0, 65)
    rng = np.random.default_rng(7)
    for name, law in (("burgers", wk.burgers()), ("corey", wk.corey(viscosity_ratio=0.5))):
        polygon = polygon_of(law, grid, grid, grid[:0])
        jumps = 9500
        problem = polygon, np.sort(rng.random(jumps)) * jumps, rng.integers(0, len(polygon), jumps + 1)
        kernel.Kernel(*problem).run(200.0, 10**9)
        fast = kernel.Kernel(*problem)
        quick = _timed(lambda p=problem: _run(kernel.Kernel(*p)))
        slow = _timed(lambda p=problem: _run(Tracker(*p)), 1)
        fast.run(200.0, 10**9)
        collisions = int(fast.count[kernel.COLLISIONS])
        print(
            f"  {name}: {collisions} collisions, readable {slow:.2f} s, compiled {quick:.3f} s, {slow / quick:.0f}-fold"
        )


def _run(loop: Tracker | kernel.Kernel) -> None:
    loop.run(200.0, 10**9)
    in_order(*loop.records())


def scaling() -> None:
    """Time a collision against the number of fronts at the start (Burgers, 65 levels, until half have met)."""
    grid = np.linspace(0.0, 1.0, 65)
    polygon = polygon_of(wk.burgers(), grid, grid, grid[:0])
    rng = np.random.default_rng(8)
    base = None
    for jumps in (100, 1000, 10_000, 100_000, 800_000):
        problem = polygon, np.sort(rng.random(jumps)) * jumps, rng.integers(0, len(polygon), jumps + 1)
        loop = kernel.Kernel(*problem)
        loop.make_room(30 * jumps + 1000)
        room = loop.fronts, loop.collisions, loop.live
        best = np.inf
        for _ in range(2 if jumps > 200_000 else 4):
            loop.fronts, loop.collisions, loop.live = room
            begin = time.perf_counter()
            loop.run(200.0, 10**9)
            best = min(best, time.perf_counter() - begin)
        each = 1e6 * best / int(loop.count[kernel.COLLISIONS])
        base = base or each
        live = int((np.abs(np.diff(problem[2]))[np.diff(problem[2]) > 0]).sum() + np.sum(np.diff(problem[2]) < 0))
        print(f"  {live:>9} fronts at the start: {each:.2f} us a collision ({each / base:.2f} of the first)")


def drift() -> None:
    """Mass over a million time units on a ring."""
    rng = np.random.default_rng(11)
    start = wk.Profile(np.arange(256) / 256.0, rng.integers(0, 65, 256) / 64.0)
    history = wk.track(wk.burgers(), start, 1e6, levels=65, ring=(0.0, 1.0))
    change = abs(history.mass(1e6) - history.mass(0.0)) / history.mass(0.0)
    print(
        f"  ring, until 1e6: {len(history.collisions)} collisions, drift {change:.1e}, audit {wk.audit(history).holds}"
    )


def store() -> None:
    """Rows of fronts a second to and from disk, compressed; bytes a front in memory."""
    rng = np.random.default_rng(9)
    jumps = 50_000
    history = wk.track(
        wk.burgers(), wk.Profile(np.sort(rng.random(jumps)) * jumps, rng.random(jumps + 1)), 200.0, levels=65
    )
    held = (history.memory + history.keyframe_ids.nbytes) / len(history.fronts)
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "a.h5"
        writing = _timed(lambda: save(history, path, replace=True), 2)
        reading = _timed(lambda: load(path), 2)
        size = path.stat().st_size / len(history.fronts)
    rows = len(history.fronts) / 1e6
    print(f"  {rows:.2f}e6 fronts: write {rows / writing:.2f}e6 rows/s, read {rows / reading:.2f}e6 rows/s")
    print(f"  {held:.0f} bytes a front in memory, {size:.0f} on disk")


def answers() -> None:
    """Lineage, statistics and pictures of a million fronts."""
    rng = np.random.default_rng(9)
    n = 50_000
    start = wk.Profile(np.sort(rng.random(n)) * n, rng.random(n + 1))
    history = wk.track(wk.burgers(), start, 2000.0, levels=65)
    walked = _timed(lambda: (lineage_of(history, strongest(history)), collision_kinds(history), decay(history)), 1)
    with tempfile.TemporaryDirectory() as folder:
        drawn = _timed(lambda: save_run_figure(history, f"{folder}/a.png"), 1)
        size = Path(folder, "a.png").stat().st_size / 1e6
    print(
        f"  {len(history.fronts)} fronts: lineage and statistics {walked:.2f} s, picture {drawn:.1f} s, {size:.2f} MB"
    )


def start_up() -> None:
    """Whole processes: help, and a small case."""
    command = [sys.executable, "-m", "wavekin.io"]
    helped = _timed(lambda: subprocess.run([*command, "--help"], check=True, stdout=subprocess.DEVNULL))
    with tempfile.TemporaryDirectory() as folder:
        out = ["-o", f"{folder}/a.h5", "--replace", "--quiet"]
        small = _timed(lambda: subprocess.run([*command, "run", "two_slugs", *out], check=True))
    print(f"  --help {helped:.2f} s, run of a small case {small:.2f} s")


PARTS: dict[str, Callable[[], None]] = {
    "floor": floor.main,
    "loops": loops,
    "scaling": scaling,
    "drift": drift,
    "store": store,
    "answers": answers,
    "start_up": start_up,
    "equal_error": equal_error.main,
}


def main(names: list[str]) -> None:
    """Print the parts asked for, or all."""
    print(f"{platform.platform()}, Python {platform.python_version()}, numpy {np.__version__}")
    for name in names or PARTS:
        print(f"== {name}: {(PARTS[name].__doc__ or '').splitlines()[0]}")
        PARTS[name]()
    print(f"peak memory {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 2**20:.2f} GiB")


if __name__ == "__main__":
    main(sys.argv[1:])
