"""The word ``report``: one page that a colleague can open."""

from __future__ import annotations

import argparse


def add(words: argparse._SubParsersAction) -> None:
    """Add the word to the command line."""
    report = words.add_parser("report", help="write a self-contained HTML page about a history")
    report.add_argument("history", metavar="OUT.h5")
    report.add_argument("-o", "--output", required=True, metavar="REPORT.html")
    report.add_argument("--replace", action="store_true", help="replace a file that exists")
    report.set_defaults(run=_report)


def _report(arguments: argparse.Namespace) -> int:
    from wavekin.io.report import save_report
    from wavekin.io.store import check_writable, load, read_words

    check_writable(arguments.output, arguments.replace, [arguments.history])
    save_report(load(arguments.history), arguments.output, read_words(arguments.history), replace=arguments.replace)
    return 0
