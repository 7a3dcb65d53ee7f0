"""What is said of the run as a whole."""

import pytest

from reports import header


@pytest.mark.parametrize(
    ("declared", "text"),
    [
        (None, "no certificate declared"),
        ({}, "no certificate declared"),
        ({"number": "C-77", "due": "2027-03-01"}, "C-77, due 2027-03-01"),
        ({"number": "C-77"}, "C-77"),
    ],
)
def test_certificates(declared: object, text: str) -> None:
    assert header.certificate(declared) == text


@pytest.mark.parametrize(("safe", "text"), [(True, "verified."), (False, "NOT VERIFIED."), (None, "not recorded.")])
def test_the_safe_state_is_never_claimed_without_proof(content: dict, safe: bool | None, text: str) -> None:
    assert f"Safe state: {text}" in header.ending(content["manifest"] | {"safe": safe}, content["events"])


def test_ending_says_why() -> None:
    events = [{"t": 9.0, "event": "run-end", "ended": "stopped", "why": "Ctrl-C"}]
    assert header.ending({"ended": "stopped"}, events).startswith(
        "Run ended: stopped (Ctrl-C). Safe state: not recorded"
    )


def test_trips_name_cause_value_and_bound() -> None:
    trip = {"t": 5.0, "event": "trip", "cause": "bench", "quantity": "node voltage", "value": 21.9, "unit": "V"}
    lines = header.alarms([trip | {"bound": 21.5, "why": "the meters disagree"}])
    assert lines == ("Bench trip: node voltage 21.9 V against a bound of 21.5 V; the meters disagree",)


def test_faults_of_bench_and_program_are_told_in_a_line() -> None:
    bench = {"t": 5.0, "event": "bench-fault", "instrument": "node_load", "what": "no answer within 0.3 s"}
    own = {"t": 6.0, "event": "internal-fault", "traceback": "Traceback ...\n  File x\nKeyError: 'a'\n"}
    assert header.alarms([bench, {"t": 5.5, "event": "note"}, own]) == (
        "Bench fault: node_load: no answer within 0.3 s",
        "Fault of packmime itself: KeyError: 'a'; the traceback is in the record's events",
    )


def test_the_way_to_safety_in_its_order(content: dict) -> None:
    assert header.way_to_safety(content["events"])[0] == "charger quiet: shunt 0.001 A, ballast 0.001 A"
    torn = [{"t": 1.0, "event": "safe-state", "verified": False, "words": ["a"], "troubles": ["no answer"]}]
    assert header.way_to_safety(torn) == ("a", "no answer")
    assert header.way_to_safety([]) == ()


def test_stand_in_with_a_second_pace() -> None:
    words = header.standin({"Rp_ohm": 0.1124, "settling_s": 0.35, "quiet": {"gain": 0.3, "lag_s": 3.3}})
    assert words == "Rp 112 mΩ, settling 0.35 s, quiet (gain 0.3, lag 3.3 s)"


def test_files_with_the_head_of_their_hash(content: dict) -> None:
    rows = header.inputs(content["manifest"])
    assert [row[0] for row in rows] == ["procedure", "specification", "pack", "bench", "virtual charger"]
    held = {**content["manifest"], "charger_file": {"file": "wrong.yaml", "sha256": "0123456789abcdef"}}
    assert header.inputs(held)[-1][2:] == ("wrong.yaml", "0123456789ab")
    assert rows[0][3] == content["manifest"]["procedure"]["sha256"][:12]


def test_a_manifest_of_a_run_that_crashed_is_no_reason_to_fail() -> None:
    bare = {"run": None, "rehearsal": None, "started_utc": None, "ended_utc": None, "ended": "abandoned", "safe": None}
    assert header.ending(bare, []) == "Run ended: abandoned. Safe state: not recorded."
    assert header.inputs(bare)[0] == ("procedure", "–", "–", "–")
    assert header.instruments(bare) == ()
    assert header.dated(bare, virtual=False) == "– to –"
    assert [pair.name for pair in header.surroundings(bare)] == ["packmime", "Python", "packages"]


def test_a_rehearsal_is_dated_in_virtual_time() -> None:
    told = {"started_utc": "2026-12-01T08:00:00Z", "ended_utc": "2026-12-01T08:30:00Z"}
    assert header.dated(told, virtual=True) == f"{header.dated(told, virtual=False)} in virtual time"


def test_deviations_are_listed_once() -> None:
    assert header.unique(["a", "b"], None, ["b", "c"]) == ("a", "b", "c")
