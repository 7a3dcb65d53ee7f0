"""A resistance computed by a sampled loop: the virtual bench must oscillate where theory says, and only there.

A host reads the charger's current once a scan and moves the supply: s <- s + a (E + I Rv - s). With a regulated
charger behind Rp and a node that follows d scans late, the loop's roots are those of z^(d+1) - (1 - a) z^d + a Rv/Rp.
They lie inside the unit circle for a < 2 / (1 + Rv/Rp) at d = 0; at d >= 1 the limit of the loop without its leak,
(2 Rp/Rv) sin(pi / (2 (2 d + 1))), lies a little below it (closed forms of difference equations, computed).
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import pytest

from drivers.virtual.plan import Plan
from drivers.virtual.trace import SHUNT
from drivers.virtual.world import World

MakePlan = Callable[..., Plan]
SCAN_s = 0.1
RATIO = 2.0  # Rv / Rp
E_V = 20.6


def swing_A(plan: Plan, share: float, scans: int = 1500) -> float:
    """Peak to peak current over the last 100 scans, after a nudge of 1 mV at the resting point."""
    world = World(plan, 1)
    rp_ohm = world.circuit.constants.outer_ohm
    rv_ohm = RATIO * rp_ohm
    set_V = E_V + (21.0 - E_V) / (rp_ohm + rv_ohm) * rv_ohm + 0.001
    supply, load, mains = (world.instruments[name] for name in ("node_supply", "node_load", "mains"))
    supply.stream(f"VOLT {set_V};:CURR 15;:OUTP ON\n".encode())
    load.stream(b"CURR 5;:INP ON\n")
    mains.stream(b"ROUT:CLOS (@1)\n")
    world.advance(5.0)
    seen = []
    for _ in range(scans):
        current_A = world.circuit.value(SHUNT, world.now) / world.circuit.constants.shunt_ohm
        seen.append(current_A)
        set_V += share * (E_V + current_A * rv_ohm - set_V)
        supply.stream(f"VOLT {set_V!r}\n".encode())
        world.advance(SCAN_s)
    return max(seen[-100:]) - min(seen[-100:])


def closed_form(late: int) -> float:
    return 2.0 / (1.0 + RATIO) if late == 0 else 2.0 / RATIO * math.sin(math.pi / (2 * (2 * late + 1)))


def stable_below(late: int) -> float:
    """The largest share with all roots inside the unit circle, by bisection."""
    low, high = 0.0, 1.0
    for _ in range(40):
        share = (low + high) / 2
        delayed = [1.0, share - 1.0, *[0.0] * (late - 1), share * RATIO]
        roots = np.roots(delayed if late else [1.0, share - 1.0 + share * RATIO])
        low, high = (share, high) if max(abs(roots)) < 1.0 else (low, share)
    return low


@pytest.mark.parametrize("late", [0, 1, 2, 3])
def test_loop_is_stable_exactly_where_theory_says(virtual_plan: MakePlan, late: int) -> None:
    """A command that is in force at the next reading is no delay (d = 0); each scan more is one."""
    plan = virtual_plan(
        errors=0.0, settling_s=0.0, delay_s=(late + 1) * SCAN_s - 0.001, charger={"cutoff_A": 1e-3, "ends": False}
    )
    assert closed_form(late) <= stable_below(late) * (1 + 1e-9)
    assert swing_A(plan, 0.95 * stable_below(late)) < 1e-4
    assert swing_A(plan, 1.05 * stable_below(late)) > 1.0


def test_rule_without_delay_makes_a_sound_charger_swing_from_nothing_to_everything(virtual_plan: MakePlan) -> None:
    """200 ms of command delay and 150 ms of settling: what is stable at d = 0 swings, half the limit of d = 4 rests."""
    plan = virtual_plan(errors=0.0, delay_s=0.2, settling_s=0.15, charger={"ends": False})
    assert swing_A(plan, 0.9 * closed_form(0)) > 2.0
    assert swing_A(plan, 0.5 * closed_form(4)) < 1e-3
