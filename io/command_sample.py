"""The word ``sample``: data on any grid, points and traces out of a history."""

from __future__ import annotations

import argparse


def add(words: argparse._SubParsersAction) -> None:
    """Add the word to the command line."""
    sample = words.add_parser("sample", help="exact cell averages, points or traces of a history")
    sample.add_argument("history", metavar="OUT.h5")
    what = sample.add_mutually_exclusive_group(required=True)
    what.add_argument(
        "--cells", metavar="FROM:TO:COUNT|FILE", help="cells to average over; a CSV file of edges or centres"
    )
    what.add_argument("--points", metavar="X,X|FROM:TO:COUNT", help="places at which to take the state")
    what.add_argument("--traces", metavar="X,X", help="places at which to follow state, flux and amount passed")
    what.add_argument(
        "--arrival", nargs=2, type=float, metavar=("X", "STATE"), help="print when a state first reaches X"
    )
    what.add_argument(
        "--stored", nargs=2, type=float, metavar=("A", "B"), help="amount between two places at the times"
    )
    kind = sample.add_mutually_exclusive_group()
    kind.add_argument("--edges", dest="kind", action="store_const", const="edges", help="the cells' file holds edges")
    kind.add_argument("--centres", dest="kind", action="store_const", const="centres", help="it holds centres")
    sample.add_argument("--times", metavar="T,T|FROM:TO:COUNT", help="times; for traces every change where left out")
    sample.add_argument("--fans", choices=("joined", "steps"), default="joined", help="lines through fans, or steps")
    sample.add_argument("-o", "--output", metavar="FILE.csv|.npz|.nc", help="needed for all but --arrival")
    sample.add_argument("--replace", action="store_true", help="replace a file that exists")
    sample.add_argument("--quiet", action="store_true", help="no progress")
    sample.set_defaults(run=_sample)


def _sample(arguments: argparse.Namespace) -> int:
    import numpy as np
    from wavekin.errors import InputError
    from wavekin.io.dataset import check_ending, provenance, save_averages, save_rows
    from wavekin.io.progress import Progress
    from wavekin.io.ranges import cells, numbers
    from wavekin.io.store import check_writable, load, read_words

    if arguments.arrival is not None:
        return _arrival(arguments)
    if arguments.output is None:
        raise InputError("is missing", key="--output", mend="give a file that ends in .csv, .npz or .nc")
    check_ending(arguments.output)
    check_writable(arguments.output, arguments.replace, [arguments.history, arguments.cells or arguments.history])
    if arguments.times is None and arguments.traces is None:
        raise InputError("is missing", key="--times", mend="give times such as 0.5,1.0 or FROM:TO:COUNT")
    times = numbers(arguments.times, "--times") if arguments.times is not None else None
    history, words = load(arguments.history), read_words(arguments.history)
    about = provenance(history, words, arguments.fans)
    if arguments.cells is not None:
        assert times is not None
        edges = cells(arguments.cells, arguments.kind)
        with Progress(float(len(times)), arguments.quiet) as bar:
            save_averages(
                history, arguments.output, edges, times, fans=arguments.fans, words=words, replace=arguments.replace,
                progress=lambda done: bar(float(done), len(edges) - 1, done),
            )  # fmt: skip
        return 0
    from wavekin.probing import passed_bound, stored, traces
    from wavekin.sampling import points

    if arguments.stored is not None:
        assert times is not None
        bounds = np.array([2.0 * history.cumulative_bound(float(t)) for t in times])
        header = ["t", "stored", "bound"]
        low, high = arguments.stored
        columns = [times, stored(history, low, high, times, arguments.fans), bounds]
    elif arguments.points is not None:
        assert times is not None
        x = numbers(arguments.points, "--points")
        left, right = points(history, x, times, arguments.fans)
        header, columns = ["t", "x", "left", "right"], [np.repeat(times, len(x)), np.tile(x, len(times))]
        columns += [left.ravel(), right.ravel()]
    else:
        header = ["x", "t", "state", "flux", "passed", "passed_bound"]
        parts = []
        for trace in traces(history, numbers(arguments.traces, "--traces")):
            t = trace.times if times is None else times
            at = np.searchsorted(trace.times, t, side="right") - 1
            bounds = np.array([passed_bound(history, float(moment)) for moment in t])
            parts.append([np.full(len(t), trace.place), t, trace.at(t), trace.fluxes[at], trace.passed(t), bounds])
        columns = [np.concatenate(part) for part in zip(*parts, strict=True)]
    save_rows(arguments.output, header, columns, about, arguments.replace)
    return 0


def _arrival(arguments: argparse.Namespace) -> int:
    """Print the time at which a state first reaches a place."""
    from wavekin.io.store import load
    from wavekin.probing import traces

    place, state = arguments.arrival
    print(f"{traces(load(arguments.history), place)[0].arrival(state):.12g}")
    return 0
