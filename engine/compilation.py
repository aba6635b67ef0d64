"""Where compiled functions are kept between runs.

numba looks only at the file of a compiled function, not at what that function calls, so a changed callee would
meet an old compiled caller. The folder is therefore named after all of the engine's text.
"""

from __future__ import annotations

import hashlib
import os
import tempfile
from pathlib import Path

import numba


def use_own_cache() -> None:
    """Point numba's cache to a folder for exactly this engine; the user's own NUMBA_CACHE_DIR goes before."""
    if os.environ.get("NUMBA_CACHE_DIR"):
        return
    text = b"".join(path.read_bytes() for path in sorted(Path(__file__).parent.glob("*.py")))
    home = os.environ.get("XDG_CACHE_HOME") or os.path.expanduser("~/.cache")
    for base in (home, tempfile.gettempdir()):
        folder = Path(base) / "wavekin" / f"numba-{numba.__version__}-{hashlib.sha256(text).hexdigest()[:16]}"
        try:
            folder.mkdir(parents=True, exist_ok=True)
        except OSError:
            continue
        numba.config.CACHE_DIR = str(folder)
        return
