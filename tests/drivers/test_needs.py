"""What each role needs, held against the dialects that ship and against itself."""

from __future__ import annotations

from typing import get_args

import pytest

from drivers.needs import NEEDS, Role


def test_every_role_says_what_it_needs() -> None:
    assert set(NEEDS) == set(get_args(Role))


@pytest.mark.parametrize("role", sorted(NEEDS))
def test_what_is_asked_of_a_setting_or_reading_is_asked_of_one_that_is_needed(role: str) -> None:
    need = NEEDS[role]
    assert need.valued <= need.settings
    assert need.channelled <= need.settings | set(need.readings) | set(need.may)
    assert "clear" in need.settings
    assert not need.states or "status" in need.readings["state"]


def test_what_carries_energy_can_be_taken_away() -> None:
    for role in ("supply", "load", "tap supply", "mains switch"):
        assert {"on", "off"} <= NEEDS[role].settings
    assert {"close", "open"} <= NEEDS["contacts"].settings
