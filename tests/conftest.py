"""Set-up for all tests."""

from __future__ import annotations

import os

os.environ.setdefault("MPLBACKEND", "Agg")
