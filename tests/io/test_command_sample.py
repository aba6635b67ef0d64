"""``wavekin sample``: files of every kind, opened by others."""

from __future__ import annotations

import csv
import json
from pathlib import Path

import numpy as np
import pytest
import xarray
from wavekin.io import load
from wavekin.io.command import main


@pytest.fixture(scope="module")
def made(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("sample")
    (folder / "welge.toml").write_text(
        'title = "Welge"\ncaution = "invented"\n[law]\nname = "corey"\nviscosity_ratio = 0.3333333333333333\n'
        "[start]\nedges = [0.0]\nvalues = [1.0, 0.0]\n[run]\nuntil = 1.0\nerror = 1e-3\n"
    )
    assert main(["run", str(folder / "welge.toml"), "-o", str(folder / "welge.h5"), "--quiet"]) == 0
    return folder


def test_netcdf_is_opened_by_xarray_with_its_conventions(made: Path) -> None:
    out = made / "a.nc"
    assert main(["sample", str(made / "welge.h5"), "--cells", "0:2:50", "--times", "0:1:5", "-o", str(out)]) == 0
    history = load(made / "welge.h5")
    with xarray.open_dataset(out, decode_timedelta=False) as data:
        assert data.attrs["Conventions"].startswith("CF-")
        assert data["u"].attrs["cell_methods"] == "x: mean time: point"
        assert data["x"].attrs["bounds"] == "x_bounds" and data["x_bounds"].shape == (50, 2)
        assert len(data.attrs["case_sha256"]) == 64 and data.attrs["law"] == "corey"
        assert float(data["l1_bound"][-1]) == history.error_bound(1.0)
        expected = history.averages(np.linspace(0, 2, 51), np.linspace(0, 1, 5))
        assert np.array_equal(data["u"].to_numpy(), expected)


def test_csv_and_npz_hold_the_same(made: Path) -> None:
    for name in ("a.csv", "a.npz"):
        words = ["sample", str(made / "welge.h5"), "--cells", "0:2:10", "--times", "0.5,1.0", "-o", str(made / name)]
        assert main(words) == 0
        assert main(words) == 2  # not overwritten
    lines = [line for line in (made / "a.csv").read_text().splitlines() if not line.startswith("#")]
    rows = list(csv.DictReader(lines))
    with np.load(made / "a.npz") as data:
        assert [float(row["u"]) for row in rows] == data["averages"].ravel().tolist()
        assert json.loads(str(data["about"]))["law"] == "corey"
        assert data["l1_bound"].shape == (2,)


def test_breakthrough_through_the_command_line(made: Path) -> None:
    """Pore volumes at breakthrough 2/3 for M = 1/3 (tangent construction of Welge 1952, closed form)."""
    out = made / "trace.csv"
    assert main(["sample", str(made / "welge.h5"), "--traces", "1.0", "-o", str(out)]) == 0
    rows = list(csv.DictReader(line for line in out.read_text().splitlines() if not line.startswith("#")))
    assert float(rows[0]["state"]) == 0.0
    assert float(rows[1]["t"]) == pytest.approx(2.0 / 3.0, rel=1e-5)
    assert float(rows[1]["state"]) == pytest.approx(0.5, abs=0.01)


def test_points_and_files_of_cells(made: Path) -> None:
    (made / "cells.csv").write_text("centre\n0.25\n0.75\n1.25\n")
    assert (
        main(
            [
                "sample",
                str(made / "welge.h5"),
                "--cells",
                str(made / "cells.csv"),
                "--times",
                "1",
                "-o",
                str(made / "c.csv"),
            ]
        )
        == 0
    )
    assert "0.5,1.0," in (made / "c.csv").read_text()
    assert main(["sample", str(made / "welge.h5"), "--points", "0:1:3", "--times", "1", "-o", str(made / "p.csv")]) == 0


@pytest.mark.parametrize(
    "words, part",
    [
        (["--cells", "0:1:0", "--times", "1"], "COUNT above 0"),
        (["--cells", "1:0:5", "--times", "1"], "FROM below TO"),
        (["--cells", "none.csv", "--times", "1"], "does not exist"),
        (["--cells", "0:1:5"], "--times"),
        (["--cells", "0:1:5", "--times", "2"], "between 0 and 1.0"),
        (["--cells", "0:1:5", "--times", "a"], "must be numbers"),
        (["--points", "x", "--times", "1"], "must be numbers"),
        (["--traces", "nan"], "finite"),
    ],
)
def test_bad_words_are_one_sentence(
    made: Path, capsys: pytest.CaptureFixture[str], words: list[str], part: str
) -> None:
    assert main(["sample", str(made / "welge.h5"), *words, "-o", str(made / "bad.csv")]) == 2
    err = capsys.readouterr().err
    assert part in err and err.count("\n") == 1
    assert not (made / "bad.csv").exists()


@pytest.mark.slow
def test_a_thousand_times_a_hundred_thousand_cells_stay_below_a_gibibyte(made: Path, tmp_path: Path) -> None:
    import subprocess
    import sys

    code = (
        "import resource, sys\nfrom wavekin.io.command import main\n"
        f"assert main(['sample', {str(made / 'welge.h5')!r}, '--cells', '0:2:100000', '--times', '0:1:1000',"
        f" '-o', {str(tmp_path / 'big.npz')!r}, '--quiet']) == 0\n"
        "assert resource.getrusage(resource.RUSAGE_SELF).ru_maxrss < 2**20, 'over 1 GiB'\n"
    )
    subprocess.run([sys.executable, "-c", code], check=True)


def test_arrival_and_stored_amount(made: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Breakthrough at 2/3 pore volumes and mean saturation 2/3 behind the front at x = 1 (Welge 1952, closed form)."""
    assert main(["sample", str(made / "welge.h5"), "--arrival", "1.0", "0.25"]) == 0
    assert float(capsys.readouterr().out) == pytest.approx(2.0 / 3.0, rel=1e-5)
    out = made / "stored.csv"
    words = ["sample", str(made / "welge.h5"), "--stored", "0", "1", "--times", "0,0.6666666", "-o", str(out)]
    assert main(words) == 0
    rows = list(csv.DictReader(line for line in out.read_text().splitlines() if not line.startswith("#")))
    assert float(rows[1]["stored"]) == pytest.approx(2.0 / 3.0, abs=float(rows[1]["bound"]) + 1e-6)
    assert (
        main(["sample", str(made / "welge.h5"), "--stored", "1", "0", "--times", "0", "-o", str(made / "x.csv")]) == 2
    )
