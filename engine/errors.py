"""The one exception that a user's input can cause."""

from __future__ import annotations

from typing import Any


class InputError(ValueError):
    """Raised when what the user gave cannot be used.

    The message is one sentence with the place, the rule, the value received and the mend::

        case.toml: run.until: must be a finite time above 0 (got -1.0); give the time to run to, e.g. until = 4.0

    Parameters
    ----------
    rule : str
        What must hold, e.g. ``"must be a finite time above 0"``.
    key : str
        The argument or the key of the case file that is wrong, e.g. ``"run.until"``; "" where none is.
    value : object
        What was received; left out of the message where it is the marker `NO_VALUE`.
    mend : str
        What the user can do about it.
    file : str
        The file that holds the key; the engine leaves it empty and ``wavekin.io`` adds it.
    """

    NO_VALUE: Any = object()

    def __init__(self, rule: str, *, key: str = "", value: Any = NO_VALUE, mend: str = "", file: str = "") -> None:
        self.rule, self.key, self.value, self.mend, self.file = rule, key, value, mend, file
        super().__init__(rule)

    def located(self, file: str = "", key: str = "") -> InputError:
        """Return the same complaint with the file and the key's place in it filled in."""
        return InputError(self.rule, key=key or self.key, value=self.value, mend=self.mend, file=file or self.file)

    def __str__(self) -> str:
        place = ": ".join(part for part in (self.file, self.key) if part)
        got = "" if self.value is InputError.NO_VALUE else f" (got {_short(self.value)})"
        mend = f"; {self.mend}" if self.mend else ""
        return " ".join(f"{place}: {self.rule}{got}{mend}".removeprefix(": ").split())


def _short(value: Any) -> str:
    """Return a repr that fits on a line."""
    text = repr(value)
    return text if len(text) <= 60 else text[:57] + "..."
