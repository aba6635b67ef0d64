"""Tables in CSV files: two named columns of plain numbers."""

from __future__ import annotations

import csv
import io
import itertools
from pathlib import Path

from wavekin.errors import InputError


def read_bytes(path: Path, key: str = "") -> bytes:
    """Return a file's bytes, or raise InputError that says why not."""
    try:
        return path.read_bytes()
    except FileNotFoundError as error:
        raise InputError("does not exist", key=key, value=str(path), mend="check the path") from error
    except OSError as error:
        raise InputError(f"cannot be read ({error.strerror})", key=key, value=str(path), mend="check it") from error


def read_columns(data: bytes, names: tuple[str, ...], file: str) -> list[list[float]]:
    """Return named columns of a CSV file as lists of numbers.

    Parameters
    ----------
    data : bytes
        Contents: UTF-8 with or without a byte-order mark, lines ended in any way, cells parted by commas, a
        first line with the names; further columns are not looked at.
    names : tuple of str
        The columns wanted, in the order wanted.
    file : str
        Name of the file, for messages.

    Raises
    ------
    InputError
        One sentence with the line for missing columns, empty cells, texts, decimal commas, lines of another
        length and files without rows.
    """
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise InputError("must be UTF-8 text", file=file, value=error.reason, mend="save it as CSV in UTF-8") from error
    rows = [
        (number, row)
        for number, row in enumerate(csv.reader(io.StringIO(text, newline="")), 1)
        if any(c.strip() for c in row)
    ]
    wanted = ",".join(names)
    if not rows:
        raise InputError("is empty", file=file, mend=f"give a first line {wanted} and one row a line")
    header = [cell.strip() for cell in rows[0][1]]
    if any(";" in cell for cell in rows[0][1]):
        raise InputError(
            "has semicolons between its cells", file=file, key="line 1", value=rows[0][1][0], mend="use commas"
        )
    missing = [name for name in names if name not in header]
    if missing:
        raise InputError(
            f"needs a column {missing[0]}", file=file, key="line 1", value=header,
            mend=f"start the file with the line {wanted}",
        )  # fmt: skip
    places = [header.index(name) for name in names]
    columns: list[list[float]] = [[] for _ in names]
    for number, row in rows[1:]:
        if len(row) != len(header):
            raise InputError(
                f"has {len(row)} cells where the first line has {len(header)}", file=file, key=f"line {number}",
                value=",".join(row), mend="write decimals with a point, not a comma, and fill every cell",
            )  # fmt: skip
        for column, place, name in zip(columns, places, names, strict=True):
            column.append(_number(row[place], file, f"line {number}, column {name}"))
    if not columns[0]:
        raise InputError("has no rows below its first line", file=file, mend="add one row a line")
    return columns


def _number(cell: str, file: str, key: str) -> float:
    try:
        return float(cell)
    except ValueError as error:
        mend = "write decimals with a point" if "," in cell else "write a number"
        raise InputError("must be a number", file=file, key=key, value=cell, mend=mend) from error


def in_increasing_order(column: list[float], name: str, file: str) -> None:
    """Raise InputError for the first value of a column that is not above the one before."""
    for i, (before, value) in enumerate(itertools.pairwise(column)):
        if not value > before:
            word = "is there twice" if value == before else "does not increase"
            raise InputError(
                f"{word} (after {before!r})", file=file, key=f"column {name}, row {i + 2}", value=value,
                mend="sort the rows, drop doubles and check that the columns are not swapped",
            )  # fmt: skip
