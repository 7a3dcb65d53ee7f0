"""What verdicts come to: found by the right limits, missed, unclear; exit status 0, 1 or 4."""

from __future__ import annotations

from functools import cache
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.virtual.defects import Defect, Size
from sequencer.cli.assay_outcome import Outcome, document, exit_status
from sequencer.cli.assay_plan import Product, Trial, plan_assay

WORDS = ("pass", "conditional pass", "conditional fail", "fail", "inconclusive", "not run", "not applicable")


@cache
def product() -> Product:
    return next(
        Product(t.product, t.inputs, t.charger) for t in plan_assay("acceptance", ["sprayer"], "dead", [1]).trials
    )


def outcome(verdicts: dict[str, str], limits: tuple[str, ...] = (), claimed: bool = True, **more: Any) -> Outcome:
    if not limits:
        return Outcome(Trial("sprayer", product().inputs, product().charger, 1), verdicts, "complete", "", **more)
    content = {"name": "too-warm", "harm": "An invented harm to a pump.", "limits": list(limits)}
    defect = Defect.model_validate({**content, "change": {"ends": "false"}})
    trial = Trial("sprayer", product().inputs, product().charger, 1, defect, Size(0.03, "voltage"), claimed)
    return Outcome(trial, verdicts, "complete", "", **more)


SOUND = outcome({"charge.voltage": "pass", "charge.ends": "conditional pass", "charge.cutoff": "not applicable"})


@pytest.mark.parametrize(
    ("verdicts", "limits", "found", "by"),
    [
        ({"charge.voltage": "fail", "charge.ends": "pass"}, ("charge.voltage",), True, ["charge.voltage"]),
        ({"charge.voltage": "conditional fail"}, ("charge.*",), True, ["charge.voltage"]),
        ({"charge.voltage": "pass", "charge.ends": "fail"}, ("charge.voltage",), False, []),
        ({"a.open": "fail", "a.short": "pass"}, ("a.open", "a.short"), False, ["a.open"]),
        ({"a.open": "fail", "a.short": "fail", "b": "fail"}, ("a.open", "a.short"), True, ["a.open", "a.short"]),
        ({"charge.voltage": "inconclusive"}, ("charge.voltage",), False, []),
    ],
)
def test_found_by_the_right_limits(
    verdicts: dict[str, str], limits: tuple[str, ...], found: bool, by: list[str]
) -> None:
    one = outcome(verdicts, limits)
    assert (one.found, one.by) == (found, by)


def test_exit_status() -> None:
    found = outcome({"a": "fail"}, ("a",))
    missed = outcome({"a": "pass"}, ("a",))
    unclear = outcome({"a": "inconclusive"}, ("a",))
    unclaimed = outcome({"a": "pass"}, ("a",), claimed=False)
    false_alarm, open_ = outcome({"a": "fail"}), outcome({"a": "inconclusive"})
    assert exit_status([SOUND, found, unclaimed], []) == 0
    assert exit_status([SOUND, found, missed], []) == 1
    assert exit_status([SOUND, missed, unclear], []) == 1  # a miss counts before what is not known
    assert exit_status([false_alarm, found], []) == 1
    assert exit_status([SOUND, unclear], []) == 4
    assert exit_status([open_, found], []) == 4
    assert exit_status([SOUND, found], ["tap-monitor"]) == 4  # claimed, and never put to the test


def test_not_run_counts_unless_it_is_left_out_on_purpose() -> None:
    assert outcome({"a": "not run"}, on_purpose=True).inconclusive == []
    assert outcome({"a": "not run"}, on_purpose=False).inconclusive == ["a"]


@given(st.lists(st.sampled_from(WORDS), max_size=4), st.lists(st.sampled_from(WORDS), max_size=4))
def test_nothing_but_found_claims_without_false_alarms_is_met(sound: list[str], spoiled: list[str]) -> None:
    outcomes = [outcome({str(i): word for i, word in enumerate(sound)}, on_purpose=False)]
    outcomes += [outcome({"a": word}, ("a",)) for word in spoiled]
    clean = not {"fail", "conditional fail", "inconclusive", "not run"} & set(sound)
    met = clean and all(word in ("fail", "conditional fail") for word in spoiled)
    assert (exit_status(outcomes, []) == 0) == met


def test_the_document_holds_what_its_readers_need() -> None:
    """These keys, no others."""
    shown = document("acceptance", [SOUND, outcome({"a": "fail"}, ("a",))])
    assert set(shown) == {"procedure", "sound", "defects"}
    assert shown["sound"] == [{"charger": "sprayer", "seed": 1, "false_alarms": [], "inconclusive": []}]
    assert shown["defects"] == [
        {
            "name": "too-warm",
            "harm": "An invented harm to a pump.",
            "size": "30 mV",
            "claimed": True,
            "found": True,
            "by": ["a"],
        }
    ]
