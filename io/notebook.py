"""How a history shows itself in a notebook: a small x-t diagram in SVG and a few facts."""

from __future__ import annotations

import html
from typing import TYPE_CHECKING

import numpy as np
from wavekin.io.figures import STROKES, drawn, extent, segments
from wavekin.records import KINDS

if TYPE_CHECKING:
    from wavekin.history import History

WIDTH, HEIGHT = 360, 220
#: At most this many lines; the strongest fronts.
MOST_LINES = 1500


def diagram(history: History) -> str:
    """Return HTML with the fronts in the x-t plane and what is known of the run."""
    shown = np.flatnonzero(drawn(history))
    strength = np.abs(history.fronts["right"][shown] - history.fronts["left"][shown])
    shown = shown[np.argsort(-strength, kind="stable")[:MOST_LINES]]
    low, high = extent(history)
    parts = []
    for number, kind in enumerate(KINDS):
        colour, width, dashes = STROKES.get(kind, ("#444444", 1.0, "solid"))
        lines = segments(history, shown[history.fronts["kind"][shown] == number])
        x = (lines[..., 0] - low) / (high - low) * WIDTH
        y = HEIGHT - lines[..., 1] / history.until * HEIGHT
        path = "".join(
            f"M{x0:.1f} {y0:.1f}L{x1:.1f} {y1:.1f}" for (x0, x1), (y0, y1) in zip(x.tolist(), y.tolist(), strict=True)
        )
        if path:
            dash = "" if dashes == "solid" else ' stroke-dasharray="5 3"'
            parts.append(f'<path d="{path}" stroke="{colour}" stroke-width="{width:g}" fill="none"{dash}/>')
    name = history.law.name if history.law is not None else "law"
    words = (
        f"{name}, until {history.until:g}: {len(history.fronts)} fronts, {len(history.collisions)} collisions, "
        f"proven L1 bound {history.error_bound(history.until):.3g}"
    )
    return (
        f'<figure style="margin:0"><svg viewBox="0 0 {WIDTH} {HEIGHT}" width="{WIDTH}" height="{HEIGHT}" '
        f'role="img" aria-label="fronts in the x-t plane" style="border:1px solid #ccc">{"".join(parts)}</svg>'
        f"<figcaption>{html.escape(words)}</figcaption></figure>"
    )
