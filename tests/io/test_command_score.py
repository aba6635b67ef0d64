"""``wavekin score``: every kind of file, verdicts, one sentence for bad ones."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
from wavekin.io.command import main

CASE = '[law]\nname = "burgers"\n[start]\nedges = [0.0]\nvalues = [1.0, 0.0]\n[run]\nuntil = 1.0\nlevels = 2\n'


@pytest.fixture(scope="module")
def made(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("score")
    (folder / "step.toml").write_text(CASE)
    assert main(["run", str(folder / "step.toml"), "-o", str(folder / "step.h5"), "--quiet"]) == 0
    centres = -0.95 + 0.1 * np.arange(30)
    late = np.where(centres < 0.6, 1.0, 0.0)  # the shock is at 0.5: one cell too far right
    np.savez(folder / "late.npz", x=centres, u=late, t=1.0)
    (folder / "late.csv").write_text("x,u\n" + "".join(f"{x},{u}\n" for x, u in zip(centres, late, strict=True)))
    return folder


def test_own_data_sets_of_every_kind_score_zero(made: Path, capsys: pytest.CaptureFixture[str]) -> None:
    for ending in ("csv", "npz", "nc"):
        out = str(made / f"own.{ending}")
        assert main(["sample", str(made / "step.h5"), "--cells=-1:2:60", "--times", "0.5,1.0", "-o", out]) == 0
        assert main(["score", str(made / "step.h5"), out, "--json"]) == 0
        report = json.loads(capsys.readouterr().out)
        assert [part["t"] for part in report] == [0.5, 1.0]
        assert all(part["files"][0]["l1"]["value"] < 1e-14 for part in report)


@pytest.mark.parametrize("words", [["late.npz"], ["late.csv", "--time", "1.0"]])
def test_lag_of_a_cell_is_named(made: Path, capsys: pytest.CaptureFixture[str], words: list[str]) -> None:
    assert main(["score", str(made / "step.h5"), str(made / words[0]), *words[1:]]) == 0
    out = capsys.readouterr().out
    assert "1 cells too far right" in out and "smeared" not in out


def test_figure(made: Path) -> None:
    assert main(["score", str(made / "step.h5"), str(made / "late.npz"), "--figure", str(made / "f.png")]) == 0
    assert (made / "f.png").exists()
    assert main(["score", str(made / "step.h5"), str(made / "late.npz"), "--figure", str(made / "f.png")]) == 2


@pytest.mark.parametrize(
    "name, content, part",
    [
        ("a.csv", "x,v\n0,1\n1,1\n", "needs a column u"),
        ("a.csv", "x,u\n0,1\n1,nan\n", "finite"),
        ("a.csv", "x,u\n1,1\n0,1\n", "increase"),
        ("a.csv", "left,right,u\n0,1,1\n2,3,1\n", "without gaps"),
        ("a.csv", "x,u,t\n0,1,7\n1,1,7\n", "between 0 and 1.0"),
        ("a.dat", "x,u\n", ".csv, .npz or .nc"),
        ("a.npz", "no zip", "no readable NPZ"),
        ("a.nc", "no netcdf", "no readable netCDF"),
    ],
)
def test_bad_files_are_one_sentence(
    made: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str], name: str, content: str, part: str
) -> None:
    (tmp_path / name).write_text(content)
    time = [] if ",t\n" in content else ["--time", "1.0"]
    assert main(["score", str(made / "step.h5"), str(tmp_path / name), *time]) == 2
    err = capsys.readouterr().err
    assert part in err and name in err and err.count("\n") == 1


def test_file_of_another_case_is_warned_of(made: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (tmp_path / "other.toml").write_text(CASE.replace("1.0, 0.0]", "1.0, 0.5]"))
    assert main(["run", str(tmp_path / "other.toml"), "-o", str(tmp_path / "o.h5"), "--quiet"]) == 0
    out = str(tmp_path / "o.csv")
    assert main(["sample", str(tmp_path / "o.h5"), "--cells", "0:1:5", "--times", "1", "-o", out]) == 0
    assert main(["score", str(made / "step.h5"), out]) == 0
    assert "another case" in capsys.readouterr().err
