"""The word ``score``: the judgement of another code's output."""

from __future__ import annotations

import argparse
import json
import sys
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from wavekin.scoring import Order, Score


def add(words: argparse._SubParsersAction) -> None:
    """Add the word to the command line."""
    score = words.add_parser("score", help="judge another code's cell averages, with honest error bars")
    score.add_argument("history", metavar="OUT.h5")
    score.add_argument("theirs", nargs="+", metavar="THEIRS", help="CSV, NPZ or netCDF; several files are resolutions")
    score.add_argument("--time", type=float, metavar="T", help="time of files that state none, or the one to judge")
    score.add_argument("--json", action="store_true", help="as JSON, for machines")
    score.add_argument("--figure", metavar="F.png", help="draw errors against width (.png, .svg or .pdf)")
    score.add_argument("--replace", action="store_true", help="replace a figure that exists")
    score.set_defaults(run=_score)


def _score(arguments: argparse.Namespace) -> int:
    from wavekin.errors import InputError
    from wavekin.io.candidates import read_candidates
    from wavekin.io.figures import check_format
    from wavekin.io.store import check_writable, load, read_words
    from wavekin.scoring import orders, score, verdicts

    if arguments.figure:
        check_format(arguments.figure)
        check_writable(arguments.figure, arguments.replace, [arguments.history])
    history, words = load(arguments.history), read_words(arguments.history)
    judged: dict[float, list[tuple[str, Score]]] = {}
    for path in arguments.theirs:
        for one in read_candidates(path, arguments.time):
            if one.sha256 and words["sha256"] and one.sha256 != words["sha256"]:
                print(f"wavekin: warning: {path} states another case ({one.sha256[:12]}...)", file=sys.stderr)
            try:
                judged.setdefault(one.t, []).append((one.file, score(history, one.cells, one.t, one.values)))
            except InputError as error:
                raise error.located(path) from error
    report = []
    for t in sorted(judged):
        scores = [score for _, score in judged[t]]
        report.append({"t": t, "files": judged[t], "orders": orders(scores), "verdicts": verdicts(scores)})
    print(json.dumps(_plain(report), indent=2) if arguments.json else "\n".join(_lines(report)))
    if arguments.figure:
        _draw(report, arguments.figure, arguments.replace)
    return 0


def _plain(report: list[dict[str, Any]]) -> list[dict[str, Any]]:
    """Return the report as plain data."""
    return [
        {
            "t": part["t"],
            "files": [{"file": file, **asdict(score)} for file, score in part["files"]],
            "orders": [asdict(order) for order in part["orders"]],
            "verdicts": part["verdicts"],
        }
        for part in report
    ]


def _lines(report: list[dict[str, Any]]) -> list[str]:
    """Return the report as lines for people."""
    lines = ["errors are measured [least, most], with the reference's proven bound taken into account"]
    for part in report:
        lines.append(f"t = {part['t']:g}")
        for file, score in part["files"]:
            lines += _one(file, score)
        lines += [_order_line(order) for order in part["orders"]]
        lines += [f"  verdict: {said}" for said in part["verdicts"]]
    return lines


def _one(file: str, score: Score) -> list[str]:
    lines = [
        f"  {file}  (cell width {score.width:.4g})",
        f"    L1               {score.l1}",
        f"    L2               {score.l2}",
        f"    away from fronts {score.away}",
        f"    Wasserstein-1    {score.wasserstein}",
        f"    mass drift       {score.mass_drift}",
        f"    over/undershoot  {score.overshoot:.3g} / {score.undershoot:.3g}",
        f"    variation excess {score.variation_excess:+.3g}",
        f"    entropy defect   {score.entropy_defect:+.3g}{'  VIOLATED' if score.entropy_violated else ''}",
    ]
    for front in score.fronts:
        lines.append(
            f"    front at {front.x:.6g} ({front.left:.4g} | {front.right:.4g}): displaced {front.displacement}, "
            f"over {front.smeared:.2g} cells: {front.verdict}"
        )
    return lines


def _order_line(order: Order) -> str:
    text = f"  order {order.coarse:.3g} -> {order.fine:.3g}: {order.order}"
    return text if order.decided else f"{text}; {order.advice}"


def _draw(report: list[dict[str, Any]], path: str, replace: bool) -> None:
    """Draw the L1 error against the width, with its interval as a bar."""
    from matplotlib.figure import Figure
    from wavekin.io.figures import save_figure, style

    with style():
        figure = Figure(figsize=(6.0, 4.4), layout="constrained")
        axes = figure.subplots()
        for part, marker in zip(report, "osd^v<>ph*" * (len(report) // 10 + 1), strict=False):
            scores = sorted((score for _, score in part["files"]), key=lambda one: one.width)
            widths, values = [s.width for s in scores], [s.l1.value for s in scores]
            bars = [[s.l1.value - s.l1.low for s in scores], [s.l1.high - s.l1.value for s in scores]]
            axes.errorbar(widths, values, yerr=bars, marker=marker, capsize=4, label=f"t = {part['t']:g}")
        axes.set(xscale="log", yscale="log", xlabel="cell width", ylabel="L1 error of the cell averages")
        axes.set_title("L1 error with the interval from the proven bound")
        axes.legend()
        save_figure(figure, path, replace)
