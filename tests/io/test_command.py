"""The command line, run in the process where that is enough and as a process where it is not."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from wavekin.io.command import main

BOX = (
    '[law]\nname = "burgers"\n[start]\nedges = [0.0, 1.0]\nvalues = [0.0, 1.0, 0.0]\n[run]\nuntil = 4.0\nlevels = 33\n'
)


@pytest.fixture
def case(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.chdir(tmp_path)
    path = tmp_path / "box.toml"
    path.write_text(BOX)
    return path


def test_run_show_audit_check(case: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["check", "box.toml"]) == 0
    assert main(["run", "box.toml", "--picture", "box.png"]) == 0
    assert "proven L1 bound" in capsys.readouterr().out
    assert (case.parent / "box.png").read_bytes().startswith(b"\x89PNG")
    assert main(["show", "box.h5", "--json"]) == 0
    known = json.loads(capsys.readouterr().out)
    # Box of height 1 and width 1: mass 1; after t = 2 the shock is at sqrt(2 t) with strength sqrt(2 / t)
    # (Lax 1957; Whitham 1974, from memory).
    assert known["mass_end"] == pytest.approx(1.0, abs=1e-12)
    assert known["variation_end"] == pytest.approx(2.0 * (2.0 / 4.0) ** 0.5, abs=2.0 / 32)
    assert main(["audit", "box.h5"]) == 0


def test_audit_of_a_tampered_file_fails_with_status_1(case: Path) -> None:
    import h5py

    assert main(["run", "box.toml", "--quiet"]) == 0
    with h5py.File("box.h5", "a") as file:
        file["fronts/speed"][3] *= 1.001
    assert main(["audit", "box.h5"]) == 1


@pytest.mark.parametrize(
    "words, part",
    [
        (["run", "none.toml"], "does not exist"),
        (["run", "signal_quue"], "did you mean signal_queue?"),
        (["run", "box.toml", "-o", "no/such/box.h5"], "folder"),
        (["run", "box.toml", "-o", "."], "folder"),
        (["run", "box.toml", "--picture", "box.bmp"], ".png, .svg or .pdf"),
        (["run", "box.toml", "-o", "there.h5"], "exists already"),
        (["audit", "box.toml"], "no HDF5"),
        (["show", "none.h5"], "does not exist"),
        (["cases", "--copy", "."], "needs the name"),
        (["run", "a" * 400], "neither a file nor a ready case"),
        (["run", "a" * 400 + ".toml"], "File name too long"),
        (["run", "box.toml", "-o", "a" * 400], "File name too long"),
        (["show", "a" * 400], "does not exist"),
        (["run", "box.toml", "-o", "box.toml", "--replace"], "is what this command reads"),
        (["run", "box.toml", "--picture", "box.png", "-o", "./box.png", "--replace"], "the history's name too"),
    ],
)
def test_bad_input_is_one_sentence_and_status_2(
    case: Path, capsys: pytest.CaptureFixture[str], words: list[str], part: str
) -> None:
    Path("there.h5").write_text("precious")
    assert main(words) == 2
    _, err = capsys.readouterr()
    assert part in err and err.startswith("wavekin: ") and err.count("\n") == 1 and "Traceback" not in err
    assert Path("there.h5").read_text() == "precious"
    assert sorted(p.name for p in case.parent.iterdir()) == ["box.toml", "there.h5"]


def test_replace_never_takes_an_input_or_a_device(case: Path, capsys: pytest.CaptureFixture[str]) -> None:
    Path("flux.csv").write_text("u,f\n0,0\n1,0.5\n")
    Path("table.toml").write_text(BOX.replace('name = "burgers"', 'table = "flux.csv"'))
    os.mkfifo("pipe")
    assert main(["run", "box.toml", "--quiet"]) == 0
    Path("cells.csv").write_text("edge\n0\n1\n")
    before = {path.name: path.read_bytes() for path in case.parent.iterdir() if path.is_file()}
    for words in (
        ["run", "table.toml", "-o", "flux.csv", "--replace"],
        ["run", "box.toml", "-o", "pipe", "--replace"],
        ["report", "box.h5", "-o", "box.h5", "--replace"],
        ["sample", "box.h5", "--cells", "cells.csv", "--times", "1", "-o", "cells.csv", "--replace"],
    ):
        assert main(words) == 2
        assert capsys.readouterr().err.count("\n") == 1
    assert {path.name: path.read_bytes() for path in case.parent.iterdir() if path.is_file()} == before
    assert Path("pipe").is_fifo()


def test_title_that_the_terminal_cannot_show_is_no_fault(case: Path) -> None:
    case.write_text('title = "Flu\u00df \u03a9"\n' + BOX, encoding="utf-8")
    done = subprocess.run(
        [sys.executable, "-m", "wavekin.io", "run", "box.toml"], capture_output=True, cwd=case.parent,
        env={**os.environ, "PYTHONIOENCODING": "ascii"},
    )  # fmt: skip
    assert done.returncode == 0 and b"Flu\\xdf \\u03a9" in done.stdout and not done.stderr


@pytest.mark.parametrize("words", [[], ["fly"], ["run"], ["run", "box.toml", "--fast"]])
def test_wrong_words_leave_with_status_2(case: Path, words: list[str], capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as caught:
        main(words)
    assert caught.value.code == 2
    assert capsys.readouterr().err.count("\n") == 1


def test_help_imports_nothing_heavy() -> None:
    """Counts modules, not seconds: help must answer at once on a slow machine too."""
    code = (
        "import sys\nfrom wavekin.io.command import main\n"
        "try:\n    main(['--help'])\nexcept SystemExit:\n    pass\n"
        "heavy = {'numpy', 'scipy', 'numba', 'matplotlib', 'h5py', 'sympy', 'jsonschema'} & set(sys.modules)\n"
        "assert not heavy, heavy\nassert len(sys.modules) < 250, len(sys.modules)\n"
    )
    subprocess.run([sys.executable, "-c", code], check=True, capture_output=True)


def test_small_run_does_without_the_compiler() -> None:
    code = (
        "import sys, wavekin as wk\n"
        "wk.track(wk.burgers(), wk.Profile([0.0, 1.0], [0.0, 1.0, 0.0]), 4.0, levels=33)\n"
        "assert not {'numba', 'scipy', 'sympy'} & set(sys.modules)\n"
    )
    subprocess.run([sys.executable, "-c", code], check=True)


def test_interrupt_leaves_no_half_written_file_and_says_so(case: Path) -> None:
    text = BOX.replace("levels = 33", 'levels = 900\nloop = "queue"').replace(
        "edges = [0.0, 1.0]\nvalues = [0.0, 1.0, 0.0]",
        'formula = "sin(x)"\non = [0.0, 200.0]\noutside = [0.0, 0.0]\nshare=0.05',
    )
    case.write_text(text)
    process = subprocess.Popen(
        [sys.executable, "-m", "wavekin.io", "run", "box.toml"], stderr=subprocess.PIPE, text=True, cwd=case.parent
    )
    time.sleep(2.5)
    process.send_signal(signal.SIGINT)
    _, err = process.communicate(timeout=30)
    assert process.returncode == 130
    assert "nothing half-written" in err and "Traceback" not in err
    assert [p.name for p in case.parent.iterdir()] == ["box.toml"]


def test_cases_are_listed_shown_and_copied(case: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["cases"]) == 0
    assert "ring_decay" in capsys.readouterr().out
    Path("copy").mkdir()
    assert main(["cases", "ring_decay", "--copy", "copy"]) == 0
    assert sorted(p.name for p in Path("copy").iterdir()) == ["ring_decay.csv", "ring_decay.toml"]
    assert main(["check", "copy/ring_decay.toml"]) == 0
    assert main(["cases", "ring_decay", "--copy", "copy"]) == 2


def test_progress_shows_on_a_terminal_and_nowhere_else(case: Path) -> None:
    import pty

    code = "from wavekin.io.progress import Progress\nwith Progress(5.0) as bar:\n    bar(2.5, 7, 100)\n"
    seen = []

    def read(fd: int) -> bytes:
        seen.append(os.read(fd, 4096))
        return seen[-1]

    pid, fd = pty.fork()
    if pid == 0:
        os.execv(sys.executable, [sys.executable, "-c", code])
    with pytest.raises(OSError, match="Input/output"):
        while read(fd):
            pass
    os.waitpid(pid, 0)
    assert b"50% of the time" in b"".join(seen) and b"7 fronts alive" in b"".join(seen)
    quiet = subprocess.run([sys.executable, "-c", code], capture_output=True, check=True)
    assert quiet.stderr == b""
