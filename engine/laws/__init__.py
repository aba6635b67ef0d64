"""Scalar laws by name, from a formula, from a table, or fitted to observations.

`NAMED` holds the factories of all named laws; `law_from_spec` builds any law from plain data, as case files and
histories hold it. Nothing here imports more than numpy until it is needed.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import asdict, replace
from functools import wraps
from inspect import Parameter, signature
from typing import Any

from wavekin.errors import InputError
from wavekin.laws import basic, displacement, flood, settling, soil, sorption, traffic
from wavekin.laws.fitting import Fit, fit_law
from wavekin.laws.formula import formula_law
from wavekin.laws.law import Law, Piece, Units
from wavekin.laws.parameters import nearest
from wavekin.laws.table import table_law

__all__ = [
    "NAMED",
    "Fit",
    "Law",
    "Piece",
    "Units",
    "fit_law",
    "formula_law",
    "law_from_spec",
    "table_law",
    "with_units",
]


def with_units(law: Law, units: Units | Mapping[str, str]) -> Law:
    """Return a law with other units and labels; its numbers stay as they are.

    Parameters
    ----------
    law : Law
    units : Units or mapping
        All units, or by the names of `Units` those that change, e.g. ``{"state": "veh/mi", "x": "mi"}``.

    Raises
    ------
    InputError
        For names that `Units` does not have and for words that are not text.
    """
    if not isinstance(units, Units | Mapping):
        raise InputError("must be names and texts", key="units", value=units, mend='try {state = "veh/mi"}')
    known = asdict(law.units)
    wanted = asdict(units) if isinstance(units, Units) else dict(units)
    for name, word in wanted.items():
        if name not in known:
            raise InputError("is no known unit", key=f"units.{name}", value=word, mend=nearest(name, known))
        if not isinstance(word, str):
            raise InputError("must be text", key=f"units.{name}", value=word, mend="put it in quotes")
    changed = {name: word for name, word in wanted.items() if word != known[name]}
    if not changed:
        return law
    spec = None if law.spec is None else law.spec | {"units": law.spec.get("units", {}) | changed}
    return replace(law, units=Units(**(known | changed)), spec=spec)


def _named(factory: Callable[..., Law]) -> Callable[..., Law]:
    """Return a factory whose laws carry the name and parameters from which they can be built again.

    It also takes `units`, see `with_units`.
    """

    @wraps(factory)
    def build(*args: Any, units: Units | Mapping[str, str] | None = None, **parameters: Any) -> Law:
        law = factory(*args, **parameters)
        law = replace(law, spec={"name": factory.__name__, "parameters": dict(law.parameters)})
        return law if units is None else with_units(law, units)

    own = signature(factory)
    word = Parameter("units", Parameter.KEYWORD_ONLY, default=None, annotation="Units | Mapping[str, str] | None")
    build.__signature__ = own.replace(parameters=[*own.parameters.values(), word])  # type: ignore[attr-defined]
    return build


NAMED: dict[str, Callable[..., Law]] = {
    factory.__name__: _named(factory)
    for factory in (
        basic.burgers,
        basic.cubic,
        basic.transport,
        displacement.corey,
        flood.chezy,
        flood.laminar,
        flood.manning,
        flood.trapezoidal,
        settling.richardson_zaki,
        settling.vesilind,
        soil.brooks_corey,
        sorption.freundlich,
        sorption.langmuir,
        traffic.greenberg,
        traffic.greenshields,
        traffic.smulders,
        traffic.triangular,
        traffic.underwood,
    )
}

_KINDS = {"name": ("parameters",), "formula": ("range", "parameters"), "table": ("reading",)}


def law_from_spec(spec: Mapping[str, Any]) -> Law:
    """Return the law that plain data describe.

    Parameters
    ----------
    spec : mapping
        ``{"name": ..., "parameters": {...}}``, ``{"formula": ..., "parameters": {...}, "range": [a, b]}`` or
        ``{"table": {"u": [...], "f": [...]}, "reading": "polygon" | "smooth"}``, each with ``"units"`` beside
        where they differ from the law's own, see `with_units`.

    Raises
    ------
    InputError
        For unknown names (with the nearest known one) and unusable parameters.
    """
    if not isinstance(spec, Mapping):
        raise InputError("must be a mapping", key="law", value=spec, mend='try {"name": "burgers"}')
    kinds = [kind for kind in _KINDS if kind in spec]
    if len(kinds) != 1:
        raise InputError("needs exactly one of name, formula, table", key="law", value=kinds, mend="keep one")
    for key in spec:
        if key not in (kinds[0], "units", *_KINDS[kinds[0]]):
            raise InputError(f"does not go with a law's {kinds[0]}", key=f"law.{key}", value=spec[key], mend="drop it")
    law = {"name": _by_name, "formula": _by_formula, "table": _by_table}[kinds[0]](spec)
    return with_units(law, spec["units"]) if "units" in spec else law


def _by_name(spec: Mapping[str, Any]) -> Law:
    name, parameters = spec["name"], dict(spec.get("parameters") or {})
    if not isinstance(name, str) or name not in NAMED:
        raise InputError("must name a known law", key="law.name", value=name, mend=nearest(name, NAMED))
    known = signature(NAMED[name]).parameters
    for parameter in parameters:
        if parameter not in known:
            raise InputError(
                f"is no parameter of {name}", key=f"law.{parameter}", value=parameters[parameter],
                mend=nearest(parameter, known),
            )  # fmt: skip
    missing = [key for key, item in known.items() if item.default is item.empty and key not in parameters]
    if missing:
        raise InputError(f"needs {missing[0]}", key="law", value=name, mend=f"add {missing[0]} = ...")
    return NAMED[name](**parameters)


def _by_formula(spec: Mapping[str, Any]) -> Law:
    if "range" not in spec:
        raise InputError("is missing", key="law.range", mend="give the admissible states, range = [a, b]")
    return formula_law(spec["formula"], spec["range"], spec.get("parameters"))


def _by_table(spec: Mapping[str, Any]) -> Law:
    table = spec["table"]
    if not isinstance(table, Mapping) or not {"u", "f"} <= set(table):
        raise InputError("must hold the columns u and f", key="law.table", value=table, mend="give both")
    return table_law(table["u"], table["f"], spec.get("reading", "polygon"))
