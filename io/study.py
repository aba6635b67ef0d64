"""Studies: one case varied many times, run on processes or on a cluster, kept as one data set.

Members are finished in small batches, each written whole to a folder beside the output; what is there already is
not run again, so a study that was stopped goes on where it was. The last step joins the batches.
"""

from __future__ import annotations

import copy
import hashlib
import itertools
import json
import tomllib
from collections.abc import Callable, Iterator
from concurrent.futures import Executor, as_completed
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from wavekin.errors import InputError
from wavekin.io.casefile import build_case, validate
from wavekin.io.store import written_beside
from wavekin.io.tables import read_bytes
from wavekin.version import __version__

#: Members that one task runs and one file of a batch holds.
BATCH = 16
SPLITS = ("train", "validation", "test")
DRAWS = ("uniform", "loguniform", "normal")


@dataclass(frozen=True)
class Study:
    """A study ready to run; plain data only, so that it can be sent to other processes."""

    path: str
    text: str
    content: dict[str, Any]
    case_text: str
    case_path: str
    tables: dict[str, bytes]
    combinations: list[dict[str, Any]]
    size: int

    @property
    def sha256(self) -> str:
        """SHA-256 over the texts of study and case and the tables."""
        digest = hashlib.sha256(self.text.encode() + b"\0" + self.case_text.encode())
        for name in sorted(self.tables):
            digest.update(b"\0" + name.encode() + b"\0" + self.tables[name])
        return digest.hexdigest()

    @property
    def cells(self) -> NDArray[np.float64]:
        """Edges of the cells averaged over."""
        low, high, count = self.content["keep"]["cells"]
        return np.linspace(low, high, int(count) + 1)

    @property
    def times(self) -> NDArray[np.float64]:
        """Times of the averages."""
        low, high, count = self.content["keep"]["times"]
        return np.linspace(low, high, int(count))


def read_study(path: str | Path) -> Study:
    """Read and check a study file and the case it varies.

    Raises
    ------
    InputError
        One sentence with file, key, value and mend for whatever cannot be used.
    """
    from wavekin.io.ready import ready_case

    path = Path(path)
    text = read_bytes(path).decode("utf-8-sig", "replace")
    try:
        content = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise InputError(f"is no valid TOML: {error}", file=str(path), mend="mend that line") from error
    try:
        validate(content, "study.schema.json")
        lists = {
            key: _values(key, way) for key, way in content.get("vary", {}).items() if "list" in way or "range" in way
        }
        for key, way in content.get("vary", {}).items():
            kinds = [kind for kind in ("list", "range", *DRAWS) if kind in way]
            if len(kinds) != 1:
                raise InputError(
                    "needs exactly one of list, range, uniform, loguniform, normal", key=f"vary.{key}", value=kinds,
                    mend="keep the one that is meant",
                )  # fmt: skip
        for key in ("cells", "times"):
            low, high, count = content["keep"][key]
            if not (low <= high and count >= 1 and count == int(count)) or (key == "cells" and low == high):
                raise InputError(
                    "must be [from, to, count]", key=f"keep.{key}", value=content["keep"][key], mend="mend it"
                )
    except InputError as error:
        raise error.located(str(path)) from error
    name = content["case"]
    found = path.parent / name
    if found.exists() or name.endswith(".toml"):
        from wavekin.io.casefile import read_case

        case = read_case(found)
    else:
        case = ready_case(name)
    combinations = [dict(zip(lists, values, strict=True)) for values in itertools.product(*lists.values())]
    size = len(combinations) * int(content.get("members", 1))
    study = Study(str(path), text, content, case.text, case.path, case.tables, combinations, size)
    member_case(study, 0)  # complains about keys that the case cannot have
    return study


def _values(key: str, way: dict[str, Any]) -> list[Any]:
    if "list" in way:
        return list(way["list"])
    low, high, count = way["range"]
    if count < 1 or count != int(count):
        raise InputError("must be [from, to, count]", key=f"vary.{key}.range", value=way["range"], mend="mend it")
    return np.linspace(low, high, int(count)).tolist()


def member_values(study: Study, member: int) -> tuple[dict[str, Any], str]:
    """Return what is set anew in a member, and its split label.

    Everything random comes from numpy's SeedSequence of the study's seed and the member's number, so member i is the
    same whatever the scheduler, the order or the number of members of each combination.
    """
    sequence = np.random.SeedSequence(int(study.content.get("seed", 0)), spawn_key=(member,))
    rng = np.random.default_rng(sequence)
    values = dict(study.combinations[member % len(study.combinations)])
    for key, way in study.content.get("vary", {}).items():
        kind = next((kind for kind in DRAWS if kind in way), None)
        if kind is None:
            continue
        low, high = way[kind]
        drawn = _drawn(rng, kind, low, high, way.get("count"))
        values[key] = np.sort(drawn).tolist() if way.get("sorted") else np.asarray(drawn).tolist()
    shares = study.content.get("split", {"train": 1.0})
    weights = np.array([float(shares.get(name, 0.0)) for name in SPLITS])
    label = SPLITS[int(np.searchsorted(np.cumsum(weights / weights.sum()), rng.random(), side="right").clip(0, 2))]
    return values, label


def _drawn(rng: np.random.Generator, kind: str, a: float, b: float, size: int | None) -> Any:
    """Return one number, or `size` of them, of a distribution."""
    if kind == "normal":
        return rng.normal(a, b, size)
    return rng.uniform(a, b, size) if kind == "uniform" else np.exp(rng.uniform(np.log(a), np.log(b), size))


def member_case(study: Study, member: int) -> Any:
    """Return the case of a member."""
    values, _ = member_values(study, member)
    content = copy.deepcopy(tomllib.loads(study.case_text))
    for key, value in values.items():
        *parents, last = key.split(".")
        place = content
        for parent in parents:
            place = place.setdefault(parent, {})
            if not isinstance(place, dict):
                raise InputError("is no key of the case", file=study.path, key=f"vary.{key}", mend="check the case")
        place[last] = value
    return build_case(content, study.case_text, f"member {member}", lambda name, key: study.tables[name])


def run_batch(study: Study, members: list[int], folder: str) -> str:
    """Run some members and write what is kept of them; return the file's name. Runs in any process."""
    cells, times = study.cells, study.times
    fans = study.content["keep"].get("fans", "joined")
    shape = (len(members), len(times))
    averages = np.full((*shape, len(cells) - 1), np.nan)
    bounds, reasons = np.full((2, *shape), np.nan), [""] * len(members)
    for k, member in enumerate(members):
        try:
            case = member_case(study, member)
            history = case.track()
            averages[k] = history.averages(cells, times, fans)
            bounds[0, k] = [history.error_bound(t) for t in times]
            bounds[1, k] = [history.cumulative_bound(t) for t in times]
            if "histories" in study.content["keep"]:
                _keep_history(study, member, history, case, Path(folder).parent)
        except InputError as error:  # a failing member is listed with its reason; the others go on
            reasons[k] = str(error)
    path = Path(folder) / f"batch-{members[0]:09d}-{members[-1]:09d}.npz"
    with written_beside(path, replace=True) as temporary, open(temporary, "wb") as file:
        np.savez(file, members=np.array(members), averages=averages, bounds=bounds, reasons=np.array(reasons))
    return path.name


def _keep_history(study: Study, member: int, history: Any, case: Any, beside: Path) -> None:
    from wavekin.io.store import save

    folder = beside / study.content["keep"]["histories"]
    folder.mkdir(exist_ok=True)
    save(history, folder / f"member-{member:09d}.h5", replace=True, case=case)


def run_study(
    study: Study,
    output: str | Path,
    executor: Executor,
    *,
    replace: bool = False,
    progress: Callable[[int], None] | None = None,
) -> list[tuple[int, str]]:
    """Run all members that are not there yet, join them into one netCDF-4 file, and return failures with reasons.

    Parameters
    ----------
    study : Study
    output : path
        Ending .nc; beside it ``OUTPUT.members/`` holds the batches until all are joined, and afterwards a data card
        (.md) and a manifest of SHA-256 sums (.sha256) stand there.
    executor : concurrent.futures.Executor
        Processes of this machine, or those of a cluster that sees the same folder.
    replace : bool
    progress : callable, optional
        Called with the number of members done.
    """
    output = Path(output)
    folder = output.with_name(output.name + ".members")
    folder.mkdir(exist_ok=True)
    stamp = folder / "study.sha256"
    if stamp.exists() and stamp.read_text() != study.sha256:
        raise InputError(
            "holds members of another study", file=str(folder), mend="choose another output or remove that folder"
        )
    stamp.write_text(study.sha256)
    batches = [list(range(i, min(i + BATCH, study.size))) for i in range(0, study.size, BATCH)]
    done = 0
    waiting = []
    for members in batches:
        if (folder / f"batch-{members[0]:09d}-{members[-1]:09d}.npz").exists():
            done += len(members)
        else:
            waiting.append(members)
    jobs = {executor.submit(run_batch, study, members, str(folder)): members for members in waiting}
    for job in as_completed(jobs):
        job.result()
        done += len(jobs[job])
        if progress:
            progress(done)
    failures = _join(study, folder, output, replace)
    for path in folder.iterdir():
        path.unlink()
    folder.rmdir()
    return failures


def _parts(folder: Path) -> Iterator[dict[str, NDArray]]:
    for path in sorted(folder.glob("batch-*.npz")):
        with np.load(path, allow_pickle=False) as data:
            yield {name: data[name] for name in data.files}


def _join(study: Study, folder: Path, output: Path, replace: bool) -> list[tuple[int, str]]:
    """Write the data set, its card and its manifest."""
    import h5netcdf

    cells, times = study.cells, study.times
    values = [member_values(study, member) for member in range(study.size)]
    failures: list[tuple[int, str]] = []
    with written_beside(output, replace) as temporary, h5netcdf.File(temporary, "w") as file:
        file.attrs.update(
            {
                "Conventions": "CF-1.11",
                "title": study.content.get("title", "Wavekin study"),
                "source": f"Wavekin {__version__}, front tracking",
                "licence": study.content.get("licence", "not stated"),
                "study_sha256": study.sha256,
                "study": study.text,
                "case": study.case_text,
                "seed": int(study.content.get("seed", 0)),
            }
        )
        file.dimensions = {"member": study.size, "time": len(times), "x": len(cells) - 1, "bounds": 2}
        for name, data in (("time", times), ("x", 0.5 * (cells[1:] + cells[:-1]))):
            file.create_variable(name, (name,), data=data)
        file.variables["x"].attrs["bounds"] = "x_bounds"
        file.create_variable("x_bounds", ("x", "bounds"), data=np.stack([cells[:-1], cells[1:]], axis=1))
        split = file.create_variable("split", ("member",), data=np.array([SPLITS.index(s) for _, s in values], "i1"))
        split.attrs.update({"flag_values": np.arange(3, dtype="i1"), "flag_meanings": " ".join(SPLITS)})
        _parameters(file, [v for v, _ in values])
        u = file.create_variable(
            "u",
            ("member", "time", "x"),
            "f8",
            chunks=(1, len(times), len(cells) - 1),
            compression="gzip",
            compression_opts=1,
            shuffle=True,
        )
        u.attrs.update({"long_name": "cell average of the state", "cell_methods": "x: mean time: point"})
        bounds = [
            file.create_variable(name, ("member", "time"), "f8", fillvalue=np.nan)
            for name in ("l1_bound", "cumulative_bound")
        ]
        failed = np.zeros(study.size, dtype="i1")
        for part in _parts(folder):
            at = slice(int(part["members"][0]), int(part["members"][-1]) + 1)
            u[at] = part["averages"]
            for variable, data in zip(bounds, part["bounds"], strict=True):
                variable[at] = data
            for member, reason in zip(part["members"].tolist(), part["reasons"].tolist(), strict=True):
                if reason:
                    failed[member] = 1
                    failures.append((member, reason))
        file.create_variable("failed", ("member",), data=failed)
    card = output.with_suffix(".md")
    card.write_text(_card(study, output.name, failures), encoding="utf-8")
    names = [output, card]
    sums = "".join(f"{hashlib.sha256(path.read_bytes()).hexdigest()}  {path.name}\n" for path in names)
    output.with_suffix(".sha256").write_text(sums)
    return failures


def _parameters(file: Any, values: list[dict[str, Any]]) -> None:
    """Write what was set anew: numbers as variables over members, lists of numbers with a dimension of their own."""
    for key in values[0]:
        column = [value[key] for value in values]
        name = "set_" + key.replace(".", "_")
        if all(isinstance(v, (int, float)) for v in column):
            file.create_variable(name, ("member",), data=np.array(column, dtype=float))
        elif all(isinstance(v, list) and len(v) == len(column[0]) for v in column):
            file.dimensions[name + "_entry"] = len(column[0])
            file.create_variable(name, ("member", name + "_entry"), data=np.array(column, dtype=float))
        else:
            file.attrs[name] = json.dumps(column)


def _card(study: Study, name: str, failures: list[tuple[int, str]]) -> str:
    """Return the data card in Markdown."""
    lines = [
        f"# {study.content.get('title', 'Wavekin study')}",
        "",
        f"* File: `{name}`, netCDF-4: u[member, time, x], cell averages with proven bounds",
        f"* Members: {study.size} ({len(failures)} failed), seed {study.content.get('seed', 0)}",
        f"* Made by: Wavekin {__version__}, front tracking; no numerical diffusion",
        f"* Licence: {study.content.get('licence', 'not stated')}",
        f"* Study SHA-256: {study.sha256}",
        "* `l1_bound` holds for the solution with stepped fans; `cumulative_bound` for any amount",
        "",
        "## Study",
        "```toml",
        study.text.strip(),
        "```",
        "## Case",
        "```toml",
        study.case_text.strip(),
        "```",
    ]
    if failures:
        lines += ["## Members that failed", *(f"* {member}: {reason}" for member, reason in failures)]
    return "\n".join(lines) + "\n"
