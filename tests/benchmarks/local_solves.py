"""Rates of the compiled local solves. Run: python tests/benchmarks/local_solves.py"""

from __future__ import annotations

import time

import numpy as np
from numba import njit
from wavekin import systems
from wavekin.systems import compilation, cores
from wavekin.systems.gas_euler import solve_star
from wavekin.systems.system import System

local = cores.local


@njit
def stars(left, right, gamma):  # type: ignore[no-untyped-def]
    """Solve for the middle pressure of every pair; return a checksum."""
    total = 0.0
    for i in range(len(left)):
        p, u, _, _ = solve_star(
            left[i, 0], left[i, 1], left[i, 2], right[i, 0], right[i, 1], right[i, 2], gamma
        )  # fmt: skip
        total += p + u
    return total


@njit
def solves(parameters, left, right, room):  # type: ignore[no-untyped-def]
    """Solve every pair with all its waves, states and speeds; return how many waves there were."""
    n = left.shape[1]
    states, kinds = np.empty((room + 1, n)), np.empty(room, dtype=np.int64)
    families, speeds = np.empty(room, dtype=np.int64), np.empty((room, 2))
    waves = 0
    for i in range(len(left)):
        waves += local(parameters, left[i], right[i], states, kinds, families, speeds)
    return waves


def rate(run, count: int) -> float:  # type: ignore[no-untyped-def]
    """Return solves per second, the best of five after one call that compiles."""
    run()
    times = []
    for _ in range(5):
        begin = time.perf_counter()
        run()
        times.append(time.perf_counter() - begin)
    return count / min(times)


def gas_states(random: np.random.Generator, count: int) -> np.ndarray:
    """Return (rho, u, p) with densities and pressures over two decades and velocities about the sound speed."""
    return np.stack(
        [10.0 ** random.uniform(-1, 1, count), random.normal(0, 1, count), 10.0 ** random.uniform(-1, 1, count)], axis=1
    )


def samples(system: System, random: np.random.Generator, count: int) -> np.ndarray:
    """Return inner states of a system."""
    u = random.random((count, system.n))
    primitive = {
        "euler": lambda: gas_states(random, count),
        "polymer": lambda: u,
        "langmuir": lambda: 5.0 * u,
        "aw_rascle_zhang": lambda: 0.1 + u,
        "acoustics": lambda: 0.5 + u,
    }.get(system.name, lambda: np.stack([0.1 + 2 * u[:, 0], u[:, 1] - 0.5], axis=1))()
    return system.to_inner(system.from_primitive(primitive))


def main() -> None:
    """Print a line a system."""
    random = np.random.default_rng(1)
    count = 200_000
    gas = systems.euler()
    compilation.compilable(gas.parameters)
    left, right = gas_states(random, count), gas_states(random, count)
    print(f"euler, middle pressure only   {rate(lambda: stars(left, right, 1.4), count) / 1e6:6.2f} M/s")
    for system in (
        gas, systems.shallow_water(), systems.p_system(), systems.isentropic_gas(), systems.aw_rascle_zhang(),
        systems.acoustics(), systems.langmuir([2.0, 4.0, 7.0], [1.0, 0.5, 2.0]), systems.polymer(),
    ):  # fmt: skip
        compilation.compilable(system.parameters)
        a, b = samples(system, random, count), samples(system, random, count)
        room = system.most_waves or system.n
        best = rate(lambda a=a, b=b, s=system, r=room: solves(s.parameters, a, b, r), count)
        print(f"{system.name:<29} {best / 1e6:6.2f} M/s")


if __name__ == "__main__":
    main()
