"""Systems of laws: exact local solves for several conserved quantities at once."""

from __future__ import annotations

from wavekin.systems.gas_euler import euler
from wavekin.systems.gas_isentropic import isentropic_gas, p_system
from wavekin.systems.polymer_flood import polymer
from wavekin.systems.sorption_langmuir import langmuir
from wavekin.systems.sound_layered import acoustics
from wavekin.systems.system import FACTORIES, System, Variable, register, system_from_spec
from wavekin.systems.traffic_two import aw_rascle_zhang
from wavekin.systems.water_shallow import shallow_water
from wavekin.systems.waves import Wave

SYSTEMS = {
    factory.__name__: factory
    for factory in (
        acoustics, aw_rascle_zhang, euler, isentropic_gas, langmuir, p_system, polymer, shallow_water,
    )
}  # fmt: skip
"""Factories of the built-in systems by name."""

FACTORIES.update(SYSTEMS)

__all__ = [
    "FACTORIES",
    "SYSTEMS",
    "System",
    "Variable",
    "Wave",
    "register",
    "system_from_spec",
    *SYSTEMS,
]
