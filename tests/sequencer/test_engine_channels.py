"""The channel table, and the flags that stand in records for ever."""

from sequencer.engine.channels import CHANNELS, SampleFlag


def test_names_are_unique_and_units_are_si_symbols():
    names = [channel.name for channel in CHANNELS]
    assert len(set(names)) == len(names)
    assert {channel.unit for channel in CHANNELS} <= {"V", "A", "s", "1"}


def test_set_points_are_settings_and_only_they():
    assert {c.name for c in CHANNELS if c.kind == "setting"} == {c.name for c in CHANNELS if c.name.startswith("set.")}


def test_flags_keep_the_values_that_older_records_hold():
    # The record's own format, version 1.
    assert [(flag.name, int(flag)) for flag in SampleFlag] == [("STALE", 1), ("OVERLOAD", 2), ("SUSPECT", 4)]
    assert SampleFlag.GOOD == 0
