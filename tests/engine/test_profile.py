"""Profiles and projections."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
import wavekin as wk
from scipy.integrate import quad


@pytest.mark.parametrize(
    "edges, values, words",
    [
        ([0.0, np.nan], [0.0, 1.0, 2.0], ["edges[1]", "finite", "nan"]),
        ([0.0, 0.0], [0.0, 1.0, 2.0], ["edges[1]", "increase", "0.0"]),
        ([1.0, 0.0], [0.0, 1.0, 2.0], ["edges[1]", "increase"]),
        ([0.0, 1.0], [0.0, 1.0, np.inf], ["values[2]", "finite", "inf"]),
        ([0.0, 1.0], [0.0], ["values", "3 states", "got 1"]),
        ([], [], ["values", "at least one"]),
        ([[0.0]], [0.0, 1.0], ["edges", "list"]),
        (["a"], [0.0, 1.0], ["edges", "numbers"]),
    ],
)
def test_bad_data_get_one_sentence(edges: list, values: list, words: list[str]) -> None:
    with pytest.raises(wk.InputError) as caught:
        wk.Profile(edges, values)
    for word in words:
        assert word in str(caught.value)
    assert "\n" not in str(caught.value)


def test_value_at_an_edge_is_the_right_one_and_a_ring_closes() -> None:
    line = wk.Profile([0.0, 1.0], [5.0, 6.0, 7.0])
    assert line([-1.0, 0.0, 0.5, 1.0, 2.0]).tolist() == [5.0, 6.0, 6.0, 7.0, 7.0]
    ring = wk.Profile([0.25, 0.75], [1.0, 2.0])
    assert ring([0.0, 0.25, 0.5, 0.8]).tolist() == [2.0, 1.0, 1.0, 2.0]


@pytest.mark.parametrize("share", [1e-1, 1e-2, 1e-3])
def test_projection_keeps_its_promise(share: float) -> None:
    """The defect is checked by adaptive quadrature with the jump named (scipy)."""

    def wave(x: np.ndarray) -> np.ndarray:
        return np.sin(2 * np.pi * x) + (x > 0.377)

    profile = wk.project(wave, on=(0.0, 1.0), outside=(0.0, 1.0), share=share)
    corners = np.concatenate([[0.0], profile.edges, [0.377, 1.0]])
    corners = np.unique(corners[(corners >= 0.0) & (corners <= 1.0)])
    true = sum(
        quad(lambda x: abs(float(wave(np.array(x))) - float(profile(x))), a, b)[0]
        for a, b in itertools.pairwise(corners)
    )
    assert true <= profile.defect <= share
    assert profile.defect <= 1.3 * true
    whole = quad(lambda x: float(wave(np.array(x))), 0, 1, points=[0.377])[0]
    means = np.dot(np.diff(corners), profile(0.5 * (corners[:-1] + corners[1:])))
    assert abs(means - whole) <= profile.cumulative_defect


def test_projection_refuses_what_is_not_finite() -> None:
    with pytest.raises(wk.InputError, match="finite"):
        wk.project(lambda x: 1.0 / (x - x), on=(0.0, 1.0), share=0.1)
