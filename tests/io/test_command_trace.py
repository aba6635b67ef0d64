"""``wavekin trace``: a published queue from case file to printed number; statistics; bad words."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from wavekin.io.command import main


@pytest.fixture(scope="module")
def closed_road(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """3000 veh/h at 50 veh/mi; the road closes at x = 0 (jam density 240 veh/mi) for a quarter of an hour."""
    folder = tmp_path_factory.mktemp("road")
    (folder / "flux.csv").write_text("u,f\n0,0\n50,3000\n240,0\n")
    (folder / "road.toml").write_text(
        '[law]\ntable = "flux.csv"\nreading = "polygon"\n[start]\nedges = [0.0]\nvalues = [50.0, 240.0]\n'
        "[run]\nuntil = 0.25\nlevels = 3\n"
    )
    assert main(["run", str(folder / "road.toml"), "-o", str(folder / "road.h5"), "--quiet"]) == 0
    return folder


def test_published_queue_of_a_closed_road(closed_road: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Published: the queue grows at -15.7895 mph and is 3.95 mi long after 15 minutes (homework page on I-90, seen)."""
    assert main(["trace", str(closed_road / "road.h5"), "--json"]) == 0
    told = json.loads(capsys.readouterr().out)
    assert told["speed"] == pytest.approx(-15.7895, abs=5e-5)
    assert told["speed"] * 0.25 == pytest.approx(-3.95, abs=5e-3)
    out = closed_road / "p.csv"
    words = ["--points=-3.94,-3.95", "--times", "0.25", "-o", str(out)]
    assert main(["sample", str(closed_road / "road.h5"), *words]) == 0
    assert [line.split(",")[-1] for line in out.read_text().splitlines()[-2:]] == ["240.0", "50.0"]


def test_story_and_statistics_as_text(closed_road: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["trace", str(closed_road / "road.h5"), "--near", "0.1", "-1.5"]) == 0
    assert "front 0" in capsys.readouterr().out
    assert main(["trace", str(closed_road / "road.h5"), "--statistics"]) == 0
    assert "0 collisions" in capsys.readouterr().out


@pytest.mark.parametrize("words, part", [(["--front", "7"], "row"), (["--near", "9", "0"], "between 0 and 0.25")])
def test_bad_words_are_one_sentence(
    closed_road: Path, capsys: pytest.CaptureFixture[str], words: list[str], part: str
) -> None:
    assert main(["trace", str(closed_road / "road.h5"), *words]) == 2
    err = capsys.readouterr().err
    assert part in err and err.count("\n") == 1
