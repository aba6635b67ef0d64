"""A progress bar for long runs: time reached, fronts alive, collisions a second."""

from __future__ import annotations

import shutil
import sys
import time
from types import TracebackType
from typing import Any


class Progress:
    """A bar on standard error; silent when that is no terminal, or when told to be.

    Calling it with (time reached, fronts alive, collisions so far) moves it.
    """

    def __init__(self, until: float, quiet: bool = False) -> None:
        self.until = until
        self.quiet = quiet or not sys.stderr.isatty()
        self._bar: Any = None
        self._begin = time.perf_counter()

    def __enter__(self) -> Progress:
        return self

    def __call__(self, t: float, alive: int, collisions: int) -> None:
        """Move the bar."""
        if self.quiet:
            return
        if self._bar is None:
            from tqdm import tqdm

            layout = "{percentage:3.0f}% of the time |{bar:16}| {elapsed}{postfix}"
            size = shutil.get_terminal_size()  # 80 x 24 where the terminal does not say
            self._bar = tqdm(
                total=self.until, bar_format=layout, leave=False, file=sys.stderr, ncols=size.columns, nrows=size.lines
            )
        rate = collisions / max(time.perf_counter() - self._begin, 1e-9)
        self._bar.set_postfix_str(f"{alive} fronts alive, {collisions} collisions, {rate:.3g}/s", refresh=False)
        self._bar.n = min(t, self.until)
        self._bar.refresh()

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        if self._bar is not None:
            self._bar.close()
