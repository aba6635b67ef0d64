"""Wavekin: front tracking for 1-D hyperbolic conservation laws, with a proven error bound.

Every public name below is loaded when it is first used, so that ``import wavekin`` and the command line start
quickly.
"""

from __future__ import annotations

import importlib
from typing import Any

from wavekin.version import __version__

#: Public names and the modules that hold them.
_HOMES = {
    "Audit": "auditing",
    "History": "history",
    "InputError": "errors",
    "Lineage": "lineage",
    "KINDS": "records",
    "Polygon": "polygon",
    "Profile": "profile",
    "Units": "laws",
    "Law": "laws",
    "audit": "auditing",
    "fit_law": "laws",
    "collision_kinds": "statistics",
    "decay": "statistics",
    "front_at": "lineage",
    "lineage_of": "lineage",
    "passed_bound": "probing",
    "points": "sampling",
    "project": "profile",
    "sample": "sampling",
    "score": "scoring",
    "stored": "probing",
    "traces": "probing",
    "track": "tracking",
    "strength_histogram": "statistics",
    "strongest": "lineage",
    "table_law": "laws",
    "formula_law": "laws",
    "law_from_spec": "laws",
}

__all__ = ["__version__", *sorted(_HOMES)]


def __getattr__(name: str) -> Any:
    if name in _HOMES:
        value = getattr(importlib.import_module(f"wavekin.{_HOMES[name]}"), name)
    elif name in ("io", "laws", "systems", "cases", "shared"):
        return importlib.import_module(f"wavekin.{name}")
    else:
        laws = importlib.import_module("wavekin.laws")
        if name not in laws.NAMED:
            raise AttributeError(f"module 'wavekin' has no attribute {name!r}")
        value = laws.NAMED[name]
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    laws = importlib.import_module("wavekin.laws")
    return sorted([*__all__, *laws.NAMED, "io", "laws", "systems"])
