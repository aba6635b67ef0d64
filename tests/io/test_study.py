"""Studies: the same members on every scheduler, resumed, failures listed, opened by xarray."""

from __future__ import annotations

import hashlib
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import numpy as np
import pytest
import wavekin as wk
import xarray
from wavekin.io.command import main
from wavekin.io.study import member_values, read_study, run_batch, run_study

CASE = (
    '[law]\nname = "burgers"\n[start]\nedges = [0.0, 1.0]\nvalues = [0.0, 1.0, 0.0]\n[run]\nuntil = 2.0\nlevels = 17\n'
)
STUDY = """
title = "boxes"
licence = "CC0-1.0"
case = "box.toml"
members = 20
seed = 5
[vary]
"run.levels" = {list = [9, 17]}
"start.values" = {uniform = [0.0, 1.0], count = 3}
[keep]
cells = [-1.0, 3.0, 16]
times = [0.0, 2.0, 3]
[split]
train = 0.5
test = 0.5
"""


@pytest.fixture
def study(tmp_path: Path) -> Path:
    (tmp_path / "box.toml").write_text(CASE)
    (tmp_path / "study.toml").write_text(STUDY)
    return tmp_path / "study.toml"


def test_data_set_holds_what_each_member_gives_alone(study: Path) -> None:
    out = study.parent / "out.nc"
    assert main(["sweep", str(study), "-o", str(out), "--processes", "2", "--quiet"]) == 0
    with xarray.open_dataset(out, decode_timedelta=False) as data:
        assert data["u"].shape == (40, 3, 16) and int(data["failed"].sum()) == 0
        for member in (0, 7, 39):
            values = data["set_start_values"][member].to_numpy()
            levels = int(data["set_run_levels"][member])
            alone = wk.track(wk.burgers(), wk.Profile([0.0, 1.0], values), 2.0, levels=levels)
            expected = alone.averages(np.linspace(-1, 3, 17), [0.0, 1.0, 2.0])
            assert np.array_equal(data["u"][member].to_numpy(), expected)
            assert float(data["l1_bound"][member, 2]) == alone.error_bound(2.0)
        assert set(np.unique(data["split"])) == {0, 2} and data.attrs["licence"] == "CC0-1.0"
    assert sorted(p.name for p in study.parent.iterdir()) == [
        "box.toml", "out.md", "out.nc", "out.sha256", "study.toml",
    ]  # fmt: skip
    for line in (study.parent / "out.sha256").read_text().splitlines():
        digest, name = line.split()
        assert hashlib.sha256((study.parent / name).read_bytes()).hexdigest() == digest
    assert main(["sweep", str(study), "-o", str(out), "--quiet"]) == 2  # not replaced


def test_member_is_the_same_whatever_the_number_of_members(study: Path) -> None:
    few = read_study(study)
    study.write_text(STUDY.replace("members = 20", "members = 500"))
    many = read_study(study)
    assert [member_values(few, i) for i in range(40)] == [member_values(many, i) for i in range(40)]


def test_stopped_study_goes_on_and_ends_with_the_same_bytes(study: Path) -> None:
    known = read_study(study)
    with ThreadPoolExecutor(2) as executor:
        run_study(known, study.parent / "whole.nc", executor)
        folder = study.parent / "resumed.nc.members"
        folder.mkdir()
        (folder / "study.sha256").write_text(known.sha256)
        run_batch(known, list(range(16)), str(folder))
        before = next(folder.glob("batch-*")).stat().st_mtime_ns
        ran = []
        run_study(known, study.parent / "resumed.nc", executor, progress=ran.append)
    assert (before and ran == [32, 40]) or sorted(ran) == [24, 40]  # only 24 of 40 members were left to run
    assert (study.parent / "whole.nc").read_bytes() == (study.parent / "resumed.nc").read_bytes()


def test_failing_members_are_listed_and_the_rest_delivered(study: Path, capsys: pytest.CaptureFixture[str]) -> None:
    study.write_text(STUDY.replace('"run.levels" = {list = [9, 17]}', '"run.until" = {list = [2.0, -1.0]}'))
    assert main(["sweep", str(study), "-o", str(study.parent / "o.nc"), "--processes", "1"]) == 0
    out, err = capsys.readouterr()
    assert "20 of 40 members" in out and err.count("failed: ") == 20 and "above 0" in err
    assert "Members that failed" in (study.parent / "o.md").read_text()


@pytest.mark.parametrize(
    "old, new, part",
    [
        ("uniform = [0.0, 1.0]", "uniform = [0.0]", "vary.start.values.uniform"),
        ("uniform = [0.0, 1.0], count = 3", "count = 3", "exactly one of"),
        ('"run.levels"', '"run.level"', "did you mean levels?"),
        ('"run.levels"', '"title.x"', "no key of the case"),
        ("members = 20", "members = 0", "members"),
        ("seed = 5", "seeds = 5", "did you mean seed?"),
        ("cells = [-1.0, 3.0, 16]", "cells = [3.0, -1.0, 16]", "keep.cells"),
        ('case = "box.toml"', 'case = "none.toml"', "does not exist"),
    ],
)
def test_bad_study_is_one_sentence(
    study: Path, capsys: pytest.CaptureFixture[str], old: str, new: str, part: str
) -> None:
    (study.parent / "box.toml").write_text('title = "box"\n' + CASE)
    study.write_text(STUDY.replace(old, new))
    assert main(["sweep", str(study), "-o", str(study.parent / "o.nc")]) == 2
    err = capsys.readouterr().err
    assert part in err and err.count("\n") == 1
    assert not (study.parent / "o.nc").exists()


@pytest.mark.slow
def test_cluster_loses_nothing_when_a_worker_dies(study: Path) -> None:
    distributed = pytest.importorskip("distributed")
    known = read_study(study)
    with (
        distributed.LocalCluster(n_workers=2, threads_per_worker=1, dashboard_address=None) as cluster,
        distributed.Client(cluster) as client,
    ):
        killed = []

        def kill_once(done: int) -> None:
            if not killed:
                killed.append(next(iter(cluster.workers.values())))
                killed[0].process.process.kill()

        failures = run_study(known, study.parent / "dask.nc", client.get_executor(), progress=kill_once)
    assert failures == [] and killed
    with ThreadPoolExecutor(1) as executor:
        run_study(known, study.parent / "local.nc", executor)
    assert (study.parent / "dask.nc").read_bytes() == (study.parent / "local.nc").read_bytes()
