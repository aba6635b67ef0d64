"""Case files: what is read from them, and one sentence for whatever is wrong."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import wavekin as wk
from wavekin.io import read_case
from wavekin.io.ready import ready_case, ready_cases

GOOD = """
title = "box"
[law]
name = "burgers"
[start]
edges = [0.0, 1.0]
values = [0.0, 1.0, 0.0]
[run]
until = 4.0
levels = 17
"""


def write(folder: Path, text: str, **tables: str | bytes) -> Path:
    path = folder / "case.toml"
    path.write_text(text)
    for name, content in tables.items():
        data = content if isinstance(content, bytes) else content.encode()
        (folder / f"{name}.csv").write_bytes(data)
    return path


def test_a_case_runs_like_the_call_in_python(tmp_path: Path) -> None:
    history = read_case(write(tmp_path, GOOD)).track()
    assert history == wk.track(wk.burgers(), wk.Profile([0.0, 1.0], [0.0, 1.0, 0.0]), 4.0, levels=17)


def test_formula_law_and_table_law_and_start_table(tmp_path: Path) -> None:
    text = """
[law]
formula = "u**2/(u**2 + M*(1-u)**2)"
parameters = {M = 0.5}
range = [0.0, 1.0]
[start]
table = "start.csv"
[run]
until = 1.0
levels = 33
"""
    history = read_case(write(tmp_path, text, start="x,u\n-1,1\n0,0\n2,0.25\n")).track()
    same = wk.track(wk.corey(viscosity_ratio=0.5), wk.Profile([0.0, 2.0], [1.0, 0.0, 0.25]), 1.0, levels=33)
    # one flux from two formulas: equal to rounding
    assert len(history.collisions) == len(same.collisions)
    assert np.allclose(history.at(1.0).edges, same.at(1.0).edges, rtol=1e-12)

    table = GOOD.replace('name = "burgers"', 'table = "flux.csv"')
    flux = "\ufeffu,f\r\n0,0\r\n0.5,0.125\r\n1,0.5\r\n"  # byte-order mark and CRLF are fine
    read = read_case(write(tmp_path, table, flux=flux))
    assert read.law.polygon is not None and read.track().error_bound(4.0) == 0.0


def test_formula_start_is_projected_within_a_quarter_of_the_budget(tmp_path: Path) -> None:
    text = GOOD.replace("edges = [0.0, 1.0]\nvalues = [0.0, 1.0, 0.0]", 'formula = "0.5+sin(2*pi*x)/2"')
    text = text.replace("levels = 17", "error = 0.02").replace(
        "[run]", '[domain]\nkind="ring"\nfrom=0.0\nto=1.0\n[run]'
    )
    case = read_case(write(tmp_path, text))
    assert 0.0 < case.start.defect <= 0.005
    history = case.track()
    assert case.start.defect <= history.error_bound(0.0) <= history.error_bound(4.0) <= 0.02


@pytest.mark.parametrize(
    "old, new, words",
    [
        ("edges = [0.0, 1.0]", "edges = [1.0, 0.0]", ["start.edges[1]", "increase"]),
        ("edges = [0.0, 1.0]", "edges = [nan, 1.0]", ["start.edges[0]", "finite"]),
        ("edges = [0.0, 1.0]", "edges = [0.0]", ["start.values", "got 3"]),
        ("values = [0.0, 1.0, 0.0]", "values = []", ["start.values", "at least one"]),
        ("values = [0.0, 1.0, 0.0]", 'values = ["a"]', ["start.values[0]", "type number", "'a'"]),
        ("until = 4.0", "until = 0.0", ["run.until", "above 0"]),
        ("until = 4.0", "until = inf", ["run.until", "finite"]),
        ("until = 4.0", 'until = "soon"', ["run.until", "type number", "'soon'"]),
        ("until = 4.0", "untill = 4.0", ["run.untill", "did you mean until?"]),
        ("until = 4.0", "", ["run.until", "missing"]),
        ("levels = 17", "error = -1.0", ["run.error", "above 0", "-1.0"]),
        ("levels = 17", "error = 1e-12", ["run.error", "within reach"]),
        ("levels = 17", "levels = 1", ["run.levels", "2 to"]),
        ('name = "burgers"', 'name = "burger"', ["law.name", "did you mean burgers?"]),
        ('name = "burgers"', 'name = "corey"', ["law", "viscosity_ratio"]),
        ('name = "burgers"', 'name = "corey"\nviscosity_ratoi = 1.0', ["law.viscosity_ratoi", "viscosity_ratio?"]),
        ('name = "burgers"', 'name = "corey"\nviscosity_ratio = -1.0', ["law.viscosity_ratio", "above 0", "-1.0"]),
        ('name = "burgers"', 'formula = "u**2"', ["law.range", "missing"]),
        ('name = "burgers"', 'formula = "v**2"\nrange=[0.0,1.0]', ["law.formula", "unknown name", "'v'"]),
        ('name = "burgers"', 'formula = "u.real"\nrange=[0.0,1.0]', ["law.formula", "Attribute"]),
        ('name = "burgers"', 'formula = "open(u)"\nrange=[0.0,1.0]', ["law.formula", "unknown function", "'open'"]),
        ('name = "burgers"', 'formula = "1/u"\nrange=[0.0,1.0]', ["law.formula", "finite"]),
        ('name = "burgers"', 'formula = "u**2"\nrange=[0.0,0.5]', ["start.values[1]", "range"]),
        ('name = "burgers"', 'table = "none.csv"', ["law.table", "does not exist"]),
        ('name = "burgers"', "", ["law", "exactly one of"]),
        ("[run]", '[domain]\nkind = "ring"\n[run]', ["domain.from", "missing"]),
        ("[run]", '[domain]\nkind = "torus"\n[run]', ["domain.kind", "one of", "torus"]),
        ("[run]", "[runn]", ["run", "known key"]),
        ("[run]", "[run", ["no valid TOML"]),
        ("until = 4.0", "until = 1" + "0" * 400, ["run.until", "too large"]),
        ("until = 4.0", "until = 1" + "0" * 5000, ["no valid TOML"]),
        ("levels = 17", "levels = 17\nkeyframes = 10000000000", ["run.keyframes", "at most"]),
        ('name = "burgers"', 'table = "a\\u0000b.csv"', ["law.table", "no name of a file"]),
        ('name = "burgers"', 'formula = "u**2"\nrnge=[0.0,1.0]', ["law.rnge", "did you mean range?"]),
        ("[run]", '[domain]\nkind = "ring"\nfrom = 1.0\nto = 0.0\n[run]', ["domain", "in order"]),
    ],
)
def test_bad_case_gets_one_sentence(tmp_path: Path, old: str, new: str, words: list[str]) -> None:
    path = write(tmp_path, GOOD.replace(old, new))
    with pytest.raises(wk.InputError) as caught:
        read_case(path).track()
    message = str(caught.value)
    for word in [*words, "case.toml"]:
        assert word in message, message
    assert "\n" not in message


@pytest.mark.parametrize(
    "flux, words",
    [
        ("u,f\n0,0\n0,1\n", ["line 3, column u", "twice"]),
        ("u,f\n1,0\n0,1\n", ["line 3, column u", "does not increase", "swapped"]),
        ("f,u\n0,1\n2,0.5\n", ["does not increase", "swapped"]),
        ("u,f\n0,0\n1,\n", ["line 3, column f", "number"]),
        ("u,f\n0,0\n1,x\n", ["line 3, column f", "number", "'x'"]),
        ("u,f\n0,0\n0,5,0,125\n", ["line 3", "4 cells", "point"]),
        ("u;f\n0;0\n1;1\n", ["semicolons"]),
        ("u\n0\n1\n", ["needs a column f"]),
        ("", ["is empty"]),
        ("u,f\n", ["no rows"]),
        ("u,f\n0,0\n", ["two rows"]),
        ("u,f\n0,0\n1,nan\n", ["line 3, column f", "finite", "'nan'"]),
        (b"u,f\n0,\xff\n", ["UTF-8"]),
        ("# measured\n\nu,f\n0,0\n\n0,1\n", ["line 6, column u", "twice"]),
        ("u,f\n0,0\n,\n1,1\n", ["line 3, column u", "empty"]),
        ("u,f\n0,0\n1_0,1\n", ["line 3, column u", "number", "'1_0'"]),
        ("u,f\n0,0\n\u0661,1\n", ["line 3, column u", "number"]),
        ('u,f\n0,0\n"0,5",1\n', ["line 3, column u", "point", "'0,5'"]),
        ("u,u,f\n0,0,0\n1,1,1\n", ["line 1", "column u twice"]),
        ("u,f\n0;0\n1;1\n", ["line 2", "by commas"]),
        ('u,f\n0,0\n"' + "1" * 200_000 + '",1\n', ["line 3", "no CSV"]),
    ],
)
def test_bad_table_gets_one_sentence(tmp_path: Path, flux: str | bytes, words: list[str]) -> None:
    path = write(tmp_path, GOOD.replace('name = "burgers"', 'table = "flux.csv"'), flux=flux)
    with pytest.raises(wk.InputError) as caught:
        read_case(path)
    for word in [*words, "flux.csv"]:
        assert word in str(caught.value), str(caught.value)


def test_state_of_a_table_outside_the_law_is_told_with_its_line(tmp_path: Path) -> None:
    text = GOOD.replace("edges = [0.0, 1.0]\nvalues = [0.0, 1.0, 0.0]", 'table = "start.csv"')
    text = text.replace('name = "burgers"', 'formula = "u**2"\nrange = [0.0, 1.0]')
    with pytest.raises(wk.InputError, match=r"start.csv: line 4, column u: must lie in the law's range") as caught:
        read_case(write(tmp_path, text, start="# m\nx,u\n0,1\n1,2\n"))
    assert "(got 2.0)" in str(caught.value)


@pytest.mark.parametrize(
    "old, new",
    [
        ("until = 4.0", "until = 0.0"),
        ("levels = 17", "levels = 1"),
        ("levels = 17", "levels = 17\nerror = 0.1"),
        ("[run]", '[domain]\nkind = "ring"\nfrom = 0.0\nto = 2.0\n[run]'),
        ('name = "burgers"', 'formula = "u**2"\nrange = [0.0, 0.5]'),
    ],
)
def test_check_refuses_what_a_run_refuses_in_the_same_words(tmp_path: Path, old: str, new: str) -> None:
    case = read_case(write(tmp_path, GOOD.replace(old, new)))
    with pytest.raises(wk.InputError) as checked:
        case.check()
    with pytest.raises(wk.InputError) as run:
        case.track()
    assert str(checked.value) == str(run.value)


@pytest.mark.parametrize("name", sorted(ready_cases()))
def test_ready_case_runs_and_its_audit_holds(name: str) -> None:
    case = ready_case(name)
    assert "nvented" in case.scenario and case.caution and case.source
    history = case.track()
    found = wk.audit(history)
    assert found.holds, str(found)
    if "error" in case.run:
        assert history.error_bound(history.until) <= case.run["error"]
