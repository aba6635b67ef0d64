"""A report: one self-contained HTML page that needs no network."""

from __future__ import annotations

import base64
import hashlib
import html
import json
from importlib.resources import files
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from wavekin.io.figures import drawn, extent, labels, segments
from wavekin.io.store import written_beside
from wavekin.io.summary import facts
from wavekin.records import KINDS

if TYPE_CHECKING:
    from wavekin.auditing import Audit
    from wavekin.history import History

#: At most this many fronts are put on the page: the strongest ones.
MOST_FRONTS = 6000
#: Histories with more fronts than this light only ancestors that the page shows.
MOST_IN_GRAPH = 100_000
PROFILES = 61
#: Corners of a profile on the page.
PROFILE_POINTS = 1500


def save_report(history: History, path: str | Path, words: dict[str, Any], *, replace: bool = False) -> None:
    """Write the report of a history.

    Parameters
    ----------
    history : History
    path : path
    words : dict
        What `wavekin.io.store.read_words` returns.
    replace : bool

    Raises
    ------
    InputError
        Where the file exists or cannot be written.
    """
    from wavekin.auditing import audit

    page = report(history, words, audit(history))
    with written_beside(path, replace) as temporary:
        temporary.write_text(page, encoding="utf-8")


def report(history: History, words: dict[str, Any], found: Audit) -> str:
    """Return the page as text; everything that came from the user is escaped."""
    folder = files("wavekin.shared")
    script, css = folder.joinpath("report.js").read_text("utf-8"), folder.joinpath("report.css").read_text("utf-8")
    content, kept = page_data(history)
    known = facts(history, words)
    data = json.dumps(content, separators=(",", ":"), allow_nan=False).replace("<", "\\u003c")
    policy = (
        f"default-src 'none'; script-src 'sha256-{_digest(script)}'; style-src 'sha256-{_digest(css)}'; "
        "base-uri 'none'; form-action 'none'"
    )
    thinned = ""
    if kept < len(history.fronts):
        whole = "" if len(history.fronts) <= MOST_IN_GRAPH else " Ancestry is lit among these only."
        thinned = (
            f"<p>The page shows {kept} of {len(history.fronts)} fronts: the strongest, and contours of the state "
            f"in fans.{whole}</p>"
        )
    title = html.escape(known["title"] or "Wavekin history")
    return f"""<!doctype html>
<html lang="en"><head><meta charset="utf-8"><meta http-equiv="Content-Security-Policy" content="{policy}">
<meta name="viewport" content="width=device-width"><title>{title}</title><style>{css}</style></head><body>
<h1>{title}</h1>
<p class="lead">{html.escape(known["law"])}: {html.escape(known["formula"])}<br>{html.escape(known["source"])}</p>
{_caution(known)}
<h2>Facts</h2>{_facts_table(known)}
<h2>Fronts in the x-t plane</h2>
<figure><canvas id="plane" tabindex="0" role="img" aria-label="fronts in the x-t plane; arrow keys walk
from front to front, Enter lights the ancestry, plus and minus zoom"></canvas>
<figcaption>Thick: shocks. Thin: fans. Dashed: contacts.
Drag to move, wheel to zoom, click a front to light its ancestry.</figcaption></figure>
<p id="told" aria-live="polite"></p>
<div class="controls"><button id="closer">closer</button><button id="wider">wider</button>
<button id="whole">whole</button></div>
{thinned}
<h2>Profiles</h2>
<div class="controls"><label for="time">time</label>
<input type="range" id="time" min="0" max="{PROFILES - 1}" value="{PROFILES - 1}" step="1"><span id="when"></span></div>
<figure><canvas id="profile" role="img" aria-label="the solution at the chosen time"></canvas></figure>
<h2>Proven bound against time</h2>{_bound_table(history)}
<h2>Audit</h2>{_audit_table(found)}
<h2>Interactions</h2>{_interactions(history)}
<h2>How to run it again</h2>{_again(words)}
<script type="application/json" id="data">{data}</script><script>{script}</script></body></html>
"""


def _digest(text: str) -> str:
    return base64.b64encode(hashlib.sha256(text.encode()).digest()).decode()


def page_data(history: History) -> tuple[dict[str, Any], int]:
    """Return what the page's script draws, and how many fronts that are."""
    shown = np.flatnonzero(drawn(history))
    strength = np.abs(history.fronts["right"][shown] - history.fronts["left"][shown])
    if len(shown) > MOST_FRONTS:
        shown = np.sort(shown[np.argsort(-strength, kind="stable")[:MOST_FRONTS]])
    fronts = history.fronts[shown]
    pieces, first = [], [0]
    for row in shown:
        for begin, end in segments(history, np.array([row])).tolist():
            pieces.append([_short(v) for v in (*begin, *end)])
        first.append(len(pieces))
    low, high = float(history.start.values.min()), float(history.start.values.max())
    room = 0.05 * (high - low) or 0.5
    content = {
        "until": history.until,
        "extent": list(extent(history)),
        "range": [low - room, high + room],
        "labels": list(labels(history)),
        "kinds": list(KINDS),
        "pieces": pieces,
        "first": first,
        "fronts": {
            "row": shown.tolist(),
            "t0": _list(fronts["birth_t"]),
            "t1": _list(np.minimum(fronts["death_t"], history.until)),
            "left": _list(fronts["left"]),
            "right": _list(fronts["right"]),
            "speed": _list(fronts["speed"]),
            "kind": fronts["kind"].tolist(),
            "born": fronts["born_at"].tolist(),
            "ended": fronts["ended_at"].tolist(),
        },
        "graph": _graph(history, shown),
        "profiles": [_profile(history, float(t)) for t in np.linspace(0.0, history.until, PROFILES)],
    }
    return content, len(shown)


def _graph(history: History, shown: np.ndarray) -> dict[str, Any]:
    """Return births and ends for walks to ancestors: of all fronts, or of those shown where there are too many."""
    whole = len(history.fronts) <= MOST_IN_GRAPH
    fronts = history.fronts if whole else history.fronts[shown]
    return {
        "row": None if whole else shown.tolist(),
        "born": fronts["born_at"].tolist(),
        "ended": fronts["ended_at"].tolist(),
    }


def _short(value: float) -> float:
    return float(f"{value:.7g}")


def _list(column: np.ndarray) -> list[float]:
    return [_short(value) for value in column.tolist()]


def _profile(history: History, t: float) -> dict[str, Any]:
    from wavekin.sampling import Snapshot

    low, high = extent(history)
    snapshot = Snapshot(history, t)
    edges = np.concatenate([[low], snapshot.edges, [high]])
    half = 0.5 * np.diff(edges) * snapshot.slopes
    x, u = np.repeat(edges, 2)[1:-1], np.stack([snapshot.values - half, snapshot.values + half], axis=1).ravel()
    if len(x) > PROFILE_POINTS:
        x = np.linspace(low, high, PROFILE_POINTS)
        u = snapshot.value(x, "right")
    return {"t": t, "bound": history.error_bound(t), "x": _list(x), "u": _list(u)}


def _row(*cells: str) -> str:
    first, *rest = cells
    return (
        f"<tr><th scope='row'>{html.escape(first)}</th>"
        + "".join(f"<td class='number'>{html.escape(c)}</td>" for c in rest)
        + "</tr>"
    )


def _caution(known: dict[str, Any]) -> str:
    return f'<p class="caution">Caution: {html.escape(known["caution"])}</p>' if known["caution"] else ""


def _facts_table(known: dict[str, Any]) -> str:
    rows = [
        ("domain", f"{known['domain']}, until {known['until']:g}"),
        ("fronts", f"{known['fronts']}, {known['alive_at_end']} alive at the end"),
        ("collisions", str(known["collisions"])),
        ("breakpoints of the flux", str(known["levels"])),
        (
            "proven L1 bound at the end",
            f"{known['l1_bound']:.4g}" + (f" (budget {known['budget']:g})" if known["budget"] else ""),
        ),
        ("proven bound of amounts", f"{known['cumulative_bound']:.4g}"),
        ("mass", f"{known['mass_end']:.12g} (drift {known['mass_end'] - known['mass_start']:.1g})"),
        ("case SHA-256", known["case_sha256"] or "no case kept"),
    ]
    return "<table>" + "".join(_row(*row) for row in rows) + "</table>"


def _bound_table(history: History) -> str:
    times = np.linspace(0.0, history.until, 11)
    head = "<tr><th>t</th><th>L1</th><th>amounts</th></tr>"
    rows = (_row(f"{t:.4g}", f"{history.error_bound(t):.4g}", f"{history.cumulative_bound(t):.4g}") for t in times)
    return f"<table>{head}{''.join(rows)}</table>"


def _audit_table(found: Audit) -> str:
    rows = "".join(
        f"<tr><th scope='row'>{html.escape(check.name)}</th><td class='{'holds' if check.holds else 'fails'}'></td>"
        f"<td class='number'>{check.worst:.3g} &le; {check.limit:.3g}</td><td>{html.escape(check.text)}</td></tr>"
        for check in found.checks
    )
    return f"<table>{rows}</table>"


def _interactions(history: History) -> str:
    from wavekin.statistics import collision_kinds, strength_histogram

    rows = "".join(_row(kind, str(count)) for kind, count in collision_kinds(history).items())
    edges, counts = strength_histogram(history, 8)
    strengths = "".join(
        _row(f"strength {a:.3g} to {b:.3g}", str(n)) for a, b, n in zip(edges, edges[1:], counts, strict=False) if n
    )
    return f"<table>{rows}{strengths}</table>"


def _again(words: dict[str, Any]) -> str:
    text = words.get("case_text", "")
    if not text:
        return "<p>This history was saved from Python without a case file.</p>"
    return f"<pre>wavekin run CASE.toml</pre><p>with this case file:</p><pre>{html.escape(text)}</pre>"
