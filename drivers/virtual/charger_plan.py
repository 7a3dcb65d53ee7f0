"""A virtual charger in plain numbers: what it does, what it reads at the pack's small contacts, when it stops."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Literal, TypeAlias

FaultLatch: TypeAlias = Literal["none", "removal", "mains", "for good"]
IDLE_DRAIN_A = 0.2e-3  # what the divider of an idle charger takes from a full pack; common practice, no source
TAP_DRAIN_A = 20e-6  # what the divider of one cell tap takes; common practice, no source


@dataclass(frozen=True)
class Stage:
    """One current stage; `until_V` is the pack voltage at the regulation point that ends it (None: cc-cv)."""

    current_A: float
    until_V: float | None = None


@dataclass(frozen=True)
class Pin:
    """How a charger reads a resistor: a pull-up to a reference, on for `on_s` every `every_s` (0: always)."""

    pull_up_ohm: float
    reference_V: float
    filter_s: float
    every_s: float = 0.0
    on_s: float = 0.0


@dataclass(frozen=True)
class IdBand:
    """From `low_ohm` to `high_ohm`, as the charger truly switches, the first stage's current is `current_A`."""

    low_ohm: float
    high_ohm: float
    current_A: float


@dataclass(frozen=True)
class Window:
    """Of a thermistor that falls with temperature: charges between `hot_ohm` and `cold_ohm`."""

    cold_ohm: float
    hot_ohm: float

    def holds(self, ohm: float) -> bool:
        return self.hot_ohm <= ohm <= self.cold_ohm


@dataclass(frozen=True)
class Temperature:
    """`start` counts at insertion, `run` while charging; after a stop it must be inside `release`."""

    pin: Pin
    start: Window
    run: Window
    release: Window


@dataclass(frozen=True)
class TapMonitor:
    """Stops the charge when a cell of `cells` (1 is the lowest) stands above the threshold for the filter time."""

    threshold_V: float
    filter_s: float
    hysteresis_V: float
    latch: bool
    cells: tuple[int, ...]


@dataclass(frozen=True)
class Balancer:
    """Moves charge through the taps: out of each of `cells` that stands high, or (`charges`) into each that stands low.

    High and low are told at `level_V`, or by `difference_V` from the mean of all cells; through a resistance across the
    cell, or with a current. On for `on_s` every `every_s` (0: always).
    """

    charges: bool
    ohm: float | None
    current_A: float | None
    level_V: float | None
    difference_V: float | None
    cells: tuple[int, ...]
    every_s: float = 0.0
    on_s: float = 0.0


@dataclass(frozen=True)
class Probe:
    """`count` pulses of `current_A` for `on_s` each, `off_s` apart, before a pack too low is refused."""

    current_A: float
    on_s: float
    off_s: float
    count: int


@dataclass(frozen=True)
class Precharge:
    """A small current until every level stands at `below_V` per cell; given up after `timeout_s` (None: never)."""

    below_V: float
    current_A: float
    timeout_s: float | None = None


@dataclass(frozen=True)
class LowStart:
    """What becomes of a discharged pack; voltages per cell. `cells` (1 is the lowest) are looked at one by one."""

    refuse_V: float = 0.0
    probe: Probe | None = None
    precharge: Precharge | None = None
    cells: tuple[int, ...] = ()


@dataclass(frozen=True)
class ChargerPlan:
    """What a charger does, in numbers; voltages are of the whole pack. What has no default, the file model gives."""

    name: str
    cells: int
    stages: tuple[Stage, ...]
    limit_V: float  # regulation voltage of a cc-cv charger, ceiling of another
    cutoff_A: float | None  # cc-cv: the charge ends below this current
    ends: bool
    start_delay_s: float
    response_s: float
    source_ohm: float
    works: bool
    surge_A: float = 0.0  # current at the start, for `surge_s`
    surge_s: float = 0.0
    id_pin: Pin | None = None
    id_bands: tuple[IdBand, ...] = ()
    temperature: Temperature | None = None
    tap_monitor: TapMonitor | None = None
    tap_drain_A: float = TAP_DRAIN_A  # into each tap; negative: out of it
    fault_latch: FaultLatch = "none"
    low_start: LowStart | None = None
    clear_s: float | None = None  # how long the pack must be gone for the charger to start anew; None: response_s
    balancer: Balancer | None = None

    @property
    def drain_S(self) -> float:
        return IDLE_DRAIN_A / (4.2 * self.cells)

    @classmethod
    def from_json(cls, content: dict[str, Any]) -> ChargerPlan:
        """The plan out of what `dataclasses.asdict` and JSON made of it."""
        charger = dict(content)
        charger["stages"] = tuple(Stage(**stage) for stage in charger["stages"])
        charger["id_bands"] = tuple(IdBand(**band) for band in charger["id_bands"])
        for key, made in _MADE.items():
            charger[key] = None if charger[key] is None else made(charger[key])
        return cls(**charger)


def _pin(content: dict[str, Any]) -> Pin:
    return Pin(**content)


def _temperature(content: dict[str, Any]) -> Temperature:
    windows = {name: Window(**content[name]) for name in ("start", "run", "release")}
    return Temperature(_pin(content["pin"]), **windows)


def _monitor(content: dict[str, Any]) -> TapMonitor:
    return TapMonitor(**{**content, "cells": tuple(content["cells"])})


def _balancer(content: dict[str, Any]) -> Balancer:
    return Balancer(**{**content, "cells": tuple(content["cells"])})


def _low_start(content: dict[str, Any]) -> LowStart:
    probe, precharge = content["probe"], content["precharge"]
    return LowStart(
        content["refuse_V"],
        None if probe is None else Probe(**probe),
        None if precharge is None else Precharge(**precharge),
        tuple(content["cells"]),
    )


_MADE: dict[str, Callable[[dict[str, Any]], Any]] = {
    "id_pin": _pin,
    "temperature": _temperature,
    "tap_monitor": _monitor,
    "balancer": _balancer,
    "low_start": _low_start,
}
