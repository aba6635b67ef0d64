"""Piecewise-constant functions of x, and the projection of a given function onto one."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from wavekin.errors import InputError

#: Points at which each cell of a projection is sampled; the midpoint rule on them integrates |function - mean|.
SAMPLES_PER_CELL = 16
#: The midpoint rule above is within 1 % for a function that is monotone over the cell; the defect is raised by this.
DEFECT_MARGIN = 1.02
#: Projections stop at this many cells.
MAX_CELLS = 2_000_000


@dataclass(frozen=True, eq=False)
class Profile:
    """A piecewise-constant function of x.

    Parameters
    ----------
    edges : array_like, shape (n,)
        Places of the jumps in units of x, finite and strictly increasing.
    values : array_like, shape (n + 1,) on the open line, (n,) on a ring
        The states; for a system of m equations one more axis of length m. On the line ``values[i]`` holds
        left of ``edges[i]`` and the last one right of all edges. On a ring ``values[i]`` holds from
        ``edges[i]`` to the next edge, the last one through the seam to ``edges[0]``.

    defect : float
        L1 distance to the function that the profile stands for (unit of state times unit of x).
    cumulative_defect : float
        Largest difference between the cumulative integrals of the two (same unit).

    Raises
    ------
    InputError
        Where the edges are not finite and increasing, the values are not finite, or the counts do not fit.
    """

    edges: NDArray[np.float64]
    values: NDArray[np.float64]
    defect: float
    cumulative_defect: float

    def __init__(
        self, edges: ArrayLike, values: ArrayLike, *, defect: float = 0.0, cumulative_defect: float = 0.0
    ) -> None:
        object.__setattr__(self, "edges", _numbers(edges, "edges"))
        object.__setattr__(self, "values", _numbers(values, "values"))
        object.__setattr__(self, "defect", float(defect))
        object.__setattr__(self, "cumulative_defect", float(cumulative_defect))
        self._check()

    def _check(self) -> None:
        edges, values = self.edges, self.values
        if edges.ndim != 1:
            raise InputError("must be a list of numbers", key="edges", value=edges.shape, mend="give one number a jump")
        if len(values) == 0:
            raise InputError("must hold at least one state", key="values", value=[], mend="give edges + 1 states")
        bad = np.flatnonzero(~np.isfinite(edges))
        if bad.size:
            raise InputError("must be finite", key=f"edges[{bad[0]}]", value=float(edges[bad[0]]), mend="give a number")
        bad = np.flatnonzero(~np.isfinite(values).reshape(len(values), -1).all(axis=1))
        if bad.size:
            raise InputError(
                "must be finite", key=f"values[{bad[0]}]", value=values[bad[0]].tolist(), mend="give a number"
            )
        bad = np.flatnonzero(np.diff(edges) <= 0.0)
        if bad.size:
            k = int(bad[0])
            raise InputError(
                "must increase strictly",
                key=f"edges[{k + 1}]",
                value=float(edges[k + 1]),
                mend=f"sort the edges and drop doubles (edges[{k}] is {float(edges[k])!r})",
            )
        if len(values) not in (len(edges), len(edges) + 1):
            raise InputError(
                f"must hold {len(edges) + 1} states for {len(edges)} edges on a line, {len(edges)} on a ring",
                key="values",
                value=len(values),
                mend="give one state for each piece",
            )

    def __call__(self, x: ArrayLike) -> NDArray[np.float64]:
        """Return the states at `x`, shape of `x`; at an edge the state on its right. Cost O(log n) a point."""
        index = np.searchsorted(self.edges, np.asarray(x, dtype=float), side="right")
        if len(self.values) == len(self.edges):
            index -= 1  # on a ring the piece before the first edge is the last one: index -1
        return self.values[index]

    def __repr__(self) -> str:
        return f"Profile({len(self.edges)} edges, {len(self.values)} values)"

    def without_zero_jumps(self, ring: bool = False) -> Profile:
        """Return the same function with the edges of zero strength left out (on a ring one edge stays)."""
        edges, values = self.edges, self.values
        if len(edges) == 0:
            return self
        before = np.roll(values, 1, axis=0) if ring else values[:-1]
        after = values if ring else values[1:]
        keep = (before != after).reshape(len(edges), -1).any(axis=1)
        if ring:
            if not keep.any():
                keep[0] = True
            kept = values[keep]
        else:
            kept = values[np.concatenate(([True], keep))]
        return Profile(edges[keep], kept, defect=self.defect, cumulative_defect=self.cumulative_defect)


def _numbers(data: ArrayLike, key: str) -> NDArray[np.float64]:
    """Return a read-only float copy of `data`."""
    try:
        array = np.array(data, dtype=float)
    except (TypeError, ValueError) as error:
        raise InputError("must be a list of numbers", key=key, value=data, mend="give plain numbers") from error
    if array.ndim == 0:
        raise InputError("must be a list of numbers", key=key, value=data, mend="put it in a list")
    array.setflags(write=False)
    return array


def project(
    function: Callable[[NDArray[np.float64]], NDArray[np.float64]],
    *,
    on: tuple[float, float],
    outside: tuple[float, float] | None = None,
    share: float,
) -> Profile:
    """Project a function of x onto cell means, with cells small where it changes.

    Cells are halved until the L1 distance between function and means is at most `share`; a jump is enclosed
    by ever smaller cells, so that it is located to within the share.

    Parameters
    ----------
    function : callable
        Vectorised: places, shape (k,), to states, shape (k,).
    on : tuple of float
        The interval that is projected.
    outside : tuple of float, optional
        States left and right of the interval on the open line; None on a ring.
    share : float
        L1 distance (unit of state times unit of x) that the projection may have.

    Returns
    -------
    Profile
        n + 1 values with `outside`, n without. Its `defect` is the L1 distance reached, by the midpoint rule on
        16 points a cell, raised by 2 %; its `cumulative_defect` is half the largest defect of a cell, since
        the means keep the integral of every cell.

    Raises
    ------
    InputError
        Where the interval is empty, the function is not finite on it, or the share cannot be reached.
    """
    a, b = float(on[0]), float(on[1])
    if not (np.isfinite(a) and np.isfinite(b) and a < b):
        raise InputError("must be two finite places in order", key="on", value=[a, b], mend="give on = [from, to]")
    if not share > 0.0:
        raise InputError("must be above 0", key="share", value=share, mend="give the projection a share of the budget")
    edges = np.linspace(a, b, 65)
    means, defects = _cell_means(function, edges[:-1], edges[1:])
    while defects.sum() > share:
        split = defects > 0.5 * share / len(defects)
        middles = 0.5 * (edges[:-1] + edges[1:])
        split &= (middles > edges[:-1]) & (middles < edges[1:])
        if len(defects) + split.sum() > MAX_CELLS or not split.any():
            raise InputError(
                f"cannot be projected to within {share:.3g} with {MAX_CELLS} cells",
                key="formula",
                value=float(defects.sum()),
                mend="raise the error budget",
            )
        left, right = edges[:-1][split], edges[1:][split]
        middle = middles[split]
        new_means, new_defects = _cell_means(
            function, np.stack([left, middle], 1).ravel(), np.stack([middle, right], 1).ravel()
        )
        counts = np.where(split, 2, 1)
        first = np.cumsum(counts) - counts
        means_next, defects_next = np.empty(counts.sum()), np.empty(counts.sum())
        means_next[first], defects_next[first] = means, defects
        for half in (0, 1):
            means_next[first[split] + half] = new_means[half::2]
            defects_next[first[split] + half] = new_defects[half::2]
        means, defects = means_next, defects_next
        edges = np.sort(np.concatenate([edges, middle]))
    known = {"defect": float(defects.sum()), "cumulative_defect": 0.5 * float(defects.max())}
    if outside is None:
        return Profile(edges[:-1], means, **known).without_zero_jumps(ring=True)
    return Profile(edges, np.concatenate([[outside[0]], means, [outside[1]]]), **known).without_zero_jumps()


def _cell_means(
    function: Callable[[NDArray[np.float64]], NDArray[np.float64]],
    left: NDArray[np.float64],
    right: NDArray[np.float64],
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the mean of `function` over each cell and its L1 distance from that mean, both shape (cells,)."""
    places = left[:, None] + (right - left)[:, None] * ((np.arange(SAMPLES_PER_CELL) + 0.5) / SAMPLES_PER_CELL)
    with np.errstate(all="ignore"):
        samples = np.broadcast_to(np.asarray(function(places.ravel()), dtype=float), places.size).reshape(places.shape)
    bad = np.argwhere(~np.isfinite(samples))
    if bad.size:
        x = float(places[tuple(bad[0])])
        raise InputError(
            f"must be finite, and is not at x = {x:.6g}",
            key="formula",
            value=float(samples[tuple(bad[0])]),
            mend="change the formula or the interval",
        )
    means = samples.mean(axis=1)
    return means, DEFECT_MARGIN * np.abs(samples - means[:, None]).mean(axis=1) * (right - left)
