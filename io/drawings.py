"""Further figures: filled x-t diagrams, characteristics, profiles, traces, functionals, ancestry, animation."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray
from wavekin.errors import InputError
from wavekin.io.figures import (
    RASTER_FROM,
    axis_label,
    draw_fronts,
    draw_profile,
    drawn,
    extent,
    labels,
    segments,
    style,
)
from wavekin.io.store import written_beside

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from wavekin.history import History
    from wavekin.lineage import Lineage

#: Pixels of a filled x-t diagram.
FILL = (500, 360)
#: Characteristics drawn, and steps in time along each.
CHARACTERISTICS, STEPS = 36, 240
#: Most profiles that are told apart by colour in one figure.
PROFILE_COLOURS = ("#20476b", "#c2571a", "#3f8f6b", "#8a5a9c", "#7a7a2a", "#444444")
DASHES: tuple[Any, ...] = ("solid", (0, (6, 2)), (0, (2, 2)), (0, (6, 2, 1, 2)), (0, (1, 1)), (0, (9, 3)))


def figure_of(width: float = 7.6, height: float = 5.4) -> Figure:
    """Return an empty figure."""
    from matplotlib.figure import Figure

    return Figure(figsize=(width, height), layout="constrained")


def xt(history: History, title: str = "", fill: bool = False, characteristics: bool = False) -> Figure:
    """Return the x-t diagram, on request filled by state and with characteristics."""
    from matplotlib.patheffects import Normal, Stroke

    figure = figure_of(7.6, 5.8)
    axes = figure.subplots()
    draw_fronts(axes, history)
    if fill:
        for lines in axes.collections:
            if lines.get_zorder() > 2:  # all but fans: a pale rim parts them from any colour below
                width = float(np.max(lines.get_linewidth()))
                lines.set_path_effects([Stroke(linewidth=width + 1.8, foreground="#ffffff"), Normal()])
            else:
                lines.set_alpha(0.35)
        _fill(axes, figure, history)
    if characteristics:
        _characteristics(axes, history, "#ffffff" if fill else "#8a8a8a")
    axes.set_title(title, pad=22)
    return figure


def _fill(axes: Axes, figure: Figure, history: History) -> None:
    """Colour the plane by state; rare extremes, 1 % of it, share the colours at the ends of the scale."""
    columns, rows = FILL
    low, high = extent(history)
    times = (np.arange(rows) + 0.5) / rows * history.until
    values = history.averages(np.linspace(low, high, columns + 1), times)
    bottom, top = np.quantile(values, [0.005, 0.995])
    room = 0.05 * (top - bottom)
    rare = (values.min() < bottom - room, values.max() > top + room) if room > 0.0 else (False, False)
    image = axes.imshow(
        values,
        origin="lower",
        aspect="auto",
        extent=(low, high, 0.0, history.until),
        cmap="cividis",
        vmin=bottom if rare[0] else None,
        vmax=top if rare[1] else None,
        alpha=0.8,
        zorder=0,
    )
    extend = {(True, True): "both", (True, False): "min", (False, True): "max"}.get(rare, "neither")
    figure.colorbar(image, ax=axes, label=labels(history)[2], pad=0.01, extend=extend)


def _characteristics(axes: Axes, history: History, colour: str) -> None:
    """Draw characteristics forward from even places until they run into a jump."""
    from matplotlib.collections import LineCollection
    from wavekin.records import FAN
    from wavekin.sampling import Snapshot

    if history.law is None:
        raise InputError("needs the law, which this history has not kept", key="--characteristics", mend="leave it out")
    low, high = extent(history)
    x = np.linspace(low, high, CHARACTERISTICS + 2)[1:-1]
    times = np.linspace(0.0, history.until, STEPS + 1)
    paths = np.full((len(times), len(x)), np.nan)
    alive = np.ones(len(x), dtype=bool)
    for k, t in enumerate(times):
        paths[k, alive] = x[alive]
        if k == STEPS:
            break
        speed = np.asarray(history.law.derivative(Snapshot(history, t).value(x, "right")), dtype=float)
        moved = x + speed * (times[k + 1] - t)
        rows = history.alive(t)
        rows = rows[history.fronts["kind"][rows] != FAN]
        at = history.positions(rows, t)
        then = at + history.fronts["speed"][rows] * (times[k + 1] - t)
        crossed = np.searchsorted(np.sort(at), x) != np.searchsorted(np.sort(then), moved)
        alive &= ~crossed
        if history.ring is not None:
            length = history.ring[1] - history.ring[0]
            wrapped = history.ring[0] + np.mod(moved - history.ring[0], length)
            alive &= wrapped == moved  # a path ends at the seam; another one is drawn on its far side
            moved = wrapped
        x = moved
    lines = [np.column_stack([paths[:, i], times])[np.isfinite(paths[:, i])] for i in range(len(x))]
    axes.add_collection(
        LineCollection(lines, colors=colour, linewidths=0.8, linestyles=(0, (1, 2)), zorder=1), autolim=False
    )


def profiles(history: History, times: NDArray[np.float64], title: str = "") -> Figure:
    """Return the solution at several times in one pair of axes."""
    figure = figure_of()
    axes = figure.subplots()
    for k, t in enumerate(times):
        look = {"color": PROFILE_COLOURS[k % 6], "linestyle": DASHES[k // 6 % 6 if len(times) > 6 else k % 6]}
        draw_profile(axes, history, float(t), label=f"t = {t:.4g}", **look)
    x_label, _, u_label = labels(history)
    axes.set(xlabel=x_label, ylabel=u_label, xlim=extent(history))
    axes.legend(loc="lower left", bbox_to_anchor=(0.0, 1.0), ncols=min(len(times), 6), borderaxespad=0.2)
    axes.set_title(title, pad=24)
    return figure


def stacked(history: History, times: NDArray[np.float64], title: str = "") -> Figure:
    """Return profiles one above the other, each with its time."""
    figure = figure_of(7.6, max(3.0, 0.9 * len(times) + 1.2))
    rows = np.atleast_1d(figure.subplots(len(times), 1, sharex=True, sharey=True))
    x_label, _, u_label = labels(history)
    for axes, t in zip(rows, times[::-1], strict=True):
        draw_profile(axes, history, float(t), color=PROFILE_COLOURS[0])
        axes.text(1.01, 0.5, f"t = {t:.4g}", transform=axes.transAxes, va="center", fontsize=8.5)
        axes.set(xlim=extent(history))
    rows[-1].set_xlabel(x_label)
    figure.supylabel(u_label, fontsize=9.5)
    rows[0].set_title(title)
    return figure


def traces_figure(history: History, places: NDArray[np.float64], title: str = "") -> Figure:
    """Return state and amount passed at places over time."""
    from wavekin.probing import traces

    figure = figure_of(7.6, 6.0)
    upper, lower = figure.subplots(2, 1, sharex=True)
    _, t_label, u_label = labels(history)
    for k, trace in enumerate(traces(history, places)):
        look = {"color": PROFILE_COLOURS[k % 6], "linestyle": DASHES[k % 6]}
        edges = np.append(trace.times, history.until)
        upper.step(
            edges, np.append(trace.states, trace.states[-1]), where="post", label=f"x = {trace.place:.4g}", **look
        )
        lower.plot(edges, trace.passed(edges), **look)
    upper.set(ylabel=u_label)
    lower.set(xlabel=t_label, ylabel=axis_label("amount passed", "", _units(history)[1]), xlim=(0.0, history.until))
    upper.legend(loc="lower left", bbox_to_anchor=(0.0, 1.0), ncols=6, borderaxespad=0.2)
    upper.set_title(title, pad=24)
    return figure


def functionals(history: History, title: str = "") -> Figure:
    """Return variation, number of fronts and proven bounds against time."""
    from wavekin.statistics import series

    figure = figure_of(7.6, 6.6)
    panels = first, second, third = figure.subplots(3, 1, sharex=True)
    times = np.linspace(0.0, history.until, 600)
    counts, variation = series(history, times)
    state, amount = _units(history)
    for axes, values, words in (
        (first, variation, axis_label("total variation", "", state)),
        (second, counts, "fronts"),
    ):
        axes.plot(times, values, color=PROFILE_COLOURS[0])
        axes.set(ylabel=words)
        if values.min() > 0 and values.max() > 30 * values.min():
            axes.set_yscale("log")
        else:
            axes.set_ylim(0.0, None)
    bounds = ((history.error_bound, "L1", DASHES[0]), (history.cumulative_bound, "amounts", DASHES[1]))
    for (bound, words, dashes), colour in zip(bounds, PROFILE_COLOURS[1:], strict=False):
        values = np.array([bound(t) for t in times])
        third.plot(times, values, color=colour, linestyle=dashes, label=f"{words}: {values[-1]:.3g} at the end")
    third.set(ylabel=axis_label("proven bound", "", amount), xlabel=labels(history)[1], xlim=(0.0, history.until))
    third.set_ylim(0.0, None)
    third.legend(loc="upper left", ncols=2)
    figure.align_ylabels(panels)
    first.set_title(title)
    return figure


def _units(history: History) -> tuple[str, str]:
    """Return the units of state and of amounts (state times place)."""
    if history.law is None:
        return "", ""
    state, place = history.law.units.state, history.law.units.x
    if "-" in (state, place):
        return state, place if state == "-" else state
    return state, state.removesuffix(f"/{place}") if state.endswith(f"/{place}") else f"{state} {place}"


def ancestry(history: History, line: Lineage, title: str = "") -> Figure:
    """Return the x-t diagram with one front, its ancestors and its descendants lit.

    Dots stand at the initial fronts that its jump comes from, their areas as their shares; hollow where negative.
    """
    from matplotlib.lines import Line2D

    figure = figure_of(7.6, 5.8)
    axes = figure.subplots()
    draw_fronts(axes, history, legend=False)
    for collection in axes.collections:
        collection.set_alpha(0.18)
    handles = []
    strokes: tuple[tuple[NDArray[np.int64], str, float, Any, str], ...] = (
        (line.ancestors, PROFILE_COLOURS[1], 1.9, "solid", "ancestors"),
        (line.descendants, PROFILE_COLOURS[2], 1.9, (0, (4, 2)), "descendants"),
        (np.array([line.front]), "#111111", 3.0, "solid", f"front {line.front}"),
    )
    for rows, colour, width, dashes, words in strokes:
        if len(rows):
            _light(axes, history, rows, colour, width, dashes)
            handles.append(Line2D([], [], color=colour, linewidth=width, linestyle=dashes, label=words))
    size = np.abs(line.shares) / max(float(np.abs(line.shares).max(initial=0.0)), 1e-300)
    places = history.fronts["birth_x"][line.sources]
    for which, face in ((line.shares * line.shares.sum() > 0.0, "#111111"), (line.shares * line.shares.sum() < 0, "w")):
        look = {"s": 90.0 * size[which], "facecolors": face, "edgecolors": "#111111", "clip_on": False, "zorder": 6}
        axes.scatter(places[which], np.zeros(int(which.sum())), **look)
    dot: dict[str, Any] = {"marker": "o", "linestyle": "none", "markeredgecolor": "#111111"}
    handles.append(Line2D([], [], color="#111111", label="where its jump comes from", **dot))
    if line.lost_fan is not None:
        axes.plot(*line.lost_fan[::-1], marker="D", markersize=7, color="#ffffff", markeredgecolor="#111111", zorder=7)
        handles.append(Line2D([], [], color="#ffffff", label="last fan front absorbed", **(dot | {"marker": "D"})))
    axes.legend(
        handles=handles, loc="lower left", bbox_to_anchor=(0.0, 1.0), ncols=5, borderaxespad=0.2, columnspacing=1.2
    )
    axes.set_title(title, pad=22)
    return figure


def _light(axes: Axes, history: History, rows: NDArray[np.int64], colour: str, width: float, dashes: Any) -> None:
    """Draw fronts in one colour: fans thin and only where a picture shows them, all others at full width."""
    from matplotlib.collections import LineCollection
    from wavekin.records import FAN

    many = len(rows) > RASTER_FROM
    fan = (history.fronts["kind"][rows] == FAN) & (len(rows) > 1)
    shown = drawn(history)[rows]
    for part, share in ((rows[fan & shown], 0.35), (rows[~fan & shown], 1.0)):
        lines = LineCollection(
            list(segments(history, part)), colors=colour, linewidths=width * share, linestyles=dashes,
            zorder=4 if share < 1.0 else 5, rasterized=many, capstyle="round" if dashes == "solid" else "butt",
        )  # fmt: skip
        axes.add_collection(lines, autolim=False)


def save_animation(
    history: History, path: str | Path, *, title: str = "", frames: int = 60, replace: bool = False
) -> None:
    """Write a GIF of the solution over time, drawn by matplotlib and Pillow alone.

    Raises
    ------
    InputError
        For an ending other than .gif or a place that cannot be written.
    """
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from PIL import Image

    if Path(path).suffix.lower() != ".gif":
        raise InputError("must end in .gif", file=str(path), value=Path(path).suffix, mend="name it so")
    data = history.start.values
    room = 0.05 * float(np.ptp(data)) or 0.5
    x_label, _, u_label = labels(history)
    unit = "" if history.law is None or history.law.units.t == "-" else f" {history.law.units.t}"
    images = []
    with style():
        figure = figure_of(6.4, 3.6)
        canvas = FigureCanvasAgg(figure)
        axes = figure.subplots()
        for t in np.linspace(0.0, history.until, frames):
            axes.clear()
            draw_profile(axes, history, float(t), color=PROFILE_COLOURS[0])
            axes.set(xlabel=x_label, ylabel=u_label, xlim=extent(history), ylim=(data.min() - room, data.max() + room))
            axes.set_title(title)
            axes.set_title(f"t = {_fixed(float(t), history.until)}{unit}", loc="right", fontweight="normal")
            canvas.draw()
            images.append(Image.fromarray(np.asarray(canvas.buffer_rgba())[..., :3].copy()).quantize(64))
    with written_beside(path, replace) as temporary:
        images[0].save(
            temporary, format="GIF", save_all=True, append_images=images[1:], duration=80, loop=0, optimize=True
        )


def _fixed(t: float, until: float) -> str:
    """Return a time with as many places as tell a thousand frames apart, so that its text does not jump."""
    return f"{t:.{max(0, 3 - int(np.floor(np.log10(until))))}f}" if 1e-3 <= until < 1e6 else f"{t:.3e}"
