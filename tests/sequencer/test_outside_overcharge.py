"""The guard ends a run long before a pack would stand where a published test of abuse takes it.

UN Manual of Tests and Criteria, part III, 38.3, test T.7 (overcharge): at twice the largest continuous charge current;
where the recommended charge voltage is at most 18 V, at the lesser of twice that voltage and 22 V, above 18 V at 1.2
times that voltage or more.
"""

from __future__ import annotations

from pathlib import Path

import pytest

import procedures
from drivers.bench_file import load_bench
from drivers.text.binding import bind
from drivers.text.document import read
from drivers.text.faults import Faults
from sequencer.engine.guard import Bounds
from sequencer.engine.inputs import FOLDERS
from sequencer.model.pack import Pack

PACKS = sorted(path.stem for path in (Path(procedures.__file__).parent / "packs").glob("*.yaml"))


def abuse_V(charge_V: float) -> float:
    return min(2.0 * charge_V, 22.0) if charge_V <= 18.0 else 1.2 * charge_V


@pytest.mark.parametrize(("charge_V", "told_V"), [(8.4, 16.8), (12.6, 22.0), (16.8, 22.0), (21.0, 25.2), (42.0, 50.4)])
def test_voltages_of_the_abuse_test(charge_V: float, told_V: float) -> None:
    """Worked from the rule by hand; a published interpretation gives 22 V as the upper end for a pack of 8.4 V too."""
    assert abuse_V(charge_V) == pytest.approx(told_V)


@pytest.mark.parametrize("name", PACKS)
@pytest.mark.parametrize("on", ["virtual", "window"])
def test_the_guards_bounds_lie_below_the_abuse_test(name: str, on: str) -> None:
    faults = Faults()
    pack, bench = _pack(name, faults), load_bench(FOLDERS["bench"] / f"{on}.yaml", faults)
    faults.raise_if_any()
    assert bench is not None
    bounds = Bounds.of(bench.bench.limits, pack)
    full_V = pack.cells * pack.ocv[-1][1]
    assert full_V < bounds.node_V < abuse_V(full_V)
    assert bounds.charger_V < abuse_V(full_V)
    assert bounds.current_A <= 2.0 * pack.rated_current


def _pack(name: str, faults: Faults) -> Pack:
    bound = bind(Pack, read(FOLDERS["pack"] / f"{name}.yaml"), "pack", faults)
    faults.raise_if_any()
    assert bound is not None
    return bound.model
