"""Cells, times and places as words of the command line or in files."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from wavekin.errors import InputError
from wavekin.io.tables import read_bytes, read_columns


def numbers(text: str, key: str) -> NDArray[np.float64]:
    """Return numbers given as ``0.5,1.0`` or as ``FROM:TO:COUNT`` (both ends included).

    Raises
    ------
    InputError
        For anything else.
    """
    try:
        if ":" in text:
            low, high, count = text.split(":")
            if int(count) < 1 or not (np.isfinite(float(low)) and np.isfinite(float(high))):
                raise ValueError
            return np.linspace(float(low), float(high), int(count))
        found = np.array([float(part) for part in text.split(",")])
    except ValueError as error:
        raise InputError(
            "must be numbers such as 0.5,1.0 or FROM:TO:COUNT", key=key, value=text, mend="mend the list"
        ) from error
    if not np.all(np.isfinite(found)):
        raise InputError("must be finite numbers", key=key, value=text, mend="mend the list")
    return found


def cells(text: str, kind: str | None, key: str = "--cells") -> NDArray[np.float64]:
    """Return cell edges from ``FROM:TO:COUNT`` (COUNT cells), or from a CSV file with one column.

    A file's column is named ``edge`` or ``centre``; `kind` ("edges" or "centres") must say the same where it is
    given and is needed where the column has another name. Edges of centres lie midway between them, the outer
    ones as far out as the inner ones.
    """
    if not Path(text).exists() and text.count(":") == 2:
        low, high, count = text.split(":")
        try:
            edges = np.linspace(float(low), float(high), int(count) + 1)
        except ValueError as error:
            raise InputError("must be FROM:TO:COUNT", key=key, value=text, mend="give for instance 0:1:100") from error
        if len(edges) < 2 or not np.all(np.diff(edges) > 0.0):
            raise InputError("must have FROM below TO and COUNT above 0", key=key, value=text, mend="mend it")
        return edges
    data = read_bytes(Path(text), key)
    header = data.decode("utf-8-sig", "replace").splitlines()[:1]
    name = header[0].split(",")[0].strip() if header else ""
    named = {"edge": "edges", "centre": "centres"}.get(name)
    if named is None and kind is None:
        raise InputError(
            "must name its column edge or centre",
            file=text,
            key="line 1",
            value=name,
            mend="or say --edges or --centres",
        )
    if named is not None and kind is not None and named != kind:
        raise InputError(f"holds {named}", file=text, key="line 1", value=name, mend=f"drop --{kind}")
    values = np.array(read_columns(data, (name,), text, increasing=name).columns[0])
    if len(values) < 2:
        raise InputError("needs two rows or more", file=text, value=len(values), mend="add rows")
    return values if (named or kind) == "edges" else edges_of(values)


def edges_of(centres: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the edges of cells whose centres are given, shape (n + 1,)."""
    middles = 0.5 * (centres[:-1] + centres[1:])
    return np.concatenate(([2.0 * centres[0] - middles[0]], middles, [2.0 * centres[-1] - middles[-1]]))
