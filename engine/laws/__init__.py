"""Scalar laws by name, from a formula, or from a table.

`NAMED` holds the factories of all named laws; `law_from_spec` builds any law from plain data, as case files and
histories hold it. scipy and sympy are imported only by the laws that need them.
"""

from __future__ import annotations

import difflib
from collections.abc import Callable
from dataclasses import replace
from functools import wraps
from inspect import signature
from typing import Any

from wavekin.errors import InputError
from wavekin.laws import basic, displacement, flood, settling, sorption, traffic
from wavekin.laws.formula import formula_law
from wavekin.laws.law import Law, Piece, Units
from wavekin.laws.table import table_law

__all__ = ["NAMED", "Law", "Piece", "Units", "formula_law", "law_from_spec", "table_law"]


def _named(factory: Callable[..., Law]) -> Callable[..., Law]:
    """Return a factory whose laws carry the name and parameters from which they can be built again."""

    @wraps(factory)
    def build(*args: Any, **parameters: Any) -> Law:
        law = factory(*args, **parameters)
        return replace(law, spec={"name": factory.__name__, "parameters": dict(law.parameters)})

    return build


NAMED: dict[str, Callable[..., Law]] = {
    factory.__name__: _named(factory)
    for factory in (
        basic.burgers,
        basic.cubic,
        basic.transport,
        displacement.corey,
        flood.chezy,
        flood.manning,
        settling.richardson_zaki,
        settling.vesilind,
        sorption.langmuir,
        traffic.greenshields,
        traffic.triangular,
    )
}


def law_from_spec(spec: dict[str, Any]) -> Law:
    """Return the law that plain data describe.

    Parameters
    ----------
    spec : dict
        ``{"name": ..., "parameters": {...}}``, ``{"formula": ..., "parameters": {...}, "range": [a, b]}`` or
        ``{"table": {"u": [...], "f": [...]}, "reading": "polygon" | "smooth"}``.

    Raises
    ------
    InputError
        For unknown names (with the nearest known one) and unusable parameters.
    """
    if "table" in spec:
        return table_law(spec["table"]["u"], spec["table"]["f"], spec.get("reading", "polygon"))
    if "formula" in spec:
        return formula_law(spec["formula"], spec["range"], spec.get("parameters"))
    name, parameters = spec.get("name"), dict(spec.get("parameters", {}))
    if name not in NAMED:
        raise InputError("must name a known law", key="law.name", value=name, mend=_nearest(str(name), list(NAMED)))
    known = list(signature(NAMED[name]).parameters)
    for parameter in parameters:
        if parameter not in known:
            raise InputError(
                f"is no parameter of {name}", key=f"law.{parameter}", value=parameters[parameter],
                mend=_nearest(parameter, known),
            )  # fmt: skip
    missing = [
        key
        for key, item in signature(NAMED[name]).parameters.items()
        if item.default is item.empty and key not in parameters
    ]
    if missing:
        raise InputError(f"needs {missing[0]}", key="law", value=name, mend=f"add {missing[0]} = ...")
    return NAMED[name](**parameters)


def _nearest(word: str, known: list[str]) -> str:
    """Return advice that names the nearest known word."""
    close = difflib.get_close_matches(word, known, n=1)
    return f"did you mean {close[0]}?" if close else f"known are {', '.join(known)}"
