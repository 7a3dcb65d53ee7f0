"""The view: what a report says, before it is a page."""

from collections.abc import Callable, Iterator
from types import SimpleNamespace

import numpy as np
import pytest

from reports.cell_figure import draw_cell_map
from reports.id_figure import draw_id_map
from reports.inputs import Measurand
from reports.source import Source
from reports.tap_figure import draw_tap_map
from reports.temperature_figure import draw_temperature_map
from reports.view import build
from sequencer.model.curves import Curve
from sequencer.model.specification import Specification


@pytest.fixture
def source(content: dict, traces: tuple[np.ndarray, np.ndarray, np.ndarray]) -> Callable[..., Source]:
    def _source(drawn: tuple[np.ndarray, ...] = traces, **changed: object) -> Source:
        time_s, voltage_V, current_A = drawn
        held = {
            "charger.voltage": voltage_V,
            "charger.current": current_A,
            "pack.compression": np.full(time_s.size, 4.0),
        }

        def series(name: str) -> SimpleNamespace | None:
            flag = np.zeros(time_s.size, np.uint8)
            return SimpleNamespace(time_s=time_s, value=held[name], flag=flag) if name in held else None

        return Source(**({"name": "001", "notes": [], "series": series} | content | changed))

    return _source


def test_first_screen(source: Callable[..., Source]) -> None:
    view = build(source())
    assert (view.overall.text, view.model, view.procedure) == (
        "fail", "greenhouse sprayer charger, 5 cells", "charge-profile",
    )  # fmt: skip
    assert view.tally.startswith("1 fail, 1 conditional fail, 1 inconclusive, 1 not run, 1 conditional pass, 3 pass")
    assert view.rehearsal
    assert len(view.deviations) == 1


def test_one_row_a_verdict_in_their_order(source: Callable[..., Source], content: dict) -> None:
    assert [row.limit for row in build(source()).verdicts] == [v["limit"] for v in content["verdicts"]["verdicts"]]


def test_budgets_follow_the_verdicts(source: Callable[..., Source], content: dict) -> None:
    one = content["budgets"]["charge.voltage"]
    budgets = {"other": one, "charge.cutoff": one, "charge.voltage": one}
    names = [budget.limit for budget in build(source(budgets=budgets)).budgets]
    assert names == ["charge.voltage", "charge.cutoff", "other"]


def test_rules_in_use_are_explained_with_their_source(source: Callable[..., Source]) -> None:
    simple, guarded = build(source()).rules
    # ILAC-G8:09/2019: simple acceptance is clause 4.2.1, non-binary with guard band 4.2.3.
    assert "4.2.1" in simple
    assert "4.2.3" in guarded
    assert all("JCGM 106" in rule for rule in (simple, guarded))


def test_a_scaled_pack_is_said_to_be_one(source: Callable[..., Source]) -> None:
    assert "up to 4 times faster" in build(source()).profile_note


def test_a_rehearsal_is_one_if_either_file_says_so(source: Callable[..., Source], content: dict) -> None:
    real = content["verdicts"] | {"rehearsal": False}
    assert build(source(verdicts=real)).rehearsal
    assert not build(source(verdicts=real, manifest=content["manifest"] | {"rehearsal": False})).rehearsal


def test_limits_per_cell_are_drawn_for_the_pack(source: Callable[..., Source]) -> None:
    drawn = build(source(cells=5)).profile
    assert drawn is not None
    assert drawn.limits_V == pytest.approx((5 * 4.175, 5 * 4.225))  # computed
    undrawn = build(source()).profile
    assert undrawn is not None
    assert undrawn.limits_V == ()


def test_a_record_without_a_charge_has_a_report(source: Callable[..., Source]) -> None:
    bare = {"overall": "not run", "rehearsal": True, "verdicts": []}
    empty = {"classification": None, "findings": []}
    view = build(source(series=lambda name: None, findings=empty, verdicts=bare, budgets={}, events=[]))
    assert (view.profile, view.stages, view.verdicts, view.tally) == (None, (), (), "nothing was judged")
    assert view.profile_note == "The record holds no voltage and current of a charge."


def test_what_the_reading_found_wrong_stands_apart_from_notes_of_the_run(source: Callable[..., Source]) -> None:
    events = [{"t": 1.0, "event": "note", "text": "fan noisy"}]
    view = build(source(notes=["data/events.jsonl: was changed since sealing"], events=events))
    assert view.integrity == ("data/events.jsonl: was changed since sealing",)
    assert view.notes == ("fan noisy",)


def test_definitions_are_those_of_the_record(source: Callable[..., Source]) -> None:
    one = Measurand("voltage held", "the end", "mean", per_cell=True)
    view = build(source(measurands={"charge.voltage": one}))
    assert [(pair.name, pair.text) for pair in view.measurands] == [
        ("charge.voltage", "voltage held. When: the end. Statistic: mean.")
    ]


REQUIRED = {"overall", "rehearsal", "verdicts", "limit", "verdict", "t", "event"}


def with_one_null(value: object, path: tuple[object, ...] = ()) -> Iterator[tuple[tuple[object, ...], object]]:
    """Each document that arises when one value, at any depth, is null; null is what JSON has for "not a number"."""
    items = value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    for key, item in items:
        copied = dict(value) if isinstance(value, dict) else list(value)  # type: ignore[call-overload]
        if key not in REQUIRED and not isinstance(value, list):
            copied[key] = None
            yield (*path, key), copied
        for deeper, changed in with_one_null(item, (*path, key)):
            again = dict(value) if isinstance(value, dict) else list(value)  # type: ignore[call-overload]
            again[key] = changed
            yield deeper, again


def test_no_null_anywhere_stops_a_report(
    source: Callable[..., Source], content: dict, traces: tuple[np.ndarray, ...]
) -> None:
    tried = 0
    few = tuple(trace[::40] for trace in traces)
    for path, changed in with_one_null(content):
        if len(path) == 1:
            continue  # a whole file that is null is no judgement
        try:
            build(source(few, **changed, cells=5))  # type: ignore[arg-type]
        except (TypeError, ValueError, KeyError) as fault:
            pytest.fail(f"null at {path}: {fault!r}")
        tried += 1
    assert tried > 250


def test_no_null_in_what_sweeps_and_walks_left_stops_a_report(
    source: Callable[..., Source], breadth: dict, declared: Specification, sensor: Curve,
) -> None:  # fmt: skip
    """Every key of a point, a walk and an interval, null in all of them, then the page with its figures."""
    tried = 0
    drawings = {"points": (draw_id_map, draw_temperature_map), "walks": (draw_temperature_map, draw_cell_map)}
    for part, name in (("findings", "points"), ("findings", "walks"), ("verdicts", "verdicts")):
        for key in sorted({key for one in breadth[part][name] for key in one} - REQUIRED):
            bare = [one | {key: None} for one in breadth[part][name]]
            changed = breadth | {part: breadth[part] | {name: bare}}
            view = build(source(**changed, series=lambda name: None, specification=declared, curve=sensor, cells=5))
            maps = {draw_id_map: view.id_map, draw_temperature_map: view.temperature_map, draw_cell_map: view.cell_map}
            drawn = [draw(maps[draw], width_in=4.3) for draw in drawings.get(name, ()) if maps[draw] is not None]
            assert drawn or name == "verdicts" or key == "finding"
            tried += 1
    assert tried > 30


def test_a_record_of_insertions_alone_has_no_charge_profile(source: Callable[..., Source], breadth: dict) -> None:
    findings = breadth["findings"] | {"classification": None}
    assert not build(source(**breadth | {"findings": findings, "events": []})).has_charge
    assert build(source(**breadth)).has_charge


def test_a_judgement_from_before_the_breadth_has_its_report(source: Callable[..., Source], content: dict) -> None:
    view = build(source(**content))
    assert (view.id_map, view.temperature_map, view.cell_map, view.tap_map, view.elsewhere) == (*[None] * 4, ())


def test_no_null_in_what_a_screening_left_stops_a_report(
    source: Callable[..., Source], breadth: dict, declared: Specification
) -> None:
    """Every key of it, null, and every key of its exchanges and patterns: a figure or none, never an error."""
    whole = breadth["findings"]["balancing"]
    bare = [whole | {key: None} for key in whole]
    for part in ("exchanges", "patterns"):
        bare += [whole | {part: [one | {key: None} for one in whole[part]]} for key in whole[part][0]]
    for balancing in bare:
        findings = breadth["findings"] | {"balancing": balancing}
        view = build(source(**breadth | {"findings": findings}, specification=declared, cells=5))
        assert view.tap_map is None or draw_tap_map(view.tap_map, width_in=8.6)
