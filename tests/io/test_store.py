"""The store: equal histories, equal bytes, nothing lost."""

from __future__ import annotations

import hashlib
from pathlib import Path

import h5py
import numpy as np
import pytest
import wavekin as wk
from wavekin.io import load, read_case, save
from wavekin.io.ready import copy_case, ready_case


@pytest.fixture(scope="module")
def history() -> wk.History:
    rng = np.random.default_rng(4)
    start = wk.Profile(np.sort(rng.random(60)), rng.random(60))
    return wk.track(wk.corey(viscosity_ratio=0.5), start, 2.0, levels=33, ring=(0.0, 1.0))


def test_load_gives_back_an_equal_history(history: wk.History, tmp_path: Path) -> None:
    save(history, tmp_path / "a.h5")
    again = load(tmp_path / "a.h5")
    assert again == history
    assert again.law is not None and again.law.name == "corey"
    for t in (0.0, 0.7, 2.0):
        assert again.error_bound(t) == history.error_bound(t)
        assert np.array_equal(again.at(t).edges, history.at(t).edges)
    assert wk.audit(again).holds


def test_law_from_python_functions_loses_only_the_law(tmp_path: Path) -> None:
    law = wk.Law(lambda u: np.sin(u), (0.0, 3.0))
    made = wk.track(law, wk.Profile([0.0], [3.0, 0.0]), 1.0, levels=33)
    save(made, tmp_path / "a.h5")
    again = load(tmp_path / "a.h5")
    assert again.law is None and again == made and again.error_bound(1.0) == made.error_bound(1.0)
    assert wk.audit(again).holds


def test_same_case_gives_the_same_bytes(tmp_path: Path) -> None:
    digests = []
    for name in ("a.h5", "b.h5"):
        case = ready_case("two_slugs")
        save(case.track(), tmp_path / name, case=case)
        digests.append(hashlib.sha256((tmp_path / name).read_bytes()).hexdigest())
    assert digests[0] == digests[1]


def test_history_can_be_run_again_from_itself(tmp_path: Path) -> None:
    copy_case("ring_decay", tmp_path)
    case = read_case(tmp_path / "ring_decay.toml")
    made = case.track()
    save(made, tmp_path / "a.h5", case=case)
    rebuilt = tmp_path / "rebuilt"
    rebuilt.mkdir()
    with h5py.File(tmp_path / "a.h5") as file:
        (rebuilt / "case.toml").write_bytes(file["case/text"][()].tobytes())
        for name, data in file["case/tables"].items():
            (rebuilt / name).write_bytes(data[()].tobytes())
            assert data.attrs["sha256"] == hashlib.sha256(data[()].tobytes()).hexdigest()
    again = read_case(rebuilt / "case.toml")
    assert again.sha256 == case.sha256
    assert again.track() == made


def test_every_column_says_its_unit_and_what_it_is(tmp_path: Path) -> None:
    case = ready_case("signal_queue")
    save(case.track(), tmp_path / "a.h5", case=case)
    with h5py.File(tmp_path / "a.h5") as file:
        for group in ("fronts", "collisions", "levels", "start", "keyframes"):
            for column in file[group].values():
                assert column.attrs["description"] and "units" in column.attrs
        assert file["fronts/left"].attrs["units"] == "veh/km"
        assert file["fronts/speed"].attrs["units"] == "km/h"


def test_existing_file_is_kept_and_failure_leaves_nothing(history: wk.History, tmp_path: Path) -> None:
    path = tmp_path / "a.h5"
    path.write_text("precious")
    with pytest.raises(wk.InputError, match="exists already"):
        save(history, path)
    assert path.read_text() == "precious"
    save(history, path, replace=True)
    assert load(path) == history
    with pytest.raises(wk.InputError, match="does not exist"):
        save(history, tmp_path / "no" / "a.h5")
    broken = wk.track(wk.burgers(), wk.Profile([0.0], [1.0, 0.0]), 1.0, levels=2)
    broken.run["bad"] = object()  # cannot be written
    with pytest.raises(TypeError):
        save(broken, tmp_path / "b.h5")
    assert sorted(p.name for p in tmp_path.iterdir()) == ["a.h5"]


@pytest.mark.parametrize("damage", ["text", "truncated", "other", "version", "missing", "column"])
def test_damaged_file_gets_one_sentence(history: wk.History, tmp_path: Path, damage: str) -> None:
    path = tmp_path / "a.h5"
    save(history, path)
    if damage == "text":
        path.write_text("no history at all")
    elif damage == "truncated":
        path.write_bytes(path.read_bytes()[: path.stat().st_size // 2])
    elif damage == "missing":
        path.unlink()
    else:
        with h5py.File(path, "a") as file:
            if damage == "other":
                file.attrs["format"] = "something else"
            elif damage == "version":
                file.attrs["format_version"] = 99
            else:
                del file["fronts/speed"]
    with pytest.raises(wk.InputError) as caught:
        load(path)
    expected = {
        "text": "no HDF5", "truncated": "truncated", "other": "no Wavekin history", "version": "99",
        "missing": "does not exist", "column": "damaged",
    }  # fmt: skip
    assert expected[damage] in str(caught.value) and "a.h5" in str(caught.value)
    assert "\n" not in str(caught.value)
