"""The rows of a history: what is recorded of each front and each collision."""

from __future__ import annotations

import numpy as np

#: Kinds of front, by the number stored in the column ``kind``.
KINDS = ("shock", "fan", "contact")
SHOCK, FAN, CONTACT = range(3)

#: Number in ``born_at`` of fronts that stand in the initial data, and in ``ended_at`` of fronts alive at the end.
NONE = -1

FRONT_COLUMNS: dict[str, tuple[str, str, str]] = {
    "birth_t": ("f8", "t", "time of birth"),
    "birth_x": ("f8", "x", "place of birth"),
    "death_t": ("f8", "t", "time of the collision that ended the front; infinity while it lives"),
    "death_x": ("f8", "x", "place of that collision; NaN while the front lives"),
    "left": ("f8", "state", "state left of the front"),
    "right": ("f8", "state", "state right of the front"),
    "speed": ("f8", "speed", "speed of the front"),
    "departure": ("f8", "state*speed", "L1 length per unit time by which the front departs from the true law"),
    "born_at": ("i4", "", "row of the collision that bore the front; -1 for the initial data"),
    "ended_at": ("i4", "", "row of the collision that ended the front; -1 while it lives"),
    "kind": ("u1", "", "0 shock, 1 fan, 2 contact"),
    "opened": ("u1", "", "1 where the plateau right of the front opened from a point, as inside a fan"),
}
"""Columns of the fronts: type, unit in terms of the law's units, description."""

COLLISION_COLUMNS: dict[str, tuple[str, str, str]] = {
    "t": ("f8", "t", "time of the collision"),
    "x": ("f8", "x", "place of the collision"),
    "fronts_in": ("i4", "", "number of fronts that end there"),
    "fronts_out": ("i4", "", "number of fronts born there; their rows follow one another"),
    "left": ("f8", "state", "state left of all of them"),
    "right": ("f8", "state", "state right of all of them"),
}
"""Columns of the collisions: type, unit in terms of the law's units, description."""

FRONT = np.dtype([(name, column[0]) for name, column in FRONT_COLUMNS.items()], align=True)
COLLISION = np.dtype([(name, column[0]) for name, column in COLLISION_COLUMNS.items()], align=True)
