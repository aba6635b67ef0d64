"""Solutions of other codes, read from CSV, NPZ or netCDF."""

from __future__ import annotations

import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from wavekin.errors import InputError
from wavekin.io.ranges import edges_of
from wavekin.io.tables import read_bytes, read_columns


@dataclass(frozen=True)
class Candidate:
    """Cell averages of another code at one time; `sha256` is the case's hash where the file states one."""

    file: str
    t: float
    cells: NDArray[np.float64]
    values: NDArray[np.float64]
    sha256: str = ""


def read_candidates(path: str | Path, time: float | None) -> list[Candidate]:
    """Return the candidates of a file, one for each time in it.

    CSV: columns ``x,u`` (x the cell centres) or ``left,right,u``, with a column ``t`` or one `time` for all. NPZ:
    ``u`` or ``averages`` of shape (cells,) or (times, cells); ``cells`` or ``edges`` (edges) or ``x`` (centres);
    ``times``, ``time`` or ``t``. netCDF: ``u(time, x)`` or ``u(x)`` with ``x`` and, better, ``x_bounds``.

    Raises
    ------
    InputError
        One sentence for whatever cannot be used.
    """
    path = Path(path)
    readers = {".csv": _from_csv, ".npz": _from_npz, ".nc": _from_netcdf}
    reader = readers.get(path.suffix.lower())
    if reader is None:
        raise InputError("must end in .csv, .npz or .nc", file=str(path), value=path.suffix, mend="convert it")
    data = read_bytes(path)
    found = reader(path, data, time)
    for one in found:
        _check(one)
    return found


def _check(one: Candidate) -> None:
    bad = np.flatnonzero(~np.isfinite(one.values))
    if bad.size:
        raise InputError(
            "must be finite", file=one.file, key=f"u of cell {bad[0]}", value=float(one.values[bad[0]]), mend="mend it"
        )
    if len(one.cells) != len(one.values) + 1:
        raise InputError(
            f"has {len(one.values)} values for {len(one.cells) - 1} cells", file=one.file, key="u",
            mend="give one value a cell",
        )  # fmt: skip
    if not np.all(np.isfinite(one.cells)) or np.any(np.diff(one.cells) <= 0.0):
        raise InputError("must increase strictly", file=one.file, key="x", mend="sort the cells and drop doubles")


def _need_time(time: float | None, file: str) -> float:
    if time is None:
        raise InputError("states no time", file=file, key="t", mend="add a column t or give --time T")
    return float(time)


def _from_csv(path: Path, data: bytes, time: float | None) -> list[Candidate]:
    file = str(path)
    lines = data.splitlines(keepends=True)
    about = {
        line[1:].split(b":", 1)[0].strip(): line.split(b":", 1)[1]
        for line in lines
        if line[:1] == b"#" and b":" in line
    }
    body = b"".join(line for line in lines if not line.startswith(b"#"))
    header = [cell.strip() for cell in body.decode("utf-8-sig", "replace").split("\n", 1)[0].split(",")]
    names = ("left", "right", "u") if "left" in header else ("x", "u")
    columns = [np.array(column) for column in read_columns(data, names, file).columns]
    times = np.array(read_columns(data, ("t",), file).columns[0]) if "t" in header else None
    moments = [_need_time(time, file)] if times is None else sorted(set(times.tolist()))
    if times is not None and time is not None:
        moments = [moment for moment in moments if moment == time]
        if not moments:
            raise InputError("has no rows at that time", file=file, key="t", value=time, mend="choose a time it holds")
    sha = json.loads(about[b"case_sha256"]) if b"case_sha256" in about else ""
    found = []
    for moment in moments:
        rows = np.ones(len(columns[0]), dtype=bool) if times is None else times == moment
        parts = [column[rows] for column in columns]
        if len(names) == 3:
            gaps = np.flatnonzero(np.abs(parts[0][1:] - parts[1][:-1]) > 1e-9 * np.abs(parts[1][-1] - parts[0][0]))
            if gaps.size:
                raise InputError(
                    "must be cells without gaps", file=file, key=f"row {gaps[0] + 2}",
                    value=float(parts[0][gaps[0] + 1]),
                    mend="start each cell where the last one ends",
                )  # fmt: skip
            cells = np.append(parts[0], parts[1][-1])
        else:
            if len(parts[0]) < 2:
                raise InputError("needs two cells or more", file=file, key="x", value=len(parts[0]), mend="add rows")
            cells = edges_of(parts[0])
        found.append(Candidate(file, moment, cells, parts[-1], sha))
    return found


def _from_npz(path: Path, data: bytes, time: float | None) -> list[Candidate]:
    import io
    import zipfile

    try:
        with np.load(io.BytesIO(data), allow_pickle=False) as archive:
            known = {name: np.asarray(archive[name]) for name in archive.files}
    except (ValueError, OSError, zipfile.BadZipFile, KeyError) as error:
        raise InputError(
            "is no readable NPZ file", file=str(path), value=str(error)[:50], mend="write it again"
        ) from error
    sha = ""
    if "about" in known:
        sha = str(json.loads(str(known["about"])).get("case_sha256", ""))
    return _arrays(str(path), known, time, sha)


def _from_netcdf(path: Path, data: bytes, time: float | None) -> list[Candidate]:
    import h5netcdf

    try:
        with h5netcdf.File(path, "r") as file:
            known = {name: np.asarray(file.variables[name][...]) for name in file.variables}
            sha = str(file.attrs.get("case_sha256", ""))
    except (OSError, ValueError, KeyError) as error:
        raise InputError(
            "is no readable netCDF-4 file", file=str(path), value=str(error)[:50], mend="convert it"
        ) from error
    if "x_bounds" in known:
        bounds = known["x_bounds"]
        known["edges"] = np.append(bounds[:, 0], bounds[-1, 1])
    return _arrays(str(path), known, time, sha)


def _arrays(file: str, known: dict[str, Any], time: float | None, sha: str) -> list[Candidate]:
    """Return candidates from named arrays."""
    u = next((known[name] for name in ("u", "averages") if name in known), None)
    if u is None:
        raise InputError("holds no u", file=file, value=sorted(known), mend="name the averages u")
    edges = next((known[name] for name in ("edges", "cells") if name in known), None)
    if edges is None:
        if "x" not in known:
            raise InputError("holds no cells", file=file, value=sorted(known), mend="add edges, or centres named x")
        edges = edges_of(np.asarray(known["x"], dtype=float))
    u = np.atleast_2d(np.asarray(u, dtype=float))
    times = next((known[name] for name in ("times", "time", "t") if name in known), None)
    moments = np.atleast_1d(np.asarray(_need_time(time, file) if times is None else times, dtype=float))
    if len(moments) != len(u):
        raise InputError(
            f"has {len(u)} rows of u for {len(moments)} times", file=file, key="u", mend="give one row a time"
        )
    found = [
        Candidate(file, float(t), np.asarray(edges, dtype=float), row, sha) for t, row in zip(moments, u, strict=True)
    ]
    if time is not None:
        found = [one for one in found if one.t == time]
        if not found:
            raise InputError(
                "has no values at that time", file=file, key="t", value=time, mend="choose a time it holds"
            )
    return found
