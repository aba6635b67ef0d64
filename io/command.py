"""The command line. Whatever a word needs is imported when that word is run, so that help comes at once."""

from __future__ import annotations

import argparse
import importlib
import io
import json
import os
import sys
import time
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any, NoReturn

from wavekin.errors import InputError
from wavekin.version import __version__

if TYPE_CHECKING:
    from wavekin.io.casefile import Case

#: Modules that add further words; each has ``add(subparsers)``.
WORDS: tuple[str, ...] = (
    "wavekin.io.command_sample",
    "wavekin.io.command_score",
    "wavekin.io.command_trace",
    "wavekin.io.command_draw",
    "wavekin.io.command_report",
    "wavekin.io.command_sweep",
)

DESCRIPTION = """Follow every shock, fan and contact of a 1-D hyperbolic conservation law by front tracking,
with a proven bound on how far the answer can be from the truth."""


class Parser(argparse.ArgumentParser):
    """A parser whose complaints are one sentence."""

    def error(self, message: str) -> NoReturn:
        """Say what is wrong and how to get help, and leave with status 2."""
        self.exit(2, f"{self.prog}: {message}; see {self.prog} --help\n")


def parser() -> argparse.ArgumentParser:
    """Return the parser of all words."""
    top = Parser(prog="wavekin", description=DESCRIPTION)
    top.add_argument("--version", action="version", version=f"wavekin {__version__}")
    words = top.add_subparsers(dest="word", metavar="WORD", required=True, parser_class=Parser)

    run = words.add_parser("run", help="run a case and keep its history")
    run.add_argument("case", metavar="CASE.toml", help="a case file, or the name of a ready case (see: wavekin cases)")
    run.add_argument("-o", "--output", metavar="OUT.h5", help="history file; by default named after the case")
    run.add_argument("--picture", metavar="OUT.png", help="also draw the x-t diagram (.png, .svg or .pdf)")
    run.add_argument("--replace", action="store_true", help="replace files that exist")
    run.add_argument("--quiet", action="store_true", help="no progress and no summary")
    run.set_defaults(run=_run)

    audit = words.add_parser("audit", help="check everything that a history claims; status 1 where something fails")
    audit.add_argument("history", metavar="OUT.h5")
    audit.set_defaults(run=_audit)

    show = words.add_parser("show", help="print the summary of a history")
    show.add_argument("history", metavar="OUT.h5")
    show.add_argument("--json", action="store_true", help="as JSON, for machines")
    show.set_defaults(run=_show)

    check = words.add_parser("check", help="check a case file without running it")
    check.add_argument("case", metavar="CASE.toml")
    check.set_defaults(run=_check)

    cases = words.add_parser("cases", help="list the ready cases, or copy one")
    cases.add_argument("name", nargs="?", help="name of a ready case")
    cases.add_argument("--copy", metavar="FOLDER", help="copy that case and its tables to a folder")
    cases.set_defaults(run=_cases)

    for module in WORDS:
        importlib.import_module(module).add(words)
    return top


def main(argv: Sequence[str] | None = None) -> int:
    """Run the command line and return its exit status: 0, 1 (an audit failed), 2 (bad input), 130 (stopped)."""
    if isinstance(sys.stdout, io.TextIOWrapper):
        sys.stdout.reconfigure(errors="backslashreplace")  # a title may hold what the terminal's encoding lacks
    try:
        arguments = parser().parse_args(argv)
        return int(arguments.run(arguments))
    except InputError as error:
        print(f"wavekin: {error}", file=sys.stderr)
        return 2
    except KeyboardInterrupt:
        print("wavekin: stopped; nothing half-written was left", file=sys.stderr)
        return 130
    except BrokenPipeError:
        return 0
    except MemoryError:
        print("wavekin: out of memory; raise the error budget, lower levels or stop earlier", file=sys.stderr)
        return 2


def _case(name: str) -> Case:
    """Return the case of a file, or the ready case of that name."""
    from wavekin.io.casefile import read_case
    from wavekin.io.ready import ready_case

    if not os.path.exists(name) and "/" not in name and not name.endswith(".toml"):
        return ready_case(name)
    return read_case(name)


def _run(arguments: argparse.Namespace) -> int:
    from wavekin.io.figures import check_format, save_run_figure
    from wavekin.io.progress import Progress
    from wavekin.io.store import check_writable, save
    from wavekin.io.summary import facts, summary

    case = _case(arguments.case)
    output = Path(arguments.output or f"{Path(case.path).stem}.h5")
    inputs = [Path(case.path), *(Path(case.path).parent / name for name in case.tables)]
    check_writable(output, arguments.replace, inputs)
    if arguments.picture:
        check_format(arguments.picture)
        check_writable(arguments.picture, arguments.replace, inputs)
        if Path(arguments.picture).resolve() == output.resolve():
            raise InputError(
                "is the history's name too", key="--picture", value=arguments.picture, mend="choose another"
            )
    begin = time.perf_counter()
    with Progress(float(case.run["until"]), arguments.quiet) as progress:
        history = case.track(progress)
    took = time.perf_counter() - begin
    save(history, output, replace=arguments.replace, case=case)
    if arguments.picture:
        save_run_figure(history, arguments.picture, title=case.title, caution=case.caution, replace=arguments.replace)
    if not arguments.quiet:
        print(summary(facts(history, {"title": case.title, "caution": case.caution, "sha256": case.sha256})))
        written = [str(output), *([arguments.picture] if arguments.picture else [])]
        print(f"  written           {', '.join(written)}  (run took {took:.2f} s)")
    return 0


def _audit(arguments: argparse.Namespace) -> int:
    from wavekin.auditing import audit
    from wavekin.io.store import load

    found = audit(load(arguments.history))
    print(found)
    print("all checks hold" if found.holds else "AUDIT FAILED")
    return 0 if found.holds else 1


def _show(arguments: argparse.Namespace) -> int:
    from wavekin.io.store import load, read_words
    from wavekin.io.summary import facts, summary

    known: dict[str, Any] = facts(load(arguments.history), read_words(arguments.history))
    print(json.dumps(known, indent=2) if arguments.json else summary(known))
    return 0


def _check(arguments: argparse.Namespace) -> int:
    case = _case(arguments.case)
    case.check()
    print(f"{case.path}: {case.law!r}, {len(case.start.edges)} edges, until {case.run['until']:g}: can be run")
    return 0


def _cases(arguments: argparse.Namespace) -> int:
    from wavekin.io.ready import copy_case, ready_cases

    if arguments.name is None:
        if arguments.copy:
            raise InputError("needs the name of a case", key="--copy", value=arguments.copy, mend="see wavekin cases")
        for name, title in ready_cases().items():
            print(f"{name:<22} {title}")
        return 0
    if arguments.copy:
        for path in copy_case(arguments.name, arguments.copy):
            print(path)
        return 0
    print(_case(arguments.name).text, end="")
    return 0
