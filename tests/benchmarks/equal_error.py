"""Time to the same L1 error of cell averages: front tracking against cell schemes.

The reference is front tracking on so many breakpoints that its proven bound is far below the errors compared,
or, for joined fans, on 16 times the breakpoints; the cell schemes never serve as their own reference.
"""

from __future__ import annotations

import time
from dataclasses import dataclass

import numpy as np
import wavekin as wk
from finite_volume import BURGERS, CellFlux, displacement, solve
from numpy.typing import NDArray

REFERENCE_LEVELS = 16_385
LEVELS = (33, 65, 129, 257, 513, 1025)
CELLS = {"godunov": (500, 1000, 2000, 4000, 8000), "limited": (500, 1000, 2000, 4000, 8000, 16_000)}
SCORING_CELLS = 500


@dataclass
class Problem:
    """One initial-value problem in both descriptions."""

    name: str
    law: wk.Law
    cells: CellFlux
    start: wk.Profile
    until: float
    window: tuple[float, float]


def problems() -> list[Problem]:
    """Return the two problems of the comparison; data on 1/256, so that they are breakpoints of every polygon."""
    rng = np.random.default_rng(40)
    jumps = np.sort(rng.random(40))
    s_shaped = wk.Profile(jumps, rng.integers(0, 33, 41) / 32.0)
    rng = np.random.default_rng(41)
    burgers = wk.Profile(np.sort(rng.random(40)), rng.integers(0, 33, 41) / 32.0)
    return [
        Problem("S-shaped, 40 jumps", wk.corey(viscosity_ratio=0.5), displacement(0.5), s_shaped, 0.5, (-0.5, 2.5)),
        Problem("Burgers, 40 jumps", wk.burgers(), BURGERS, burgers, 0.5, (-0.5, 2.5)),
    ]


def tracked(problem: Problem, levels: int) -> tuple[float, NDArray[np.float64]]:
    """Return the least time of three runs with answer, and the averages."""
    edges = np.linspace(*problem.window, SCORING_CELLS + 1)
    best = np.inf
    for _ in range(3):
        begin = time.perf_counter()
        history = wk.track(problem.law, problem.start, problem.until, levels=levels, loop="compiled", keyframes=0)
        answer = history.averages(edges, [problem.until])[0]
        best = min(best, time.perf_counter() - begin)
    return best, answer


def by_cells(problem: Problem, scheme: str, cells: int) -> tuple[float, NDArray[np.float64]]:
    """Return the time of one run of a cell scheme (compiled before) and its averages on the scoring cells."""
    edges = np.linspace(*problem.window, cells + 1)
    width = edges[1] - edges[0]
    start = wk.track(problem.law, problem.start, 1e-9, levels=33).averages(edges, [0.0], fans="steps")[0]
    solve(problem.cells, start[:64].copy(), width, 1e-6, scheme=scheme)
    begin = time.perf_counter()
    answer = solve(problem.cells, start, width, problem.until, scheme=scheme)
    took = time.perf_counter() - begin
    return took, np.asarray(answer).reshape(SCORING_CELLS, -1).mean(axis=1)


def time_at(error: float, results: list[tuple[float, float]]) -> tuple[float, bool]:
    """Return the time at which an error is reached, along the straight line in logarithms; True if extrapolated."""
    errors, times = np.log([r[0] for r in results]), np.log([r[1] for r in results])
    order = np.argsort(errors)
    inside = errors.min() <= np.log(error) <= errors.max()
    if inside:
        return float(np.exp(np.interp(np.log(error), errors[order], times[order]))), False
    slope, offset = np.polyfit(errors, times, 1)
    return float(np.exp(offset + slope * np.log(error))), True


def main(targets: tuple[float, ...] = (1e-3, 1e-4)) -> None:
    """Print errors, times and ratios."""
    for problem in problems():
        tracked(problem, 33)  # compiles
        _, reference = tracked(problem, REFERENCE_LEVELS)
        width = (problem.window[1] - problem.window[0]) / SCORING_CELLS
        print(problem.name)
        results: dict[str, list[tuple[float, float]]] = {}
        for levels in LEVELS:
            took, answer = tracked(problem, levels)
            results.setdefault("tracking", []).append((float(np.abs(answer - reference).sum() * width), took))
            print(f"  tracking  {levels:>6} levels  error {results['tracking'][-1][0]:9.2e}  {took:9.4f} s")
        for scheme, counts in CELLS.items():
            for cells in counts:
                took, answer = by_cells(problem, scheme, cells)
                results.setdefault(scheme, []).append((float(np.abs(answer - reference).sum() * width), took))
                print(f"  {scheme:<9} {cells:>6} cells   error {results[scheme][-1][0]:9.2e}  {took:9.4f} s")
        for target in targets:
            ours, _ = time_at(target, results["tracking"])
            for scheme in CELLS:
                theirs, guessed = time_at(target, results[scheme])
                note = " (extrapolated)" if guessed else ""
                print(f"  to error {target:g}: {scheme} {theirs:.3g} s{note}, tracking {ours:.3g} s", end="")
                print(f", ratio {theirs / ours:.3g}")


if __name__ == "__main__":
    main()
