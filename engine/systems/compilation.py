"""Gives numba the systems' cores: the generic functions choose by the type of the parameters, at compile time."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from numba import types
from numba.extending import overload, register_jitable
from wavekin.compilation import use_own_cache
from wavekin.systems import cores

use_own_cache()

_known: set[type] = set()


def _choose(generic: Callable[..., Any]) -> None:
    """Let compiled code that calls a generic function call the core of its parameters' type."""
    name = generic.__name__

    @overload(generic)
    def choice(parameters, *arguments):  # type: ignore[no-untyped-def]
        if not isinstance(parameters, types.BaseNamedTuple) or parameters.instance_class not in cores.CORES:
            return None
        function = getattr(cores.CORES[parameters.instance_class], name)

        def chosen(parameters, *arguments):  # type: ignore[no-untyped-def]
            return function(parameters, *arguments)

        return chosen


for _generic in cores.GENERIC:
    _choose(_generic)
register_jitable(cores.put_wave)
register_jitable(cores.no_mirror)


def compilable(parameters: Any) -> bool:
    """Let numba compile the core that belongs to parameters; return False where they are no named tuple."""
    kind = type(parameters)
    if not (isinstance(parameters, tuple) and hasattr(parameters, "_fields")):
        return False
    if kind not in _known:
        core = cores.CORES[kind]
        for function in {*core[:-1], *core.helpers} - {cores.no_mirror}:
            register_jitable(function)
        _known.add(kind)
    return True
