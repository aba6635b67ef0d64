"""Figures of a history: fronts in the x-t plane, profiles; matplotlib without any window."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from importlib.resources import as_file, files
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray
from wavekin.errors import InputError
from wavekin.io.store import written_beside
from wavekin.records import KINDS

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from wavekin.history import History

FORMATS = (".png", ".svg", ".pdf")
#: How each kind of front is drawn: colour, line width, dash pattern. Width and dashes alone tell them apart.
STROKES: dict[str, tuple[str, float, Any]] = {
    "shock": ("#20476b", 1.9, "solid"),
    "fan": ("#c2571a", 0.55, "solid"),
    "contact": ("#3f8f6b", 1.3, (0, (5, 3))),
    "fixture": ("#7b4a8e", 1.6, (0, (7, 2, 1, 2))),
}
#: Figures with more fronts than this hold them as one image inside the vector file.
RASTER_FROM = 20_000
#: Fan fronts weaker than this share of the states' span are drawn only where they cross one of as many even states, so
#: that fans look the same at every resolution: as contours of the state.
CONTOURS = 48
#: The same holds for all other fronts where there are more of them than this.
ALL_UP_TO = 60_000


@contextmanager
def style() -> Iterator[None]:
    """Use the project's figure style within a block."""
    import matplotlib
    from matplotlib import rc_context, rc_params_from_file

    with as_file(files("wavekin.shared").joinpath("wavekin.mplstyle")) as path:
        settings = rc_params_from_file(str(path), use_default_template=False)
    with rc_context(settings):
        matplotlib.rcParams["pdf.compression"] = 6
        yield


def axis_label(label: str, symbol: str, unit: str) -> str:
    """Return a label such as ``density k [veh/km]``."""
    words = " ".join(part for part in (label, symbol) if part)
    return f"{words} [{unit}]" if unit and unit != "-" else words


def labels(history: History) -> tuple[str, str, str]:
    """Return the labels of place, time and state."""
    units = history.law.units if history.law is not None else None
    if units is None:
        return "place x", "time t", "state u"
    return (
        axis_label(units.x_label, "x", units.x),
        axis_label(units.t_label, "t", units.t),
        axis_label(units.state_label, units.state_symbol, units.state),
    )


def segments(history: History, rows: NDArray[np.int64]) -> NDArray[np.float64]:
    """Return the ways of fronts as lines, shape (lines, 2, 2) of (x, t); a ring's are cut at its seam."""
    fronts = history.fronts[rows]
    end_t = np.minimum(fronts["death_t"], history.until)
    begin = np.stack([fronts["birth_x"], fronts["birth_t"]], axis=1)
    end = np.stack([fronts["birth_x"] + fronts["speed"] * (end_t - fronts["birth_t"]), end_t], axis=1)
    lines = np.stack([begin, end], axis=1)
    return lines if history.ring is None else _cut(lines, *history.ring)


def _cut(lines: NDArray[np.float64], a: float, b: float) -> NDArray[np.float64]:
    """Return lines cut at every lap of a ring and moved into it."""
    length = b - a
    first = np.floor((lines[:, 0, 0] - a) / length).astype(int)
    last = np.floor((lines[:, 1, 0] - a) / length).astype(int)
    laps = np.minimum(np.abs(last - first) + 1, 2000)  # beyond that the lines fill the picture anyway
    index = np.repeat(np.arange(len(lines)), laps)
    step = np.arange(len(index)) - np.repeat(np.cumsum(laps) - laps, laps)
    lap = first[index] + np.sign(last - first)[index] * step
    low, high = a + lap * length, a + (lap + 1) * length
    x0, t0, x1, t1 = (lines[index, i, j] for i in (0, 1) for j in (0, 1))
    span = np.where(x1 == x0, 1.0, x1 - x0)
    enter = np.where(x1 == x0, 0.0, (np.where(x1 > x0, low, high) - x0) / span).clip(0.0, 1.0)
    leave = np.where(x1 == x0, 1.0, (np.where(x1 > x0, high, low) - x0) / span).clip(0.0, 1.0)
    shift = lap * length
    begin = np.stack([x0 + enter * (x1 - x0) - shift, t0 + enter * (t1 - t0)], axis=1)
    end = np.stack([x0 + leave * (x1 - x0) - shift, t0 + leave * (t1 - t0)], axis=1)
    return np.stack([begin, end], axis=1)


def drawn(history: History) -> NDArray[np.bool_]:
    """Return which fronts a picture shows: weak ones in fans only at even states, all others if not too many."""
    fronts = history.fronts
    low, span = float(history.levels[0]), float(np.ptp(history.levels)) or 1.0
    cells = [np.floor((fronts[side] - low) / span * CONTOURS + 0.5) for side in ("left", "right")]
    crossing = cells[0] != cells[1]
    others = fronts["kind"] != KINDS.index("fan")
    return np.asarray(crossing | others if others.sum() <= ALL_UP_TO else crossing)


def draw_fronts(axes: Axes, history: History, legend: bool = True) -> None:
    """Draw all fronts in the x-t plane: shocks thick, fans thin, contacts dashed."""
    from matplotlib.collections import LineCollection
    from matplotlib.lines import Line2D

    handles = []
    shown = np.flatnonzero(drawn(history))
    many = len(shown) > RASTER_FROM
    kinds = history.fronts["kind"][shown]
    span, thinner = float(np.ptp(history.levels)), 0.6 if many else 1.0
    for number, kind in enumerate(KINDS):
        rows = shown[kinds == number]
        if not len(rows) or kind not in STROKES:
            continue
        colour, width, dashes = STROKES[kind]
        strength = np.abs(history.fronts["right"][rows] - history.fronts["left"][rows])
        for part, share in ((rows[strength * CONTOURS < span], 0.5), (rows[strength * CONTOURS >= span], 1.0)):
            if len(part):
                lines = LineCollection(
                    list(segments(history, part)), colors=colour, linewidths=max(width * share, 0.5) * thinner,
                    linestyles=dashes, zorder=2 if kind == "fan" else 3, rasterized=many, capstyle="butt",
                )  # fmt: skip
                axes.add_collection(lines, autolim=False)
        handles.append(Line2D([], [], color=colour, linewidth=max(width, 0.9), linestyle=dashes, label=kind))
    x_label, t_label, _ = labels(history)
    axes.set(xlabel=x_label, ylabel=t_label, xlim=extent(history), ylim=(0.0, history.until))
    if legend and handles:
        axes.legend(handles=handles, loc="lower left", bbox_to_anchor=(0.0, 1.0), ncols=len(handles), borderaxespad=0.2)


def extent(history: History) -> tuple[float, float]:
    """Return the places that a picture shows: the ring, or where the fronts are with a margin."""
    if history.ring is not None:
        return history.ring
    fronts = history.fronts
    if not len(fronts):
        return 0.0, 1.0
    end = np.minimum(fronts["death_t"], history.until)
    last = fronts["birth_x"] + fronts["speed"] * (end - fronts["birth_t"])
    low, high = float(min(fronts["birth_x"].min(), last.min())), float(max(fronts["birth_x"].max(), last.max()))
    margin = 0.04 * (high - low) or 0.5
    return low - margin, high + margin


def draw_profile(axes: Axes, history: History, t: float, **options: Any) -> None:
    """Draw the solution at a time, fans joined by straight lines and jumps upright."""
    from wavekin.sampling import Snapshot

    low, high = extent(history)
    snapshot = Snapshot(history, t)
    edges = np.concatenate([[low], snapshot.edges, [high]])
    half = 0.5 * np.diff(edges) * snapshot.slopes
    x = np.repeat(edges, 2)[1:-1]
    u = np.stack([snapshot.values - half, snapshot.values + half], axis=1).ravel()
    axes.plot(x, u, solid_joinstyle="miter", **options)


def run_figure(history: History, title: str = "", caution: str = "") -> Figure:
    """Return the picture of a run: the x-t diagram over the profiles at start and end."""
    from matplotlib.figure import Figure

    figure = Figure(figsize=(7.6, 7.4), layout="constrained")
    upper, lower = figure.subplots(2, 1, height_ratios=[2.6, 1.0])
    draw_fronts(upper, history)
    upper.set_title(title or (history.law.name if history.law is not None else ""), pad=22)
    units = history.law.units if history.law is not None else None
    unit = "" if units is None or units.t == "-" else f" {units.t}"
    draw_profile(lower, history, 0.0, color="#9a9a9a", linewidth=0.9, label="start")
    draw_profile(lower, history, history.until, color="#20476b", linewidth=1.9, label=f"at {history.until:g}{unit}")
    x_label, _, u_label = labels(history)
    lower.set(xlabel=x_label, ylabel=u_label, xlim=extent(history))
    lower.legend(loc="lower left", bbox_to_anchor=(0.0, 1.0), ncols=2, borderaxespad=0.2)
    note = f"proven L1 bound at the end {history.error_bound(history.until):.2g}"
    if caution:
        note += f"\n{caution}"
    figure.supxlabel("\n".join(_wrapped(note)), fontsize=7.5, color="#555555", x=0.01, ha="left")
    return figure


def _wrapped(text: str, width: int = 120) -> list[str]:
    import textwrap

    return [line for part in text.splitlines() for line in textwrap.wrap(part, width) or [""]]


def save_figure(figure: Figure, path: str | Path, replace: bool = False) -> None:
    """Write a figure, whole or not at all, without any date in it.

    Raises
    ------
    InputError
        For an ending other than .png, .svg and .pdf, or a place that cannot be written.
    """
    ending = check_format(path)
    metadata = {".png": {"Software": None}, ".svg": {"Date": None}, ".pdf": {"CreationDate": None}}[ending]
    with written_beside(path, replace) as temporary:
        figure.savefig(temporary, format=ending[1:], metadata=metadata)


def check_format(path: str | Path) -> str:
    """Return a picture's ending, or raise InputError for one that cannot be drawn."""
    ending = Path(path).suffix.lower()
    if ending not in FORMATS:
        raise InputError(
            "must end in .png, .svg or .pdf", file=str(path), value=ending, mend="choose one of these endings"
        )
    return ending


def save_run_figure(
    history: History, path: str | Path, *, title: str = "", caution: str = "", replace: bool = False
) -> None:
    """Draw the picture of a run into a file; see `run_figure`."""
    with style():
        save_figure(run_figure(history, title, caution), path, replace)
