"""``wavekin draw``: every kind of picture of a line and of a ring."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import wavekin as wk
from wavekin.io import save
from wavekin.io.command import main


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("draw")
    line = wk.track(wk.corey(viscosity_ratio=0.5), wk.Profile([0.0, 0.3], [0.0, 1.0, 0.2]), 1.0, levels=17)
    ring = wk.track(wk.burgers(), wk.Profile([0.1, 0.6], [1.0, -0.5]), 3.0, levels=9, ring=(0.0, 1.0))
    save(line, folder / "line.h5")
    save(ring, folder / "ring.h5")
    return folder


@pytest.mark.parametrize("name", ["line", "ring"])
@pytest.mark.parametrize(
    "words",
    [
        ["--kind", "xt", "--fill", "--characteristics"],
        ["--kind", "profiles", "--times", "0,0.5,1"],
        ["--kind", "stacked"],
        ["--kind", "traces", "--places", "0.2,0.7"],
        ["--kind", "functionals"],
        ["--kind", "ancestry"],
    ],
    ids=lambda words: words[1],
)
def test_pictures_are_made_and_never_replaced(folder: Path, tmp_path: Path, name: str, words: list[str]) -> None:
    out = tmp_path / "a.png"
    assert main(["draw", str(folder / f"{name}.h5"), *words, "-o", str(out)]) == 0
    made = out.read_bytes()
    assert made.startswith(b"\x89PNG") and len(made) > 5000
    assert main(["draw", str(folder / f"{name}.h5"), *words, "-o", str(out)]) == 2
    assert out.read_bytes() == made


def test_animation_is_a_gif_with_its_frames(folder: Path, tmp_path: Path) -> None:
    from PIL import Image

    out = tmp_path / "a.gif"
    assert main(["draw", str(folder / "line.h5"), "--kind", "animation", "--frames", "5", "-o", str(out)]) == 0
    with Image.open(out) as picture:
        assert picture.n_frames == 5


@pytest.mark.parametrize(
    "words, part",
    [
        (["--kind", "traces"], "--places"),
        (["--kind", "ancestry", "--front", "99999"], "row"),
        (["--kind", "animation"], ".gif"),
        (["--kind", "animation", "--frames", "0"], "2 to 1000"),
        (["--kind", "profiles", "--times", "9"], "between 0 and"),
    ],
)
def test_bad_words_are_one_sentence(
    folder: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str], words: list[str], part: str
) -> None:
    assert main(["draw", str(folder / "line.h5"), *words, "-o", str(tmp_path / "a.png")]) == 2
    err = capsys.readouterr().err
    assert part in err and err.count("\n") == 1
    assert not list(tmp_path.iterdir())


@pytest.mark.slow
def test_pictures_of_a_million_fronts_stay_below_5_megabytes(tmp_path: Path) -> None:
    rng = np.random.default_rng(9)
    n = 50_000
    history = wk.track(wk.burgers(), wk.Profile(np.sort(rng.random(n)) * n, rng.random(n + 1)), 2000.0, levels=65)
    assert len(history.fronts) > 1_000_000
    save(history, tmp_path / "a.h5")
    for ending in ("png", "pdf"):
        assert main(["draw", str(tmp_path / "a.h5"), "-o", str(tmp_path / f"a.{ending}")]) == 0
        assert (tmp_path / f"a.{ending}").stat().st_size < 5_000_000


def test_notebooks_show_a_diagram_and_escape_names() -> None:
    law = wk.Law(lambda u: 0.5 * u * u, (-2.0, 2.0), inflections=(), name="<b>")
    shown = wk.track(law, wk.Profile([0.0, 1.0], [0.0, 1.0, 0.0]), 4.0, levels=17)._repr_html_()
    assert shown.count("<path") == 2 and "&lt;b&gt;" in shown and "proven L1 bound" in shown
