"""Currents and edges of a sweep: two ways to measure, and what a bench error does to a verdict."""

from __future__ import annotations

import math
from collections.abc import Callable
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest

from drivers.text.measures import Limit
from sequencer.analysis.classes import Seen
from sequencer.analysis.estimates import Estimate
from sequencer.analysis.intervals import decide_interval
from sequencer.engine.decade import Decade
from sequencer.engine.swept import Point, Points

Rehearse = Callable[..., Any]
AMPERES = Limit("current").read
ROLES = ("in", "end", "edge", "out")


def point(role: str, ohm: float | None, kind: str = "charges", *, void: bool = False, at_s: float = 0.0) -> Point:
    flows = kind in ("charges", "pulses")
    current = Estimate(3.0, 0.001, 20, 20.0) if kind == "charges" else None
    return Point(role, ohm, None, at_s, at_s + 15.0, Seen(kind, current, 0 if flows else None, kind, flows), void)  # type: ignore[arg-type]


def accuracy_of(*spans: Any) -> Any:
    dialect = SimpleNamespace(name="some", accuracy=SimpleNamespace(resistance=spans))
    entry = SimpleNamespace(certificate=None)
    return SimpleNamespace(file=SimpleNamespace(at=lambda place: ("decade", entry, dialect)))


def points(*made: Point, given_up: str | None = None, ended: str = "complete") -> Points:
    """Points without a record: what is read from traces is not asked for."""
    empty = np.array([])
    silent = SimpleNamespace(
        within=lambda *span: SimpleNamespace(value=SimpleNamespace(size=0)), time_s=empty, value=empty
    )
    evidence: Any = SimpleNamespace(trace=lambda name: silent, ended=ended, manifest={"why": "stopped by Ctrl-C"})
    return Points(evidence, accuracy_of(SPAN), "id", tuple(made), given_up)


SPAN = SimpleNamespace(range=1e6, set=0.001, residual=0.3)
FINE = SimpleNamespace(range=2e3, set=0.0002, residual=0.05)  # of the same resistor, up to 2 kΩ


def label(seen: Seen) -> str:
    return seen.label


def test_an_edge_lies_between_the_last_alike_and_the_first_unlike() -> None:
    found = points(
        point("in", 1e3),
        point("end", 1.1e3),
        point("out", 1.4e3, "no charge"),
        point("edge", 1.2e3),
        point("edge", 1.3e3, "no charge"),
    ).edge(ROLES, "id.resistor", label)
    assert found.interval == (1.2e3, 1.3e3)
    assert found.budget is not None
    # resistor 0.1 % of 1.25 kΩ + 0.3 Ω = 1.55 Ω, contact 0.1 Ω, both rectangular (JCGM 100:2008, 4.3.7)
    assert found.budget.u == pytest.approx(math.hypot(1.55, 0.1) / math.sqrt(3))


@pytest.mark.parametrize(
    ("ohm", "half_ohm", "u_ohm"),
    [  # half width: set times the resistance, plus residual; u: half / sqrt(3) (JCGM 100:2008, 4.3.7); worked by hand
        (1e3, 0.25, 0.14434),  # 0.02 % of 1 kΩ is 0.2 Ω, and 0.05 Ω
        (2e3, 0.45, 0.25981),  # still the finer span at its very end
        (3.7e3, 4.0, 2.30940),  # 0.1 % of 3.7 kΩ is 3.7 Ω, and 0.3 Ω
        (27e3, 27.3, 15.76166),
    ],
)
def test_a_resistor_is_as_uncertain_as_its_narrowest_span_states(ohm: float, half_ohm: float, u_ohm: float) -> None:
    resistor, contact = Decade(accuracy_of(SPAN, FINE), "id.resistor", {}).lines(ohm)
    assert (resistor.name, resistor.source) == ("decade", "accuracy, dialect some")
    assert resistor.u * math.sqrt(3) == pytest.approx(half_ohm)
    assert resistor.u == pytest.approx(u_ohm, abs=1e-5)
    assert contact.name == "contact"
    assert contact.u == pytest.approx(0.057735, abs=1e-6)  # 0.1 Ω / sqrt(3)


def test_a_resistance_beyond_every_span_has_no_accuracy() -> None:
    with pytest.raises(ValueError, match=r"decade: its dialect states no accuracy for 1\.5 MΩ"):
        Decade(accuracy_of(SPAN, FINE), "id.resistor", {}).lines(1.5e6)


@pytest.mark.parametrize(("limit_ohm", "verdict"), [(1221.8, "pass"), (1221.7, "conditional pass")])
def test_the_guard_band_of_an_edge_is_twice_its_resistors_uncertainty(limit_ohm: float, verdict: str) -> None:
    """At 1.21 kΩ 1.51 Ω and 0.1 Ω, both rectangular: u = 0.87371 Ω, w = 2 u = 1.74742 Ω; 1220 Ω + w = 1221.747 Ω."""
    found = points(point("in", 1e3), point("end", 1.2e3), point("edge", 1.22e3, "no charge"))
    edge = found.edge(ROLES, "id.resistor", label)
    assert edge.budget is not None
    assert edge.budget.u == pytest.approx(0.87371, abs=1e-5)
    decision = decide_interval(1.2e3, 1.22e3, edge.budget.u, 2.0, None, limit_ohm, "guarded", "Ω")
    assert decision.guard_band == pytest.approx(1.74742, abs=1e-5)
    assert decision.verdict == verdict


def test_an_edge_inside_the_band_is_an_edge() -> None:
    found = points(point("in", 1e3), point("end", 1.1e3, "no charge"), point("out", 1.4e3, "no charge"))
    assert found.edge(ROLES, "id.resistor", label).interval == (1e3, 1.1e3)


def test_no_edge_as_far_as_was_looked_is_a_missing_edge_only_if_all_was_shown() -> None:
    shown = points(point("in", 1e3), point("end", 1.1e3), point("out", 1.4e3)).edge(ROLES, "id.resistor", label)
    assert shown.none is not None
    void = points(point("in", 1e3), point("end", 1.1e3), point("out", 1.4e3, "no charge", void=True))
    assert void.edge(ROLES, "id.resistor", label).trouble == "1.4 kΩ tells nothing: the control after it failed twice"
    cut = points(point("in", 1e3), point("end", 1.1e3), ended="stopped").edge(ROLES, "id.resistor", label)
    assert cut.none is None
    assert cut.absent is not None
    assert "the run ended early: stopped by Ctrl-C" in cut.absent
    gone = points(point("in", 1e3), point("end", 1.1e3), given_up="it latched").edge(ROLES, "id.resistor", label)
    assert gone.trouble is not None
    assert "it latched" in gone.trouble


def test_answers_that_contradict_each_other_are_no_edge() -> None:
    made = points(
        point("in", 1e3), point("edge", 1.2e3, "no charge"), point("edge", 1.3e3), point("out", 1.4e3, "no charge")
    )
    found = made.edge(ROLES, "id.resistor", label)
    assert found.trouble is not None
    assert "contradict" in found.trouble


@pytest.mark.parametrize(
    ("kinds", "seen", "trouble", "absent"),
    [
        (("no charge", "no charge"), "no charge", False, False),
        (("no charge", "charges"), "charges", False, False),
        (("no charge", "pulses"), "charges", False, False),
        (("no charge", "undecided"), None, True, False),
        (("no charge",), None, False, True),
        (("charges",), "charges", False, False),
    ],
)
def test_that_nothing_charges_takes_every_point_and_that_something_does_takes_one(
    kinds: tuple[str, ...], seen: str | None, trouble: bool, absent: bool
) -> None:
    made = [point(f"p{number}", 1e3 * (number + 1), kind) for number, kind in enumerate(kinds)]
    found = points(*made).state(["p0", "p1"])
    assert (found.seen, found.trouble is not None, found.absent is not None) == (seen, trouble, absent)


def test_a_void_point_makes_no_state() -> None:
    found = points(point("p0", 1e3, "no charge", void=True), point("p1", 2e3, "no charge")).state(["p0", "p1"])
    assert found.trouble == "the control after 1 kΩ failed twice; what was seen there counts for nothing"


@pytest.mark.parametrize(
    ("role", "ohm", "where"), [("open", None, "open"), ("short", None, "short"), ("low_outside", 500.0, "500 Ω")]
)
def test_no_charge_where_none_is_expected_counts_for_nothing_after_a_failed_control(
    role: str, ohm: float | None, where: str
) -> None:
    """A charger that has latched does not charge anywhere, so its silence alone would pass."""
    void = points(point(role, ohm, "no charge", void=True)).state([role])
    assert void.seen is None
    assert void.trouble == f"the control after {where} failed twice; what was seen there counts for nothing"
    assert points(point(role, ohm, "no charge")).state([role]).seen == "no charge"


def test_a_band_that_is_silent_at_one_end_fails_and_one_that_was_cut_short_does_not() -> None:
    silent = points(
        *(point(f"band1.{part}", ohm) for part, ohm in (("low", 1e3), ("middle", 2e3))),
        point("band1.high", 3e3, "no charge"),
    )
    assert silent.band_current(1, AMPERES("3 A ± 5 %")).none == "3 kΩ: no charge"
    short = points(point("band1.low", 1e3), ended="stopped").band_current(1, AMPERES("3 A ± 5 %"))
    assert short.absent is not None
    assert "1 of 3 points of the band were shown" in short.absent


def test_a_shunt_that_is_not_what_it_is_declared_makes_no_verdict(rehearse_full: Rehearse) -> None:
    """8 % off: every plateau would fail its ± 5 %; load minus supply says that it is not the charger."""
    found = rehearse_full(
        "id-bands",
        bench={"  errors: 1\n": "  errors: 1\n  shunt_factor: 1.08\n"},
        spec_text={"  - {id: [0.90 kΩ, 1.10 kΩ], current: 1.5 A ± 5 %}\n": ""},
        changes={"resolution": "10 %"},
    )
    assert found.failing == set()
    assert found.verdicts["id.band1.current"] == "inconclusive"
    assert "shunt, and load minus supply, differ" in found.verdict("id.band1.current")["why"]


def test_a_setting_answered_both_ways_widens_the_edge_to_its_neighbours() -> None:
    made = points(
        point("in", 1e3),
        point("edge", 1.1e3),
        point("edge", 1.2e3, "no charge"),
        point("edge", 1.2e3),  # shown again: this time it charges
        point("out", 1.4e3, "no charge"),
    )
    found = made.edge(ROLES, "id.resistor", label)
    assert found.interval == (1.1e3, 1.4e3)
    assert "answered once so and once otherwise" in found.words


def test_a_setting_answered_both_ways_with_nothing_beyond_tells_nothing() -> None:
    found = points(point("in", 1e3), point("edge", 1.2e3, "no charge"), point("edge", 1.2e3)).edge(
        ROLES, "id.resistor", label
    )
    assert found.trouble == "answers contradict each other at 1.2 kΩ, and nothing lies around it"


def test_an_edge_shown_in_both_directions_says_so() -> None:
    found = points(
        point("in", 1e3),
        point("edge", 1.2e3),
        point("edge", 1.21e3, "no charge"),
        point("edge", 1.21e3, "no charge"),
        point("edge", 1.2e3),
    ).edge(ROLES, "id.resistor", label)
    assert found.interval == (1.2e3, 1.21e3)
    assert "both shown 2 times" in found.words
