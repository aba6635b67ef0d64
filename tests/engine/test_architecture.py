"""Imports point one way: the engine knows no files, io no mathematics; every file has its line of purpose."""

from __future__ import annotations

import ast
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
#: Engine modules from the ground up; each may import only what stands before it (top-level imports).
ORDER = [
    "version",
    "errors",
    "motion",
    "envelope",
    "records",
    "queue",
    "profile",
    "polygon",
    "tracker",
    "ordering",
    "compilation",
    "kernel",
    "tiles",
    "bound",
    "history",
    "sampling",
    "probing",
    "budget",
    "tracking",
    "replay",
    "auditing",
    "lineage",
    "statistics",
    "scoring",
]


def imports(path: Path) -> set[str]:
    """Return the wavekin modules that a file imports when it is imported itself."""
    found = set()
    for node in ast.parse(path.read_text()).body:
        if isinstance(node, ast.ImportFrom) and (node.module or "").startswith("wavekin."):
            found.add(node.module.split(".")[1])
    return found


@pytest.mark.parametrize("name", ORDER)
def test_engine_module_imports_only_what_is_below_it(name: str) -> None:
    below = set(ORDER[: ORDER.index(name)]) | {"laws"}
    assert imports(ROOT / "engine" / f"{name}.py") - {name} <= below


def test_engine_knows_no_files() -> None:
    for path in (ROOT / "engine").rglob("*.py"):
        text = path.read_text()
        assert "h5py" not in text and "matplotlib" not in text.replace("matplotlib.", "matplotlib"), path
        assert "io" not in imports(path), path


@pytest.mark.parametrize("path", sorted((ROOT / "engine").rglob("*.py")) + sorted((ROOT / "io").rglob("*.py")), ids=str)
def test_every_file_says_what_it_is_for(path: Path) -> None:
    assert ast.get_docstring(ast.parse(path.read_text())), path
