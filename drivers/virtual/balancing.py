"""What a charger moves between the cells through their taps: out of high cells, or into low ones.

Positive is out of a cell: the current leaves at its upper junction and comes back at its lower one, so that junction j
gives b_j - b_(j+1) (Kirchhoff). The charger measures its cells while it moves nothing, so they are compared at rest.
"""

from __future__ import annotations

from itertools import pairwise

import numpy as np

from drivers.virtual.charger_plan import Balancer
from drivers.virtual.terminals import Terminals

LOOK_s = 0.25  # how often a charger compares its cells; common practice, no source


def moved_A(balancer: Balancer, terminals: Terminals, contacts_V: float) -> tuple[float, ...]:
    """The current out of each cell while it is moved (negative: into it), lowest cell first."""
    beyond = _beyond(balancer, [*terminals.pins_V(), contacts_V])
    moved = [one and terminals.reaches(cell - 1) and terminals.reaches(cell) for cell, one in enumerate(beyond, 1)]
    if balancer.current_A is not None:
        amount_A = -balancer.current_A if balancer.charges else balancer.current_A
        return tuple(amount_A if one else 0.0 for one in moved)
    assert balancer.ohm is not None
    return _through_resistors(balancer.ohm, moved, terminals, contacts_V)


def _beyond(balancer: Balancer, pins_V: list[float]) -> list[bool]:
    """Which cells the charger finds high (or low)."""
    cells_V = [upper - lower for lower, upper in pairwise([0.0, *pins_V])]
    level_V = balancer.level_V
    if level_V is None:
        assert balancer.difference_V is not None
        mean_V = sum(cells_V) / len(cells_V)
        level_V = mean_V - balancer.difference_V if balancer.charges else mean_V + balancer.difference_V
    beyond = [cell_V < level_V if balancer.charges else cell_V > level_V for cell_V in cells_V]
    return [one and number in balancer.cells for number, one in enumerate(beyond, 1)]


def _through_resistors(ohm: float, moved: list[bool], terminals: Terminals, contacts_V: float) -> tuple[float, ...]:
    """A resistor across each cell that is moved; neighbours share the tap between them (Ohm, Kirchhoff)."""
    cells = len(moved)
    taps_ohm = [0.0, *(terminals.tap_ohm(number) for number in range(1, cells)), 0.0]
    rests_V = [-tap_ohm * terminals.tap_drain_A for tap_ohm in taps_ohm]
    heights_V = [0.0, *terminals.junctions_V(), contacts_V]
    matrix, sources_V = np.eye(cells), np.zeros(cells)
    for i in range(cells):
        if not moved[i]:
            continue
        matrix[i, i] = ohm + taps_ohm[i] + taps_ohm[i + 1]
        sources_V[i] = heights_V[i + 1] + rests_V[i + 1] - heights_V[i] - rests_V[i]
        if i:
            matrix[i, i - 1] = -taps_ohm[i]
        if i + 1 < cells:
            matrix[i, i + 1] = -taps_ohm[i + 1]
    out_A = np.linalg.solve(matrix, sources_V).tolist()
    return tuple(out if one else 0.0 for out, one in zip(out_A, moved, strict=True))
