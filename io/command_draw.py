"""The word ``draw``: pictures of a history."""

from __future__ import annotations

import argparse

KINDS = ("xt", "profiles", "stacked", "traces", "functionals", "ancestry", "animation")


def add(words: argparse._SubParsersAction) -> None:
    """Add the word to the command line."""
    draw = words.add_parser("draw", help="draw a history: x-t diagram, profiles, traces, ancestry, animation, ...")
    draw.add_argument("history", metavar="OUT.h5")
    draw.add_argument("--kind", choices=KINDS, default="xt")
    draw.add_argument("-o", "--output", required=True, metavar="F.png|.svg|.pdf|.gif")
    draw.add_argument("--fill", action="store_true", help="xt: colour the plane by state")
    draw.add_argument("--characteristics", action="store_true", help="xt: add characteristics")
    draw.add_argument("--times", metavar="T,T|FROM:TO:COUNT", help="profiles, stacked: times; six even ones by default")
    draw.add_argument("--places", metavar="X,X", help="traces: places")
    draw.add_argument(
        "--front", type=int, metavar="ROW", help="ancestry: the front; the strongest at the end by default"
    )
    draw.add_argument("--frames", type=int, default=60, help="animation: number of frames")
    draw.add_argument("--title", help="title; the case's own by default")
    draw.add_argument("--replace", action="store_true", help="replace a file that exists")
    draw.set_defaults(run=_draw)


def _draw(arguments: argparse.Namespace) -> int:
    import numpy as np
    from wavekin.errors import InputError
    from wavekin.io import drawings
    from wavekin.io.figures import check_format, save_figure, style
    from wavekin.io.ranges import numbers
    from wavekin.io.store import check_writable, load, read_words
    from wavekin.lineage import lineage_of, strongest

    check_writable(arguments.output, arguments.replace, [arguments.history])
    if arguments.kind != "animation":
        check_format(arguments.output)
    history = load(arguments.history)
    title = read_words(arguments.history)["title"] if arguments.title is None else arguments.title
    if arguments.kind == "animation":
        if not 2 <= arguments.frames <= 1000:
            raise InputError("must be 2 to 1000", key="--frames", value=arguments.frames, mend="try 60")
        drawings.save_animation(
            history, arguments.output, title=title, frames=arguments.frames, replace=arguments.replace
        )
        return 0
    times = numbers(arguments.times, "--times") if arguments.times else np.linspace(0.0, history.until, 6)
    if arguments.kind == "traces" and not arguments.places:
        raise InputError("is missing", key="--places", mend="give places such as 0.5,1.0")
    with style():
        match arguments.kind:
            case "xt":
                figure = drawings.xt(history, title, arguments.fill, arguments.characteristics)
            case "profiles":
                figure = drawings.profiles(history, times, title)
            case "stacked":
                figure = drawings.stacked(history, times, title)
            case "traces":
                figure = drawings.traces_figure(history, numbers(arguments.places, "--places"), title)
            case "functionals":
                figure = drawings.functionals(history, title)
            case _:
                front = strongest(history) if arguments.front is None else arguments.front
                figure = drawings.ancestry(history, lineage_of(history, front), title)
        save_figure(figure, arguments.output, arguments.replace)
    return 0
