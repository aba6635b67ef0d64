"""Set-up for all tests: compiled functions are cached per state of the engine's text."""

from __future__ import annotations

import hashlib
import os
import tempfile
from pathlib import Path

# numba looks only at the file that holds a function, not at what the function calls; a folder named after all of
# the engine's text keeps a changed callee from being met by an old compiled caller.
_text = b"".join(path.read_bytes() for path in sorted((Path(__file__).parents[1] / "engine").rglob("*.py")))
os.environ.setdefault(
    "NUMBA_CACHE_DIR", str(Path(tempfile.gettempdir()) / f"wavekin-numba-{hashlib.sha256(_text).hexdigest()[:16]}")
)
os.environ.setdefault("MPLBACKEND", "Agg")
