"""Data sets of cell averages, points and traces: CSV, NPZ, and netCDF-4 after the CF conventions."""

from __future__ import annotations

import csv
import json
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray
from wavekin.errors import InputError
from wavekin.io.store import written_beside
from wavekin.version import __version__

if TYPE_CHECKING:
    from wavekin.history import History

FORMATS = (".csv", ".npz", ".nc")
#: Averages held in memory at a time.
BLOCK_VALUES = 4_000_000


def check_ending(path: str | Path) -> str:
    """Return a data set's ending, or raise InputError for one that cannot be written."""
    ending = Path(path).suffix.lower()
    if ending not in FORMATS:
        raise InputError("must end in .csv, .npz or .nc", file=str(path), value=ending, mend="choose one of these")
    return ending


def provenance(history: History, words: dict[str, Any], fans: str = "joined") -> dict[str, str]:
    """Return what every data set says about itself."""
    law = history.law
    return {
        "title": str(words.get("title", "")) or "Wavekin data set",
        "source": f"Wavekin {__version__}, front tracking",
        "law": law.name if law is not None else str(words.get("law_name", "")),
        "law_formula": law.formula if law is not None else str(words.get("law_formula", "")),
        "law_source": law.source if law is not None else str(words.get("law_source", "")),
        "case_sha256": str(words.get("sha256", "")),
        "fans": fans,
        "comment": str(words.get("caution", "")),
        "bounds_apply_to": "the solution with stepped fans; joined fans are second-order accurate",
    }


def save_averages(
    history: History,
    path: str | Path,
    cells: NDArray[np.float64],
    times: NDArray[np.float64],
    *,
    fans: str = "joined",
    words: dict[str, Any] | None = None,
    replace: bool = False,
    progress: Callable[[int], None] | None = None,
) -> None:
    """Write cell averages with their bounds, in blocks of times that bound the memory.

    Parameters
    ----------
    history : History
    path : path
        Ending .csv (long table t,left,right,u), .npz or .nc.
    cells : ndarray, shape (n + 1,)
    times : ndarray, shape (k,)
    fans : {"joined", "steps"}
    words : dict, optional
        What `wavekin.io.store.read_words` returns.
    replace : bool
    progress : callable, optional
        Called with the number of times written so far.

    Raises
    ------
    InputError
        For cells, times or a path that cannot be used.
    """
    writer = {".csv": _write_csv, ".npz": _write_npz, ".nc": _write_netcdf}[check_ending(path)]
    per_block = max(1, BLOCK_VALUES // max(len(cells) - 1, 1))
    blocks = [times[i : i + per_block] for i in range(0, len(times), per_block)]
    history.averages(cells, times[:1], fans)  # complains before a file is begun
    for t in times:
        history.cumulative_bound(t)
    with written_beside(path, replace) as temporary:
        writer(history, temporary, cells, blocks, fans, provenance(history, words or {}, fans), progress)


def _bounds(history: History, times: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    return (
        np.array([history.error_bound(t) for t in times]),
        np.array([history.cumulative_bound(t) for t in times]),
    )


def _write_csv(history, path, cells, blocks, fans, about, progress) -> None:  # type: ignore[no-untyped-def]
    with open(path, "w", newline="", encoding="utf-8") as file:
        for key, value in about.items():
            file.write(f"# {key}: {json.dumps(value, ensure_ascii=False)}\n")
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(["t", "left", "right", "u", "l1_bound", "cumulative_bound"])
        done = 0
        for times in blocks:
            values = history.averages(cells, times, fans)
            for t, l1, cumulative, row in zip(times, *_bounds(history, times), values, strict=True):
                tail = (repr(float(l1)), repr(float(cumulative)))
                head = repr(float(t))
                writer.writerows(
                    (head, repr(a), repr(b), repr(u), *tail)
                    for a, b, u in zip(cells[:-1].tolist(), cells[1:].tolist(), row.tolist(), strict=True)
                )
            done += len(times)
            if progress:
                progress(done)


def _write_npz(history, path, cells, blocks, fans, about, progress) -> None:  # type: ignore[no-untyped-def]
    import zipfile

    times = np.concatenate(blocks)
    l1, cumulative = _bounds(history, times)
    small = {
        "cells": cells,
        "times": times,
        "l1_bound": l1,
        "cumulative_bound": cumulative,
        "about": np.array(json.dumps(about)),
    }
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, array in small.items():
            with archive.open(zipfile.ZipInfo(f"{name}.npy"), "w") as entry:
                np.lib.format.write_array(entry, np.asarray(array), allow_pickle=False)
        with archive.open(zipfile.ZipInfo("averages.npy"), "w", force_zip64=True) as entry:
            header = {"descr": "<f8", "fortran_order": False, "shape": (len(times), len(cells) - 1)}
            np.lib.format.write_array_header_1_0(entry, header)
            done = 0
            for block in blocks:
                entry.write(np.ascontiguousarray(history.averages(cells, block, fans), dtype="<f8").tobytes())
                done += len(block)
                if progress:
                    progress(done)


def _write_netcdf(history, path, cells, blocks, fans, about, progress) -> None:  # type: ignore[no-untyped-def]
    import h5netcdf

    units = history.law.units if history.law is not None else None
    x_unit, t_unit, u_unit = (units.x, units.t, units.state) if units else ("1", "1", "1")
    x_unit, t_unit, u_unit = (unit if unit != "-" else "1" for unit in (x_unit, t_unit, u_unit))
    times = np.concatenate(blocks)
    with h5netcdf.File(path, "w") as file:
        file.attrs.update({"Conventions": "CF-1.11", **about})
        file.dimensions = {"time": len(times), "x": len(cells) - 1, "bounds": 2}
        x = _variable(file, "x", ("x",), 0.5 * (cells[:-1] + cells[1:]), x_unit, "centre of the cell")
        x.attrs.update({"axis": "X", "bounds": "x_bounds"})
        file.create_variable("x_bounds", ("x", "bounds"), data=np.stack([cells[:-1], cells[1:]], axis=1))
        t = _variable(file, "time", ("time",), times, t_unit, "time since the start of the run")
        t.attrs["axis"] = "T"
        l1, cumulative = _bounds(history, times)
        _variable(file, "l1_bound", ("time",), l1, f"{u_unit} {x_unit}", "proven bound of the L1 error, stepped fans")
        _variable(
            file, "cumulative_bound", ("time",), cumulative, f"{u_unit} {x_unit}",
            "proven bound of the error of any cumulative amount",
        )  # fmt: skip
        u = file.create_variable(
            "u", ("time", "x"), "f8", compression="gzip", compression_opts=1, shuffle=True,
            chunks=(1, min(len(cells) - 1, 1 << 16)),
        )  # fmt: skip
        label = units.state_label if units else "state"
        u.attrs.update({"units": u_unit, "long_name": label, "cell_methods": "x: mean time: point"})
        done = 0
        for block in blocks:
            u[done : done + len(block)] = history.averages(cells, block, fans)
            done += len(block)
            if progress:
                progress(done)


def _variable(file: Any, name: str, dimensions: tuple[str, ...], data: NDArray, unit: str, text: str) -> Any:
    variable = file.create_variable(name, dimensions, data=data)
    variable.attrs.update({"units": unit, "long_name": text})
    return variable


def save_rows(
    path: str | Path, header: list[str], columns: list[NDArray], about: dict[str, str], replace: bool = False
) -> None:
    """Write columns of equal length as CSV (with provenance lines that start with #) or NPZ."""
    ending = check_ending(path)
    if ending == ".nc":
        raise InputError(
            "is for cell averages", file=str(path), value=ending, mend="write points and traces to .csv or .npz"
        )
    with written_beside(path, replace) as temporary:
        if ending == ".npz":
            with open(temporary, "wb") as file:
                arrays: dict[str, Any] = dict(zip(header, columns, strict=True))
                np.savez_compressed(file, **arrays, about=np.array(json.dumps(about)))
            return
        with open(temporary, "w", newline="", encoding="utf-8") as text:
            for key, value in about.items():
                text.write(f"# {key}: {json.dumps(value, ensure_ascii=False)}\n")
            writer = csv.writer(text, lineterminator="\n")
            writer.writerow(header)
            writer.writerows(zip(*([repr(v) for v in column.tolist()] for column in columns), strict=True))
