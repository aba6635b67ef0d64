"""The word ``trace``: the story of a front, and statistics of all interactions."""

from __future__ import annotations

import argparse
import json
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from wavekin.history import History
    from wavekin.lineage import Lineage


def add(words: argparse._SubParsersAction) -> None:
    """Add the word to the command line."""
    trace = words.add_parser("trace", help="which waves merged into a front; statistics of interactions")
    trace.add_argument("history", metavar="OUT.h5")
    which = trace.add_mutually_exclusive_group()
    which.add_argument("--front", type=int, metavar="ROW", help="row of the front")
    which.add_argument("--near", nargs=2, type=float, metavar=("T", "X"), help="the front nearest to a place at a time")
    which.add_argument("--statistics", action="store_true", help="collisions by kind, strengths, decay")
    trace.add_argument("--json", action="store_true", help="as JSON, for machines")
    trace.set_defaults(run=_trace)


def _trace(arguments: argparse.Namespace) -> int:
    from wavekin.io.store import load
    from wavekin.lineage import front_at, lineage_of, strongest

    history = load(arguments.history)
    if arguments.statistics:
        known = statistics(history)
        print(json.dumps(known, indent=2) if arguments.json else _statistics_text(known))
        return 0
    if arguments.front is not None:
        row = arguments.front
    else:
        row = front_at(history, *arguments.near) if arguments.near else strongest(history)
    told = story(history, lineage_of(history, row))
    print(json.dumps(told, indent=2) if arguments.json else _story_text(told))
    return 0


def story(history: History, line: Lineage) -> dict[str, Any]:
    """Return a lineage as plain data."""
    from wavekin.records import KINDS

    front = history.fronts[line.front]
    return {
        "front": line.front,
        "kind": KINDS[front["kind"]],
        "left": float(front["left"]),
        "right": float(front["right"]),
        "speed": float(front["speed"]),
        "born": [float(front["birth_t"]), float(front["birth_x"])],
        "ended": None if front["ended_at"] < 0 else [float(front["death_t"]), float(front["death_x"])],
        "ancestors": len(line.ancestors),
        "collisions": len(line.collisions),
        "descendants": len(line.descendants),
        "feeders": len(line.feeders),
        "cancelled": line.cancelled,
        "lost_fan": line.lost_fan,
        "jump": float(front["right"] - front["left"]),
        "sources": [
            {"front": int(row), "x": float(history.fronts["birth_x"][row]), "share": float(share)}
            for row, share in zip(line.sources, line.shares, strict=True)
        ],
    }


def statistics(history: History) -> dict[str, Any]:
    """Return the statistics of a run as plain data."""
    import numpy as np
    from wavekin.errors import InputError
    from wavekin.statistics import collision_kinds, decay, series, strength_histogram

    edges, counts = strength_histogram(history)
    times = np.linspace(0.0, history.until, 11)
    alive, variation = series(history, times)
    known: dict[str, Any] = {
        "collisions": len(history.collisions),
        "kinds": collision_kinds(history),
        "strengths": {"edges": edges.tolist(), "counts": counts.tolist()},
        "series": {"t": times.tolist(), "fronts": alive.tolist(), "variation": variation.tolist()},
    }
    for quantity in ("variation", "fronts"):
        try:
            fit = decay(history, quantity)
            known[f"{quantity}_decay"] = {"exponent": fit.exponent, "low": fit.low, "high": fit.high}
        except InputError:
            known[f"{quantity}_decay"] = None
    return known


def _story_text(told: dict[str, Any]) -> str:
    ended = "alive at the end" if told["ended"] is None else "ended at t = {:.6g}, x = {:.6g}".format(*told["ended"])
    lines = [
        f"front {told['front']}: {told['kind']} from {told['left']:.6g} to {told['right']:.6g}"
        f", speed {told['speed']:.6g}",
        "  born at t = {:.6g}, x = {:.6g}; ".format(*told["born"]) + ended,
        f"  fed by {told['ancestors']} fronts in {told['collisions']} collisions; feeds {told['descendants']} fronts",
    ]
    if told["collisions"]:
        lines.append(
            f"  behind it {told['feeders']} initial fronts; variation cancelled on the way {told['cancelled']:.6g}"
        )
    if told["lost_fan"]:
        lines.append("  last fan front absorbed at t = {:.6g}, x = {:.6g}".format(*told["lost_fan"]))
    sources = sorted(told["sources"], key=lambda source: -abs(source["share"]))
    many = f"{len(sources)} initial fronts" if len(sources) != 1 else "1 initial front"
    lines.append(f"  its jump of {told['jump']:.6g} comes from {many}" + (", mostly:" if len(sources) > 12 else ":"))
    lines += [f"    front {s['front']:>7} at x = {s['x']:<12.6g} {s['share']:+.6g}" for s in sources[:12]]
    return "\n".join(lines)


def _statistics_text(known: dict[str, Any]) -> str:
    from wavekin.statistics import MEETINGS, OUTCOMES

    lines = [f"{known['collisions']} collisions, by what met"]
    lines += [f"  {kind:<14} {known['kinds'][kind]}" for kind in MEETINGS]
    lines += ["by what came of them", *(f"  {kind:<14} {known['kinds'][kind]}" for kind in OUTCOMES)]
    lines.append("over the last decade of time")
    for quantity in ("variation", "fronts"):
        fit = known[f"{quantity}_decay"]
        if fit:
            interval = f"95 % interval {fit['low']:.4f} to {fit['high']:.4f}"
            lines.append(f"  {quantity} ~ t^{fit['exponent']:.4f}  ({interval})")
    lines += ["over time", "  {:>12} {:>10} {:>14}".format("t", "fronts", "variation")]
    columns = (known["series"][name] for name in ("t", "fronts", "variation"))
    lines += [f"  {t:12.6g} {fronts:10d} {variation:14.6g}" for t, fronts, variation in zip(*columns, strict=True)]
    lines.append("strengths of all fronts")
    edges, counts = known["strengths"]["edges"], known["strengths"]["counts"]
    lines += [f"  {a:10.3g} to {b:<10.3g} {n}" for a, b, n in zip(edges, edges[1:], counts, strict=False) if n]
    return "\n".join(lines)
