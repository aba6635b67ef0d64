"""The store: equal histories, equal bytes, nothing lost."""

from __future__ import annotations

import hashlib
import os
from pathlib import Path

import h5py
import numpy as np
import pytest
import wavekin as wk
from wavekin.io import load, read_case, save
from wavekin.io.ready import copy_case, ready_case
from wavekin.io.store import written_beside


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
    os.symlink(tmp_path / "nowhere", tmp_path / "link.h5")
    with pytest.raises(wk.InputError, match="exists already"):
        save(history, tmp_path / "link.h5")
    assert sorted(p.name for p in tmp_path.iterdir()) == ["a.h5", "link.h5"]


def test_file_that_appears_while_another_is_written_is_kept(tmp_path: Path) -> None:
    with pytest.raises(wk.InputError, match="exists already"), written_beside(tmp_path / "a.txt") as temporary:
        temporary.write_text("late")
        (tmp_path / "a.txt").write_text("early")
    assert (tmp_path / "a.txt").read_text() == "early"
    assert [p.name for p in tmp_path.iterdir()] == ["a.txt"]


def test_tables_of_any_name_are_embedded_side_by_side(tmp_path: Path) -> None:
    folder = tmp_path / "cases"
    folder.mkdir()
    (tmp_path / "a.csv").write_text("u,f\n0,0\n1,0.5\n")
    (folder / "a.csv").write_text("x,u\n0,1\n1,0\n")
    text = '[law]\ntable = "../a.csv"\n[start]\ntable = "./a.csv"\n[run]\nuntil = 1.0\n'
    (folder / "case.toml").write_text(text)
    case = read_case(folder / "case.toml")
    save(case.track(), tmp_path / "a.h5", case=case)
    with h5py.File(tmp_path / "a.h5") as file:
        kept = {data.attrs["name"]: data[()].tobytes() for data in file["case/tables"].values()}
    assert kept == case.tables


def test_no_damage_by_chance_ends_otherwise_than_in_one_sentence(history: wk.History, tmp_path: Path) -> None:
    path = tmp_path / "a.h5"
    save(history, path)
    whole, rng = path.read_bytes(), np.random.default_rng(8)
    for attempt in range(80):
        data = bytearray(whole)
        reach = 6000 if attempt % 2 else len(data)
        for place in rng.integers(0, reach, 1 + attempt % 7):
            data[place] ^= 1 << rng.integers(8)
        path.write_bytes(data[: rng.integers(len(data))] if attempt % 5 == 0 else data)
        try:
            assert isinstance(wk.audit(load(path)), wk.Audit)
        except wk.InputError as error:
            assert "a.h5" in str(error) and "\n" not in str(error)


@pytest.mark.parametrize(
    "column, value",
    [
        ("fronts/born_at", 2**30), ("fronts/born_at", -7), ("fronts/ended_at", 2**30), ("fronts/departure", -1.0),
        ("fronts/departure", np.nan), ("fronts/left", 9.0), ("fronts/right", np.nan), ("fronts/speed", np.inf),
        ("fronts/birth_t", -1.0), ("fronts/kind", 200), ("fronts/opened", 2), ("collisions/fronts_out", 2**30),
        ("collisions/fronts_in", 0), ("collisions/t", np.nan), ("collisions/left", -5.0), ("levels/state", 2.0),
        ("levels/flux", np.nan), ("start/values", 7.0), ("keyframes/ids", 2**30), ("keyframes/first", -1),
        ("keyframes/t", 9.0),
    ],
)  # fmt: skip
def test_rows_that_point_nowhere_are_refused(history: wk.History, tmp_path: Path, column: str, value: float) -> None:
    save(history, tmp_path / "a.h5")
    with h5py.File(tmp_path / "a.h5", "a") as file:
        data = file[column][()]
        data[len(data) // 2] = value
        file[column][...] = data
    with pytest.raises(wk.InputError, match=r"a\.h5.*damaged"):
        load(tmp_path / "a.h5")


@pytest.mark.parametrize("column", ["fronts/left", "collisions/t", "levels/flux", "start/edges", "keyframes/first"])
@pytest.mark.parametrize("content", ["short", "text", "flat"])
def test_column_of_another_shape_is_refused(history: wk.History, tmp_path: Path, column: str, content: str) -> None:
    save(history, tmp_path / "a.h5")
    with h5py.File(tmp_path / "a.h5", "a") as file:
        data = file[column][()]
        del file[column]
        file[column] = {"short": data[:-2], "text": [b"x"] * len(data), "flat": np.stack([data, data])}[content]
    with pytest.raises(wk.InputError, match=r"a\.h5.*damaged"):
        load(tmp_path / "a.h5")


@pytest.mark.parametrize("damage", ["text", "truncated", "other", "version", "word", "missing", "column"])
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
            elif damage == "word":
                file.attrs["format_version"] = "new"
            else:
                del file["fronts/speed"]
    with pytest.raises(wk.InputError) as caught:
        load(path)
    expected = {
        "text": "no HDF5", "truncated": "truncated", "other": "no Wavekin history", "version": "99", "word": "new",
        "missing": "does not exist", "column": "damaged",
    }  # fmt: skip
    assert expected[damage] in str(caught.value) and "a.h5" in str(caught.value)
    assert "\n" not in str(caught.value)
