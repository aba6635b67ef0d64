"""Case files: a problem in TOML, read, checked and kept word for word."""

from __future__ import annotations

import difflib
import hashlib
import json
import tomllib
from dataclasses import dataclass, field
from importlib.resources import files
from pathlib import Path
from typing import TYPE_CHECKING, Any

from wavekin.errors import InputError
from wavekin.io.tables import read_bytes, read_columns

if TYPE_CHECKING:
    from wavekin.history import History
    from wavekin.laws import Law
    from wavekin.profile import Profile
    from wavekin.tracker import Progress

#: Part of the error budget that the projection of a formula may take.
PROJECTION_SHARE = 0.25
#: L1 distance of a formula's projection where the case gives neither a budget nor a share.
DEFAULT_SHARE = 1e-3


@dataclass(frozen=True)
class Case:
    """A problem ready to run, with the words it was read from.

    Attributes
    ----------
    path : str
        File it came from.
    text : str
        The file's text.
    tables : dict of str to bytes
        Contents of the tables that it names, by the names it uses.
    law, start, ring, run
        What `wavekin.track` takes; `run` holds its keyword arguments and ``until``.
    title, scenario, source, caution : str
        Words for people.
    """

    path: str
    text: str
    tables: dict[str, bytes]
    law: Law
    start: Profile
    ring: tuple[float, float] | None
    run: dict[str, Any] = field(default_factory=dict)
    title: str = ""
    scenario: str = ""
    source: str = ""
    caution: str = ""

    @property
    def sha256(self) -> str:
        """SHA-256 over the text and the tables in order of name."""
        return case_hash(self.text, self.tables)

    def check(self) -> None:
        """Raise InputError for whatever `track` would refuse before it starts."""
        from wavekin.tracking import check_arguments

        arguments = dict(self.run)
        until = arguments.pop("until")
        try:
            check_arguments(self.law, self.start, until, ring=self.ring, **arguments)
        except InputError as error:
            raise error.located(self.path, _case_key(error.key)) from error

    def track(self, progress: Progress | None = None) -> History:
        """Run the case."""
        from wavekin.tracking import track

        arguments = dict(self.run)
        until = arguments.pop("until")
        try:
            return track(self.law, self.start, until, ring=self.ring, progress=progress, **arguments)
        except InputError as error:
            raise error.located(self.path, _case_key(error.key)) from error


def case_hash(text: str, tables: dict[str, bytes]) -> str:
    """Return the SHA-256 over a case's text and its tables in order of name."""
    digest = hashlib.sha256(text.encode())
    for name in sorted(tables):
        digest.update(b"\0" + name.encode() + b"\0" + tables[name])
    return digest.hexdigest()


def _case_key(key: str) -> str:
    """Return the case file's word for an argument of `track`."""
    homes = {"until": "run", "error": "run", "levels": "run", "keyframes": "run", "max_fronts": "run", "loop": "run"}
    word = key.split("[")[0]
    if word == "ring":
        return "domain"
    if word in homes:
        return f"{homes[word]}.{key}"
    return f"start.{key}" if word in ("edges", "values") else key


def read_case(path: str | Path) -> Case:
    """Read and check a case file.

    Raises
    ------
    InputError
        One sentence with file, key, value and mend for whatever cannot be used.
    """
    path = Path(path)
    data = read_bytes(path)
    try:
        text = data.decode("utf-8-sig")
        content = tomllib.loads(text)
    except UnicodeDecodeError as error:
        raise InputError("must be UTF-8 text", file=str(path), mend="save it in UTF-8") from error
    except (ValueError, RecursionError) as error:  # ValueError: also a whole number of thousands of digits
        raise InputError(f"is no valid TOML: {error}", file=str(path), mend="mend that line") from error
    return build_case(content, text, str(path), lambda name, key: read_bytes(path.parent / name, key))


def build_case(content: dict[str, Any], text: str, path: str, read_table: Any) -> Case:
    """Return the case that parsed content describes; `read_table(name, key)` returns a table's bytes."""
    tables: dict[str, bytes] = {}
    try:
        _check_sizes(content)
        validate(content)
        ring = _ring(content.get("domain", {}))
        run = dict(content["run"])
        law = _law(content["law"], tables, read_table)
        start = _start(content["start"], law, ring, run, tables, read_table)
    except InputError as error:
        raise error if error.file else error.located(path) from error
    words = {key: str(content.get(key, "")).strip() for key in ("title", "scenario", "source", "caution")}
    return Case(path, text, tables, law, start, ring, run, **words)


def schema(name: str = "case.schema.json") -> dict[str, Any]:
    """Return a JSON Schema that comes with the program."""
    return json.loads(files("wavekin.shared").joinpath(name).read_text())


def validate(content: dict[str, Any], name: str = "case.schema.json") -> None:
    """Hold content against a schema; raise InputError for the first fault, outermost first."""
    from jsonschema import Draft202012Validator
    from jsonschema.exceptions import relevance

    faults = sorted(Draft202012Validator(schema(name)).iter_errors(content), key=relevance, reverse=True)
    if not faults:
        return
    # a key that is missing may be there under a mistyped name, so unknown keys are told first
    fault = next((fault for fault in faults if fault.validator == "additionalProperties"), faults[0])
    place = ".".join(str(part) if isinstance(part, str) else f"[{part}]" for part in fault.absolute_path).replace(
        ".[", "["
    )
    prefix = f"{place}." if place else ""
    if fault.validator == "additionalProperties":
        known = list(fault.schema.get("properties", {}))
        unknown = next(key for key in fault.instance if key not in known)
        close = difflib.get_close_matches(unknown, known, n=1)
        mend = f"did you mean {close[0]}?" if close else f"known keys are {', '.join(known)}"
        raise InputError("is no known key", key=prefix + unknown, value=fault.instance[unknown], mend=mend)
    if fault.validator == "required":
        missing = next(key for key in fault.validator_value if key not in fault.instance)
        raise InputError("is missing", key=prefix + missing, mend="add it")
    words = {
        "type": f"must be of type {fault.validator_value}",
        "enum": f"must be one of {fault.validator_value}",
        "minItems": f"must have {fault.validator_value} entries",
        "maxItems": f"must have {fault.validator_value} entries",
        "minimum": f"must be at least {fault.validator_value}",
        "maximum": f"must be at most {fault.validator_value}",
        "exclusiveMinimum": f"must be above {fault.validator_value}",
    }
    mend = str(fault.schema.get("description", "see the schema")) if isinstance(fault.schema, dict) else ""
    raise InputError(words.get(str(fault.validator), fault.message), key=place, value=fault.instance, mend=mend)


def _check_sizes(content: Any, place: str = "") -> None:
    """Raise InputError for a whole number so large that no float holds it."""
    if isinstance(content, dict):
        for key, value in content.items():
            _check_sizes(value, f"{place}.{key}" if place else key)
    elif isinstance(content, list):
        for i, value in enumerate(content):
            _check_sizes(value, f"{place}[{i}]")
    elif isinstance(content, int):
        try:
            float(content)
        except OverflowError as error:
            raise InputError("is too large", key=place, value=content, mend="write a smaller number") from error


def _ring(domain: dict[str, Any]) -> tuple[float, float] | None:
    if domain.get("kind", "line") == "line":
        for key in ("from", "to"):
            if key in domain:
                raise InputError(
                    "belongs to a ring", key=f"domain.{key}", value=domain[key], mend='set kind = "ring" or drop it'
                )
        return None
    for key in ("from", "to"):
        if key not in domain:
            raise InputError("is missing", key=f"domain.{key}", mend="give both ends of the ring")
    return float(domain["from"]), float(domain["to"])


def _one_of(content: dict[str, Any], keys: tuple[str, ...], place: str) -> str:
    """Return the one key of several that is there."""
    there = [key for key in keys if key in content]
    if len(there) != 1:
        raise InputError(
            f"needs exactly one of {', '.join(keys)}", key=place, value=there, mend="keep the one that is meant"
        )
    return there[0]


def _law(content: dict[str, Any], tables: dict[str, bytes], read_table: Any) -> Law:
    from wavekin.laws import law_from_spec, table_law

    kind = _one_of(content, ("name", "formula", "table"), "law")
    rest = {key: value for key, value in content.items() if key != kind}
    allowed = {"formula": ("parameters", "range"), "table": ("reading",)}.get(kind)
    for key in rest:
        if allowed is not None and key not in allowed:
            close = difflib.get_close_matches(key, allowed, n=1)
            mend = f"did you mean {close[0]}?" if close else "drop it"
            raise InputError(f"does not go with law.{kind}", key=f"law.{key}", value=rest[key], mend=mend)
    try:
        if kind == "name":
            return law_from_spec({"name": content["name"], "parameters": rest})
        if kind == "formula":
            if "range" not in rest:
                raise InputError("is missing", key="range", mend="give the admissible states, range = [a, b]")
            return law_from_spec({"formula": content["formula"], **rest})
    except InputError as error:
        raise error.located(key=error.key if error.key.startswith("law") else f"law.{error.key}") from error
    name = content["table"]
    tables[name] = read_table(name, "law.table")
    u, f = read_columns(tables[name], ("u", "f"), name, increasing="u").columns
    try:
        return table_law(u, f, rest.get("reading", "polygon"))
    except InputError as error:
        raise error.located(name) from error


def _start(
    content: dict[str, Any],
    law: Law,
    ring: tuple[float, float] | None,
    run: dict[str, Any],
    tables: dict[str, bytes],
    read_table: Any,
) -> Profile:
    from wavekin.profile import Profile

    kind = _one_of(content, ("values", "formula", "table"), "start")
    allowed = {"values": ("edges",), "formula": ("parameters", "on", "outside", "share"), "table": ()}[kind]
    for key in content:
        if key != kind and key not in allowed:
            raise InputError(f"does not go with start.{kind}", key=f"start.{key}", value=content[key], mend="drop it")
    try:
        if kind == "values":
            return Profile(content.get("edges", []), content["values"])
        if kind == "formula":
            return _projected(content, ring, run)
    except InputError as error:
        raise error.located(key=f"start.{error.key}") from error
    name = content["table"]
    tables[name] = read_table(name, "start.table")
    (x, u), lines = read_columns(tables[name], ("x", "u"), name, increasing="x")
    try:
        low, high = law.range
        for line, state in zip(lines, u, strict=True):
            if not low <= state <= high:
                law.check_states([state], f"line {line}, column u")
        return Profile(x, u) if ring else Profile(x[1:], u)
    except InputError as error:
        raise error.located(name, error.key.removesuffix("[0]")) from error


def _projected(content: dict[str, Any], ring: tuple[float, float] | None, run: dict[str, Any]) -> Profile:
    """Return the projection of a formula in x."""
    from wavekin.laws.formula import formula_function
    from wavekin.profile import project

    function = formula_function(content["formula"], "x", content.get("parameters", {}))
    on = content.get("on", ring)
    if on is None:
        raise InputError("is missing", key="on", mend="give the interval of the formula, on = [from, to]")
    if ring is not None and tuple(on) != ring:
        raise InputError("must be the whole ring", key="on", value=on, mend="drop it")
    if ring is None and "outside" not in content:
        raise InputError("is missing", key="outside", mend="give the states left and right of the interval")
    usual = PROJECTION_SHARE * run["error"] if run.get("error", 0.0) > 0.0 else DEFAULT_SHARE
    share = content.get("share", usual)
    return project(function, on=tuple(on), outside=tuple(content["outside"]) if ring is None else None, share=share)
