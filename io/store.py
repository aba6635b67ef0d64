"""Histories in HDF5: plain columns that h5py alone can read, the same bytes for the same case."""

from __future__ import annotations

import contextlib
import hashlib
import json
import os
import tempfile
from collections.abc import Iterable, Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from wavekin.errors import InputError
from wavekin.version import __version__

if TYPE_CHECKING:
    import h5py
    from wavekin.history import History
    from wavekin.io.casefile import Case

FORMAT = "wavekin history"
FORMAT_VERSION = 1
#: Rows of a column that are compressed together.
CHUNK = 1 << 16
SUFFIX = ".part"

#: What h5py and the reading of its content raise where bytes are wrong.
DAMAGE = (KeyError, OSError, ValueError, TypeError, IndexError, AttributeError, OverflowError, RuntimeError)

SCALARS = ("until", "initial_defect", "initial_cumulative_defect", "flux_gap")


@contextlib.contextmanager
def written_beside(path: str | Path, replace: bool = False) -> Iterator[Path]:
    """Give a temporary path beside `path`; it takes that name when the block ends well and vanishes when not.

    Raises
    ------
    InputError
        Where the file exists and `replace` is not set, or the folder cannot be written to.
    """
    path = Path(path)
    check_writable(path, replace)
    temporary = None
    try:
        handle, name = tempfile.mkstemp(prefix=f".{path.name[:80]}.", suffix=SUFFIX, dir=path.parent)
        os.close(handle)
        temporary = Path(name)
        yield temporary
        mask = os.umask(0)
        os.umask(mask)
        temporary.chmod(0o666 & ~mask)
        check_writable(path, replace)  # somebody else may have put a file there in the meantime
        os.replace(temporary, path)
    except OSError as error:
        raise InputError(
            f"cannot be written ({error.strerror or error})", file=str(path), mend="free space or choose another place"
        ) from error
    finally:
        if temporary is not None:
            temporary.unlink(missing_ok=True)


def check_writable(path: str | Path, replace: bool = False, inputs: Iterable[str | Path] = ()) -> None:
    """Raise InputError where a result could not be put at `path`; called before long work starts.

    Whatever `replace` says, devices and the like are left alone, and so are the `inputs` of the work.
    """
    path = Path(path)
    try:
        _check_place(path, replace)
        taken = any(path.samefile(name) for name in inputs if path.exists() and os.path.exists(name))
    except (OSError, ValueError) as error:
        if isinstance(error, InputError):
            raise
        reason = error.strerror if isinstance(error, OSError) else error
        raise InputError(f"cannot be written ({reason})", file=str(path), mend="choose another name") from error
    if taken:
        raise InputError("is what this command reads", file=str(path), mend="choose another name for the result")


def _check_place(path: Path, replace: bool) -> None:
    """Raise InputError for a place that is taken, missing or closed, OSError for one that cannot be named."""
    if path.is_dir():
        raise InputError("is a folder", file=str(path), mend="give the name of a file in it")
    if path.exists() and not path.is_file():
        raise InputError("is a device or the like", file=str(path), mend="give the name of an ordinary file")
    if os.path.lexists(path) and not replace:
        raise InputError("exists already", file=str(path), mend="choose another name or ask for it with --replace")
    if not path.parent.is_dir():
        raise InputError("is in a folder that does not exist", file=str(path), mend="make the folder first")
    if not os.access(path.parent, os.W_OK | os.X_OK):
        raise InputError("is in a folder that cannot be written to", file=str(path), mend="choose another folder")


def save(history: History, path: str | Path, *, replace: bool = False, case: Case | None = None) -> None:
    """Write a history to HDF5.

    Parameters
    ----------
    history : History
    path : path
        Written beside its final name and renamed when whole.
    replace : bool
        Whether a file of that name may be replaced.
    case : Case, optional
        Embedded word for word with its tables, so that the run can be repeated from the file alone.

    Raises
    ------
    InputError
        Where the file exists or cannot be written.
    """
    import h5py

    with (
        written_beside(path, replace) as temporary,
        h5py.File(temporary, "w", libver=("v110", "v110"), track_order=False) as file,
    ):
        _write(file, history, case)


def _write(file: h5py.File, history: History, case: Case | None) -> None:
    from wavekin.records import COLLISION_COLUMNS, FRONT_COLUMNS

    law = history.law
    units = law.units if law is not None else None
    at_end = {"bound": history.error_bound(history.until), "cumulative_bound": history.cumulative_bound(history.until)}
    file.attrs.update(
        {
            "format": FORMAT,
            "format_version": FORMAT_VERSION,
            "program_version": __version__,
            "title": case.title if case else "",
            "caution": case.caution if case else "",
            "law": json.dumps(law.spec if law is not None else None, sort_keys=True),
            "law_name": law.name if law is not None else "",
            "law_formula": law.formula if law is not None else "",
            "law_source": law.source if law is not None else "",
            "units": json.dumps(vars(units) if units else None, sort_keys=True),
            "ring": np.array(history.ring if history.ring else [], dtype=float),
            "run": json.dumps(history.run, sort_keys=True),
            "budget": float(history.run.get("budget") or np.nan),
            "start_defect": history.start.defect,
            "start_cumulative_defect": history.start.cumulative_defect,
            **{name: getattr(history, name) for name in SCALARS},
            **at_end,
        }
    )
    known = {"": "", "t": "", "x": "", "state": "", "flux": ""}
    if units:
        known |= {"t": units.t, "x": units.x, "state": units.state, "flux": units.flux}
        known |= {"speed": f"{units.x}/{units.t}", "state*speed": f"{units.state} {units.x}/{units.t}"}
    for name, rows, columns in (
        ("fronts", history.fronts, FRONT_COLUMNS),
        ("collisions", history.collisions, COLLISION_COLUMNS),
    ):
        group = file.create_group(name)
        for column, (_, unit, text) in columns.items():
            _column(group, column, rows[column], known.get(unit, unit), text)
    levels = file.create_group("levels")
    _column(levels, "state", history.levels, known["state"], "breakpoints of the polygonal flux")
    _column(levels, "flux", history.level_fluxes, known["flux"], "flux at each breakpoint")
    _column(levels, "smooth", history.smooth.astype(np.uint8), "", "1 where the true flux has no kink")
    start = file.create_group("start")
    _column(start, "edges", history.start.edges, known["x"], "places of the jumps of the data that were tracked")
    _column(start, "values", history.start.values, known["state"], "states between them")
    frames = file.create_group("keyframes")
    _column(frames, "t", history.keyframe_times, known["t"], "times at which the fronts alive are listed")
    _column(frames, "first", history.keyframe_starts, "", "where each list begins in ids; one more entry than times")
    _column(frames, "ids", history.keyframe_ids, "", "rows of the fronts alive, in order of place")
    if case is not None:
        _embed(file.create_group("case"), case)


def _column(group: h5py.Group, name: str, data: np.ndarray, unit: str, text: str) -> None:
    """Write one column, compressed where it is long."""
    data = np.ascontiguousarray(data)
    options: dict[str, Any] = {"track_times": False}
    if data.size > 256:
        options |= {"chunks": (min(len(data), CHUNK), *data.shape[1:]), "compression": "gzip", "compression_opts": 1}
        options["shuffle"] = True
    dataset = group.create_dataset(name, data=data, **options)
    dataset.attrs["units"], dataset.attrs["description"] = unit, text


def _embed(group: h5py.Group, case: Case) -> None:
    """Put the case's words and tables into the file."""
    group.attrs["sha256"] = case.sha256
    group.attrs["file"] = Path(case.path).name
    for key in ("scenario", "source"):
        group.attrs[key] = getattr(case, key)
    _bytes(group, "text", case.text.encode(), "bytes of the case file")
    tables = group.create_group("tables") if case.tables else group
    for name, data in case.tables.items():
        key = name.replace("/", "_")  # a slash would make a group, and a dot or two would lead elsewhere
        while key in (".", "..", "") or key in tables:
            key += "_"
        _bytes(tables, key, data, "bytes of a table that the case names")
        tables[key].attrs["name"] = name


def _bytes(group: h5py.Group, name: str, data: bytes, text: str) -> None:
    """Write bytes as they are, with their SHA-256."""
    dataset = group.create_dataset(name, data=np.frombuffer(data, dtype=np.uint8), track_times=False)
    dataset.attrs["sha256"], dataset.attrs["description"] = hashlib.sha256(data).hexdigest(), text


@contextlib.contextmanager
def opened(path: str | Path) -> Iterator[h5py.File]:
    """Open a history file for reading and check what it is.

    Raises
    ------
    InputError
        Where it does not exist, is no HDF5, is truncated, holds something else or is of another version.
    """
    import h5py

    path = Path(path)
    if not os.path.isfile(path):
        raise InputError("does not exist", file=str(path), mend="check the path, or make it with wavekin run")
    try:
        file = h5py.File(path, "r")
    except OSError as error:
        truncated = "truncated" in str(error)
        rule = "is truncated" if truncated else "is no HDF5 file"
        raise InputError(
            rule, file=str(path), mend="run the case again" if truncated else "give a file made by wavekin run"
        ) from error
    with file:
        try:
            _check_format(file, path)
            yield file
        except DAMAGE as error:
            if isinstance(error, InputError) and error.file:
                raise
            key = error.key if isinstance(error, InputError) else ""
            reason = error.rule if isinstance(error, InputError) else str(error).strip("'\"") or type(error).__name__
            raise InputError(f"is damaged ({reason})", file=str(path), key=key, mend="run the case again") from error


def _check_format(file: h5py.File, path: Path) -> None:
    """Raise InputError for a file that is no history, or one of another version."""
    kind, version = file.attrs.get("format"), file.attrs.get("format_version")
    if not isinstance(kind, str) or kind != FORMAT:
        raise InputError(
            "is no Wavekin history", file=str(path), key="format", value=kind, mend="give one made by wavekin run"
        )
    if not np.isscalar(version) or version != FORMAT_VERSION:
        raise InputError(
            f"must be format version {FORMAT_VERSION}", file=str(path), key="format_version",
            value=version.item() if isinstance(version, np.generic) else version,
            mend=f"read it with the program version that wrote it ({file.attrs.get('program_version')})",
        )  # fmt: skip


def load(path: str | Path) -> History:
    """Read a history back, equal to the one saved bit for bit.

    Raises
    ------
    InputError
        As `opened`, and where the rows do not fit one another (`wavekin.io.soundness`).
    """
    from wavekin.history import History
    from wavekin.io.soundness import check_sound
    from wavekin.laws import law_from_spec
    from wavekin.profile import Profile
    from wavekin.records import COLLISION, FRONT

    with opened(path) as file:
        attrs = file.attrs
        spec = json.loads(attrs["law"])
        try:
            law = law_from_spec(spec) if spec else None
        except InputError as error:  # perhaps a law that a later version knows
            raise error.located(str(path), f"law {error.key}".strip()) from error
        ring = attrs["ring"]
        defects = {"defect": attrs["start_defect"], "cumulative_defect": attrs["start_cumulative_defect"]}
        history = History(
            fronts=_rows(file["fronts"], FRONT),
            collisions=_rows(file["collisions"], COLLISION),
            start=Profile(_numbers(file["start"], "edges"), _numbers(file["start"], "values"), **defects),
            ring=(float(ring[0]), float(ring[1])) if len(ring) else None,
            levels=_numbers(file["levels"], "state"),
            level_fluxes=_numbers(file["levels"], "flux"),
            smooth=_numbers(file["levels"], "smooth").astype(bool),
            law=law,
            run=json.loads(attrs["run"]),
            keyframe_times=_numbers(file["keyframes"], "t"),
            keyframe_starts=_numbers(file["keyframes"], "first", "iu"),
            keyframe_ids=_numbers(file["keyframes"], "ids", "iu"),
            until=float(attrs["until"]),
            initial_defect=float(attrs["initial_defect"]),
            initial_cumulative_defect=float(attrs["initial_cumulative_defect"]),
            flux_gap=float(attrs["flux_gap"]),
        )
        check_sound(history)
        return history


def _numbers(group: h5py.Group, name: str, kinds: str = "fiu") -> np.ndarray:
    """Return a column; raise ValueError where it is none of numbers of these kinds."""
    column = group[name][()]
    if not isinstance(column, np.ndarray) or column.ndim != 1 or column.dtype.kind not in kinds:
        raise ValueError(f"{group.name}/{name} is no column of numbers")
    return column


def _rows(group: h5py.Group, dtype: np.dtype) -> np.ndarray:
    """Return columns as records."""
    columns = list(dtype.names or ())
    rows = np.zeros(len(group[columns[0]]), dtype)
    for name in columns:
        column = _numbers(group, name, "fiu" if dtype[name].kind == "f" else "iu")
        if len(column) != len(rows):
            raise ValueError(f"{group.name}/{name} has {len(column)} rows, others have {len(rows)}")
        rows[name] = column
    return rows


def read_words(path: str | Path) -> dict[str, Any]:
    """Return the words of a history file: title, caution, law, units, hash and text of the case."""
    with opened(path) as file:
        attrs = file.attrs
        words = {key: str(attrs[key]) for key in ("title", "caution", "law_name", "law_formula", "law_source")}
        words |= dict.fromkeys(("scenario", "source", "sha256", "case_text"), "")
        words["program_version"] = str(attrs["program_version"])
        words["units"] = json.loads(attrs["units"])
        if "case" in file:
            group = file["case"]
            words |= {key: str(group.attrs[key]) for key in ("scenario", "source", "sha256")}
            words["case_text"] = group["text"][()].tobytes().decode("utf-8", "replace")
        return words
