"""What a limit is about, in a few words beside its name."""

from __future__ import annotations

import re
from collections.abc import Mapping
from typing import Any

# By finding; {n} is the stage, band, cell or range that the limit's name carries.
_WORDS: Mapping[str, str] = {
    "charges": "a nominal pack is charged",
    "charge.algorithm": "shape of the charge",
    "charge.stage.current": "current of stage {n}",
    "charge.stage.threshold": "voltage at which stage {n} ends",
    "charge.voltage": "voltage held at the end",
    "charge.end_voltage": "largest voltage",
    "charge.cutoff": "current just before the end",
    "charge.ends": "the charge ends by itself",
    "charge.current_after_end": "current after the end",
    "id.band.current": "current that band {n} selects",
    "id.band.lower_edge": "lower end of band {n}",
    "id.band.upper_edge": "upper end of band {n}",
    "id.outside": "resistance outside every band",
    "id.open": "ID contact open",
    "id.short": "ID contact shorted",
    "temperature.start_low": "coldest start",
    "temperature.start_high": "hottest start",
    "temperature.run_low": "running charge stops in the cold",
    "temperature.run_high": "running charge stops in the heat",
    "temperature.release_low": "charge goes on again after the cold",
    "temperature.release_high": "charge goes on again after the heat",
    "temperature.open": "thermistor open",
    "temperature.short": "thermistor shorted",
    "tap_trip.voltage": "cell {n}: stops the charge at",
    "tap_trip.stop_time": "cell {n}: stops within",
    "tap_trip.release": "cell {n}: once it is low again",
    "balancing.screening": "largest balancing current, by screening",
    "balancing.current": "cell {n}: balancing current, by screening",
    "balancing.none_above": "absence of a balancing current",
    "low_start.response": "discharged pack, range {n} of start voltages",
    "low_start.weak_cell": "cell {n} weak, the others normal",
    "low_start.precharge_current": "current of the precharge",
    "low_start.threshold": "precharge goes over to full current at",
    "low_start.precharge_time": "a precharge held low is given up after",
    "low_start.probe_current": "largest probe pulse",
    "low_start.probe_time": "longest probe pulse",
}


def limit_words(verdict: Mapping[str, Any]) -> str:
    """The words of a verdict's limit; empty where its finding is not known, or its name says not which one it is."""
    words = _WORDS.get(str(verdict.get("finding")), "")
    if "{n}" not in words:
        return words
    place = re.fullmatch(r"[a-z_.]+?(\d{1,4})\.[a-z_]+", str(verdict.get("limit")), re.ASCII)
    return words.format(n=place[1]) if place else ""
