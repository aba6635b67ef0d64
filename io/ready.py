"""The ready cases that come with the program."""

from __future__ import annotations

import difflib
import tomllib
from importlib.resources import files
from pathlib import Path
from typing import TYPE_CHECKING

from wavekin.errors import InputError

if TYPE_CHECKING:
    from wavekin.io.casefile import Case


def ready_cases() -> dict[str, str]:
    """Return the names of the ready cases with their titles."""
    folder = files("wavekin.cases")
    names = sorted(entry.name for entry in folder.iterdir() if entry.name.endswith(".toml"))
    return {name[:-5]: tomllib.loads(folder.joinpath(name).read_text("utf-8"))["title"] for name in names}


def ready_case(name: str) -> Case:
    """Return a ready case by its name.

    Raises
    ------
    InputError
        For an unknown name, with the nearest known one.
    """
    from wavekin.io.casefile import build_case

    folder = files("wavekin.cases")
    known = ready_cases()
    if name not in known:
        close = difflib.get_close_matches(name, list(known), n=1)
        mend = f"did you mean {close[0]}?" if close else "give a file that exists, or see wavekin cases"
        raise InputError("is neither a file nor a ready case", key="case", value=name, mend=mend)
    text = folder.joinpath(f"{name}.toml").read_text("utf-8")
    return build_case(tomllib.loads(text), text, f"{name}.toml", lambda table, key: folder.joinpath(table).read_bytes())


def copy_case(name: str, folder: str | Path) -> list[Path]:
    """Copy a ready case and its tables into a folder; return the files made.

    Raises
    ------
    InputError
        Where the folder is none or a file of that name exists.
    """
    from wavekin.io.store import written_beside

    case = ready_case(name)
    folder = Path(folder)
    if not folder.is_dir():
        raise InputError("is no folder", key="--copy", value=str(folder), mend="make it first")
    contents = {f"{name}.toml": case.text.encode(), **case.tables}
    paths = [folder / file for file in contents]
    for path in paths:
        if path.exists():
            raise InputError("exists already", file=str(path), mend="choose another folder")
    for path, data in zip(paths, contents.values(), strict=True):
        with written_beside(path) as temporary:
            temporary.write_bytes(data)
    return paths
