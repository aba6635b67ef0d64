"""Figures: kinds told apart, rings cut at the seam, all formats."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import wavekin as wk
from wavekin.io.figures import STROKES, save_run_figure, segments


def test_kinds_differ_in_width_or_dashes_and_not_in_colour_alone() -> None:
    looks = [(width, str(dashes)) for _, width, dashes in STROKES.values()]
    assert len(set(looks)) == len(looks)


def test_fronts_of_a_ring_are_cut_at_its_seam_and_keep_their_length() -> None:
    history = wk.track(wk.burgers(), wk.Profile([0.1, 0.6], [1.0, -0.5]), 7.3, levels=9, ring=(0.0, 1.0))
    rows = np.arange(len(history.fronts))
    lines = segments(history, rows)
    assert lines[:, :, 0].min() >= -1e-12 and lines[:, :, 0].max() <= 1.0 + 1e-12
    ends = np.minimum(history.fronts["death_t"], history.until)
    ways = np.abs(history.fronts["speed"]) * (ends - history.fronts["birth_t"])
    assert np.abs(lines[:, 1, 0] - lines[:, 0, 0]).sum() == pytest.approx(ways.sum(), rel=1e-12)
    assert (lines[:, 1, 1] - lines[:, 0, 1]).sum() == pytest.approx((ends - history.fronts["birth_t"]).sum(), rel=1e-12)


@pytest.mark.parametrize("ending, magic", [(".png", b"\x89PNG"), (".svg", b"<?xml"), (".pdf", b"%PDF")])
def test_picture_is_drawn_the_same_each_time(tmp_path: Path, ending: str, magic: bytes) -> None:
    history = wk.track(wk.burgers(), wk.Profile([0.0, 1.0], [0.0, 1.0, 0.0]), 4.0, levels=9)
    for name in ("a", "b"):
        save_run_figure(history, tmp_path / f"{name}{ending}", title="<box> & $co", caution="careful")
    first = (tmp_path / f"a{ending}").read_bytes()
    assert first.startswith(magic)
    assert first == (tmp_path / f"b{ending}").read_bytes()


def test_picture_without_any_front(tmp_path: Path) -> None:
    save_run_figure(wk.track(wk.burgers(), wk.Profile([], [0.5]), 1.0), tmp_path / "a.png")
    assert (tmp_path / "a.png").exists()
