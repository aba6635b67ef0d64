"""Case files, the HDF5 store, tables, figures, reports and the command line."""

from __future__ import annotations

import importlib
from typing import Any

#: Public names and the modules that hold them, loaded when first used.
_HOMES = {
    "Case": "casefile",
    "load": "store",
    "read_case": "casefile",
    "ready_case": "ready",
    "save": "store",
    "save_run_figure": "figures",
}

__all__ = sorted(_HOMES)


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module 'wavekin.io' has no attribute {name!r}")
    value = getattr(importlib.import_module(f"wavekin.io.{_HOMES[name]}"), name)
    globals()[name] = value
    return value
