"""Tables in CSV files: named columns of plain numbers, with the line that each row stands on."""

from __future__ import annotations

import csv
import io
import itertools
import math
import re
from pathlib import Path
from typing import NamedTuple

from wavekin.errors import InputError

#: A plain number: Python's own reader would also take 1_000, digits of other scripts and words.
NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?", re.ASCII)


class Table(NamedTuple):
    """Columns of a table, in the order they were asked for."""

    columns: list[list[float]]
    lines: list[int]
    """Line of the file for each row."""


def read_bytes(path: Path, key: str = "") -> bytes:
    """Return a file's bytes, or raise InputError that says why not."""
    try:
        return path.read_bytes()
    except FileNotFoundError as error:
        raise InputError("does not exist", key=key, value=str(path), mend="check the path") from error
    except OSError as error:
        raise InputError(f"cannot be read ({error.strerror})", key=key, value=str(path), mend="check it") from error
    except ValueError as error:  # a NUL in the name
        raise InputError("is no name of a file", key=key, value=str(path), mend="check the path") from error


def read_columns(data: bytes, names: tuple[str, ...], file: str, increasing: str = "") -> Table:
    """Return named columns of a CSV file.

    Parameters
    ----------
    data : bytes
        Contents: UTF-8 with or without a byte-order mark, lines ended in any way, cells parted by commas, a
        first line with the names; lines that begin with ``#`` and empty lines are passed over, further columns
        are not looked at.
    names : tuple of str
        The columns wanted, in the order wanted.
    file : str
        Name of the file, for messages.
    increasing : str
        The column whose numbers must increase from row to row; "" for none.

    Raises
    ------
    InputError
        One sentence with the line for missing or doubled columns, empty cells, texts, numbers that are not
        finite, decimal commas, lines of another length, rows out of order and files without rows.
    """
    rows = _rows(data, file)
    wanted = ",".join(names)
    if not rows:
        raise InputError("is empty", file=file, mend=f"give a first line {wanted} and one row a line")
    line, header = rows[0]
    places = _places(header, names, file, f"line {line}")
    table = Table([[] for _ in names], [])
    for line, row in rows[1:]:
        if len(row) != len(header):
            semicolons = any(";" in cell for cell in row)
            raise InputError(
                f"has {len(row)} cells where the first line has {len(header)}", file=file, key=f"line {line}",
                value=",".join(row).strip(),
                mend="part the cells by commas" if semicolons else
                "write decimals with a point, not a comma, and fill every cell",
            )  # fmt: skip
        table.lines.append(line)
        for column, place, name in zip(table.columns, places, names, strict=True):
            column.append(_number(row[place].strip(), file, f"line {line}, column {name}"))
    if not table.lines:
        raise InputError("has no rows below its first line", file=file, mend="add one row a line")
    if increasing:
        _check_increasing(table.columns[names.index(increasing)], table.lines, increasing, file)
    return table


def _rows(data: bytes, file: str) -> list[tuple[int, list[str]]]:
    """Return the cells of each line that holds any, with the line's number."""
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise InputError("must be UTF-8 text", file=file, value=error.reason, mend="save it as CSV in UTF-8") from error
    fed = [(n, line) for n, line in enumerate(io.StringIO(text, newline=None), 1) if not line.lstrip().startswith("#")]
    reader = csv.reader(line for _, line in fed)
    try:
        return [(fed[reader.line_num - 1][0], row) for row in reader if len(row) > 1 or any(c.strip() for c in row)]
    except csv.Error as error:
        line = fed[reader.line_num - 1][0]
        raise InputError(f"is no CSV ({error})", file=file, key=f"line {line}", mend="mend that line") from error


def _places(header: list[str], names: tuple[str, ...], file: str, key: str) -> list[int]:
    """Return where the columns wanted stand in the first line."""
    found = [cell.strip() for cell in header]
    if any(";" in cell for cell in found):
        raise InputError("has semicolons between its cells", file=file, key=key, value=found[0], mend="use commas")
    for name in names:
        if name not in found:
            raise InputError(
                f"needs a column {name}", file=file, key=key, value=found,
                mend=f"start the file with the line {','.join(names)}",
            )  # fmt: skip
        if found.count(name) > 1:
            raise InputError(f"names the column {name} twice", file=file, key=key, value=found, mend="drop one of them")
    return [found.index(name) for name in names]


def _number(cell: str, file: str, key: str) -> float:
    """Return the number in a cell."""
    if NUMBER.fullmatch(cell):
        number = float(cell)
        if math.isfinite(number):
            return number
    elif cell.lower().lstrip("+-") not in ("nan", "inf", "infinity"):
        rule = "must be a number" if cell else "must be a number, and is empty"
        mend = "write decimals with a point" if "," in cell else "fill the cell" if not cell else "write a plain number"
        raise InputError(rule, file=file, key=key, value=cell, mend=mend)
    raise InputError("must be a finite number", file=file, key=key, value=cell, mend="mend the cell or drop the row")


def _check_increasing(column: list[float], lines: list[int], name: str, file: str) -> None:
    """Raise InputError for the first number of a column that is not above the one before."""
    for (before, value), line in zip(itertools.pairwise(column), lines[1:], strict=True):
        if not value > before:
            word = "is there twice" if value == before else "does not increase"
            raise InputError(
                f"{word} (after {before!r})", file=file, key=f"line {line}, column {name}", value=value,
                mend="sort the rows, drop doubles and check that the columns are not swapped",
            )  # fmt: skip
