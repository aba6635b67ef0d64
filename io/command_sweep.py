"""The word ``sweep``: many members of one case as one data set."""

from __future__ import annotations

import argparse


def add(words: argparse._SubParsersAction) -> None:
    """Add the word to the command line."""
    sweep = words.add_parser("sweep", help="run a study: a case varied many times, kept as one data set")
    sweep.add_argument("study", metavar="STUDY.toml")
    sweep.add_argument("-o", "--output", required=True, metavar="OUT.nc")
    sweep.add_argument("--processes", type=int, metavar="N", help="local processes; as many as cores by default")
    sweep.add_argument("--scheduler", metavar="ADDRESS", help="run on an existing Dask cluster instead")
    sweep.add_argument("--replace", action="store_true", help="replace a data set that exists")
    sweep.add_argument("--quiet", action="store_true", help="no progress")
    sweep.set_defaults(run=_sweep)


def _sweep(arguments: argparse.Namespace) -> int:
    import multiprocessing
    import sys
    from concurrent.futures import ProcessPoolExecutor

    from wavekin.errors import InputError
    from wavekin.io.progress import Progress
    from wavekin.io.store import check_writable
    from wavekin.io.study import read_study, run_study

    if not arguments.output.endswith(".nc"):
        raise InputError("must end in .nc", key="--output", value=arguments.output, mend="name it so")
    if arguments.processes is not None and arguments.processes < 1:
        raise InputError("must be at least 1", key="--processes", value=arguments.processes, mend="leave it out")
    check_writable(arguments.output, arguments.replace)
    study = read_study(arguments.study)
    if arguments.scheduler:
        try:
            from dask.distributed import Client
        except ImportError as error:
            raise InputError("needs Dask", key="--scheduler", mend="pip install 'wavekin[dask]'") from error
        try:
            executor = Client(arguments.scheduler, timeout=10).get_executor()
        except OSError as error:
            raise InputError(
                "cannot be reached", key="--scheduler", value=arguments.scheduler, mend="check the address"
            ) from error
    else:
        executor = ProcessPoolExecutor(arguments.processes, multiprocessing.get_context("spawn"))
    with executor, Progress(float(study.size), arguments.quiet) as bar:
        failures = run_study(
            study,
            arguments.output,
            executor,
            replace=arguments.replace,
            progress=lambda done: bar(float(done), 0, done),
        )
    for member, reason in failures:
        print(f"member {member} failed: {reason}", file=sys.stderr)
    if not arguments.quiet:
        print(f"{study.size - len(failures)} of {study.size} members in {arguments.output}")
    return 0 if len(failures) < study.size else 1
