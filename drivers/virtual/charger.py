"""A virtual charger as a state machine: its output stage in each state, and what it watches there.

Every watch has a filter time: its condition must hold without a break for that long. The circuit finds the exact
moment. States: off (no mains, or dead), waiting (for a pack it accepts), sizing (how low it stands), probing and
between pulses, precharging, surge, charging, paused (until what stopped it is gone), fault (until cleared), ended.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import NamedTuple

from drivers.virtual.balancing import LOOK_s, moved_A
from drivers.virtual.charger_plan import ChargerPlan, FaultLatch, IdBand, LowStart, TapMonitor, Temperature
from drivers.virtual.history import Pulses
from drivers.virtual.node import ApartLaw, Drive, NodeLaw
from drivers.virtual.terminals import OPEN, Terminals

PACK_PRESENT_V = 0.5  # per cell: below this a charger sees no pack; common practice, no source
OPEN_RATIO = 20.0  # an ID above so many pull-ups, and above twice the highest band, is none; common practice, no source
ALWAYS_V = -math.inf
BALANCES = ("charging", "ended")
ACTIVE = ("sizing", "probing", "between", "precharging", "surge", "charging")  # a pack is in, and being dealt with


class Watch(NamedTuple):
    """Acts when the node has stood at `node_V` or above (`above`) or below it (not `above`) for `dwell_s`."""

    key: object  # the same condition keeps its key; its time runs on when other things on the bench change
    node_V: float
    above: bool
    dwell_s: float
    act: Callable[[], None]

    def holds(self, v: float) -> bool:
        return (v >= self.node_V) is self.above


class Charger:
    """The state of one charger. The circuit calls `mains`, reads `drive` and `watches`, and runs what is due."""

    def __init__(self, plan: ChargerPlan, terminals: Terminals | None = None) -> None:
        """`terminals`: the pack's contacts; what the bench does not wire there is taken for the right pack's."""
        self.plan = plan
        self.terminals = terminals or Terminals()
        self.state = "off"
        self.stage = 0
        self._entered = 0  # counts transitions, so that no filter's time survives one
        wired = self.terminals.signals
        self._reads_id = plan.id_pin is not None and "id" in wired
        self._temperature: Temperature | None = plan.temperature if "thermistor" in wired else None
        self._monitor: TapMonitor | None = plan.tap_monitor if self._has_all_taps else None
        self._pulses = 0  # probe pulses given to this pack
        self._filters = {"id": plan.id_pin.filter_s} if plan.id_pin and self._reads_id else {}
        if self._temperature:
            self._filters["thermistor"] = self._temperature.pin.filter_s
        self._read_ohm = dict.fromkeys(self._filters, OPEN)  # behind the filter
        self._dead = False  # latched for good
        self._over = False  # a cell stands too high, behind the filter
        self._band: IdBand | None = None  # as read at insertion
        self._looks = 0  # at the cells, to balance them
        self.contacts_V: Callable[[], float] = lambda: 0.0  # what stands at its contacts now
        self._connect_pins()

    @property
    def _has_all_taps(self) -> bool:
        return self.plan.cells > 1 and len(self.terminals.taps) == self.plan.cells - 1

    def _connect_pins(self) -> None:
        signals, temperature = self.terminals.signals, self.plan.temperature
        if "id" in signals:
            signals["id"].pin = self.plan.id_pin
        if "thermistor" in signals:
            signals["thermistor"].pin = temperature.pin if temperature else None
        self.terminals.tap_drain_A = self.plan.tap_drain_A
        if self.plan.balancer is not None:
            self.terminals.moving = Pulses(self.plan.balancer.every_s, self.plan.balancer.on_s)

    def mains(self, on: bool) -> None:
        """Connect or disconnect the mains; on again after off starts anew."""
        self.terminals.powered = on and self.plan.works
        self._read_ohm = dict.fromkeys(self._filters, OPEN)
        self._over = False
        if not on:
            self._dead |= self.state == "fault" and self.plan.fault_latch == "for good"
            self._enter("off")
        elif self.state == "off" and self._dead:
            self._enter("fault")
        elif self.state == "off" and self.plan.works:
            self._enter("waiting")

    def drive(self) -> Drive | None:
        """The output stage as it stands; None where nothing is driven."""
        low = self.plan.low_start
        if self.state == "surge":
            return Drive(self.plan.surge_A, self.plan.limit_V)
        if self.state == "probing" and low is not None and low.probe is not None:
            return Drive(low.probe.current_A, self.plan.limit_V)
        if self.state == "precharging" and low is not None and low.precharge is not None:
            return Drive(low.precharge.current_A, self.plan.limit_V)
        if self.state == "charging":
            return Drive(self.plan.stages[self.stage].current_A * self._scale, self.plan.limit_V)
        return None

    @property
    def _scale(self) -> float:
        """The band read at insertion gives the first stage's current; later stages keep their ratio to it."""
        return self._band.current_A / self.plan.stages[0].current_A if self._band else 1.0

    # -- what it watches ------------------------------------------------------------------------------------

    def watches(self, law: NodeLaw | ApartLaw) -> list[Watch]:
        """What the charger waits for in its state."""
        if self.state == "off":
            return []
        found = [*self._pin_watches(), *self._cell_watches(law), *self._balance_watches()]
        present_V = law.node_at_contacts(PACK_PRESENT_V * self.plan.cells)
        if self.state == "waiting":
            return [*found, *self._at_insertion(present_V)]
        if self.state not in ACTIVE:
            return [*found, *self._at_rest(present_V)]
        found += self._stops(present_V)
        if self.plan.low_start is not None and self.state not in ("surge", "charging"):
            return [*found, *self._low_watches(self.plan.low_start, law)]
        if self.state == "surge":
            found.append(self._watch("surge", ALWAYS_V, True, self.plan.surge_s, self._charge))
        elif not (self._is_last() and not self.plan.ends):
            found.append(self._watch("stage", self._stage_ends_at(law), True, self.plan.response_s, self._next_stage))
        return found

    def _watch(self, what: str, node_V: float, above: bool, dwell_s: float, act: Callable[[], None]) -> Watch:
        return Watch((what, self._entered), node_V, above, dwell_s, act)

    def _pin_watches(self) -> list[Watch]:
        """A resistance counts once it has stood for the filter time: a shorter glitch is not seen."""
        found = []
        for name, filter_s in self._filters.items():
            ohm = self.terminals.seen_ohm(name)
            if ohm != self._read_ohm[name]:
                act = self._reading(name, ohm)
                found.append(Watch((name, ohm), ALWAYS_V, True, filter_s, act))
        return found

    def _reading(self, name: str, ohm: float) -> Callable[[], None]:
        return lambda: self._read_ohm.update({name: ohm})

    def _cell_watches(self, law: NodeLaw | ApartLaw) -> list[Watch]:
        """The tap monitor, a comparator with filter and hysteresis; the top cell is what is left to B+."""
        monitor = self._monitor
        if monitor is None:
            return []
        level_V = monitor.threshold_V - (monitor.hysteresis_V if self._over else 0.0)
        pins_V = self.terminals.pins_V()
        high = [number for number in self._lower_cells(monitor) if _cell_V(pins_V, number) > level_V]
        top_V = math.inf
        # without a current through them the charger's contacts do not show the pack
        if len(pins_V) + 1 in monitor.cells and not isinstance(law, ApartLaw):
            top_V = law.node_at_contacts(math.nextafter(level_V + pins_V[-1], math.inf))
        if self._over:
            below_V = ALWAYS_V if high else top_V
            return [Watch("cells low", below_V, False, monitor.filter_s, self._set_low)]
        found = [Watch(("cell", number), ALWAYS_V, True, monitor.filter_s, self._set_over) for number in high]
        return [*found, Watch(("cell", "top"), top_V, True, monitor.filter_s, self._set_over)]

    def _lower_cells(self, monitor: TapMonitor) -> list[int]:
        return [number for number in monitor.cells if number <= len(self.terminals.taps)]

    def _balance_watches(self) -> list[Watch]:
        """While it charges and after the end it compares the cells every so often."""
        if self.plan.balancer is None or not self._has_all_taps or self.state not in BALANCES:
            return []
        return [Watch(("cells compared", self._looks), ALWAYS_V, True, LOOK_s, self._balance)]

    def _low_watches(self, low: LowStart, law: NodeLaw | ApartLaw) -> list[Watch]:
        """How low the pack stands, and what follows from it."""
        probe, precharge = low.probe, low.precharge
        if self.state == "probing" and probe is not None:
            return [self._watch("pulse", ALWAYS_V, True, probe.on_s, self._pause)]
        if self.state == "between" and probe is not None:
            act = self._probe if self._pulses < probe.count else self._fault
            return [self._watch("pause", ALWAYS_V, True, probe.off_s, act)]
        normal_V = self._stands_at(low, low.refuse_V if precharge is None else precharge.below_V, law)
        if self.state == "precharging" and precharge is not None:
            found = [self._watch("normal", normal_V, True, self.plan.response_s, self._begin)]
            timeout_s = precharge.timeout_s
            return found + ([self._watch("timer", ALWAYS_V, True, timeout_s, self._fault)] if timeout_s else [])
        too_low = self._probe if probe is not None else self._fault
        return [
            self._watch("too low", self._stands_at(low, low.refuse_V, law), False, 0.0, too_low),
            self._watch("normal", normal_V, True, 0.0, self._begin),
            self._watch("low", normal_V, False, 0.0, self._precharge),
        ]

    def _stands_at(self, low: LowStart, level_V: float, law: NodeLaw | ApartLaw) -> float:
        """The node voltage from which pack and each cell looked at stand at a level per cell; inf: a cell does not."""
        node_V = law.node_at_contacts(level_V * self.plan.cells)
        if not (low.cells and self._has_all_taps):
            return node_V
        pins_V = self.terminals.pins_V()
        if any(_cell_V(pins_V, number) < level_V for number in low.cells if number <= len(pins_V)):
            return math.inf
        if len(pins_V) + 1 not in low.cells:
            return node_V
        return max(node_V, law.node_at_contacts(level_V + pins_V[-1]))

    def _at_insertion(self, present_V: float) -> list[Watch]:
        delay_s = self.plan.start_delay_s
        if self._accepts():
            return [self._watch("pack", present_V, True, delay_s, self._start)]
        if self._insertion_latches:
            return [self._watch("refused", present_V, True, delay_s, self._fault)]
        return []

    def _accepts(self) -> bool:
        """Whether ID, thermistor and cells are those of a pack that may be charged."""
        if self._reads_id and self._band_read() is None:
            return False
        temperature = self._temperature
        return not self._over and (temperature is None or temperature.start.holds(self._read_ohm["thermistor"]))

    def _band_read(self) -> IdBand | None:
        ohm = self._read_ohm["id"]
        return next((band for band in self.plan.id_bands if band.low_ohm <= ohm <= band.high_ohm), None)

    @property
    def _insertion_latches(self) -> bool:
        return self.plan.fault_latch != "none" or bool(self._over and self._monitor and self._monitor.latch)

    def _stops(self, present_V: float) -> list[Watch]:
        """What interrupts a charge: the pack gone, its ID gone, too cold or too hot, a cell too high."""
        found = [self._watch("no pack", present_V, False, self.plan.response_s, self._lost)]
        if self._id_is_gone():
            found.append(self._watch("no ID", ALWAYS_V, True, 0.0, self._end))
        if not self._temperature_runs():
            found.append(self._watch("temperature", ALWAYS_V, True, 0.0, self._stop))
        if self._over and self._monitor:
            act = self._fault if self._monitor.latch else self._stop
            found.append(self._watch("cell high", ALWAYS_V, True, 0.0, act))
        return found

    def _id_is_gone(self) -> bool:
        if not self._reads_id or self.plan.id_pin is None:
            return False
        highest_ohm = max(band.high_ohm for band in self.plan.id_bands)
        return self._read_ohm["id"] > max(OPEN_RATIO * self.plan.id_pin.pull_up_ohm, 2.0 * highest_ohm)

    def _temperature_runs(self) -> bool:
        temperature = self._temperature
        return temperature is None or temperature.run.holds(self._read_ohm["thermistor"])

    def _at_rest(self, present_V: float) -> list[Watch]:
        """Ended, paused or at fault: the pack's removal lets it start anew, unless only the mains do."""
        found = []
        if self.state == "paused" and self._may_resume():
            act = self._charge if self.plan.low_start is None else self._size_up
            found.append(self._watch("resume", present_V, True, self.plan.response_s, act))
        if self.state == "fault" and self._latch != "removal":
            return found
        clear_s = self.plan.response_s if self.plan.clear_s is None else self.plan.clear_s
        if self._id_is_gone():
            return [*found, self._watch("no pack", ALWAYS_V, True, clear_s, self._lost)]
        return [*found, self._watch("no pack", present_V, False, clear_s, self._lost)]

    def _may_resume(self) -> bool:
        temperature = self._temperature
        inside = temperature is None or temperature.release.holds(self._read_ohm["thermistor"])
        return inside and not self._over

    @property
    def _latch(self) -> FaultLatch:
        return self.plan.fault_latch if self.plan.fault_latch != "none" else "removal"

    def _stage_ends_at(self, law: NodeLaw | ApartLaw) -> float:
        until_V = self.plan.stages[self.stage].until_V
        if until_V is not None:
            return law.node_at_regulation(until_V)
        assert self.plan.cutoff_A is not None
        return law.node_at_current_below(self.plan.cutoff_A)

    def _is_last(self) -> bool:
        return self.stage == len(self.plan.stages) - 1

    # -- what it does ---------------------------------------------------------------------------------------

    def _enter(self, state: str) -> None:
        self.state = state
        self._entered += 1
        if state not in BALANCES:
            self.terminals.moved_A = ()

    def _balance(self) -> None:
        assert self.plan.balancer is not None
        self._looks += 1
        self.terminals.moved_A = moved_A(self.plan.balancer, self.terminals, self.contacts_V())

    def _start(self) -> None:
        self.stage = 0
        self._pulses = 0
        self._band = self._band_read() if self._reads_id else None
        if self.plan.low_start is None:
            self._begin()
        else:
            self._size_up()

    def _size_up(self) -> None:
        self._enter("sizing")

    def _begin(self) -> None:
        self._enter("surge" if self.plan.surge_s > 0 else "charging")

    def start_by_itself(self) -> None:
        """It delivers from now on, whatever it sees, and even without its mains (trouble)."""
        self._start()
        self._begin()

    def _precharge(self) -> None:
        self._enter("precharging")

    def _probe(self) -> None:
        self._pulses += 1
        self._enter("probing")

    def _pause(self) -> None:
        self._enter("between")

    def _charge(self) -> None:
        self._enter("charging")

    def _stop(self) -> None:
        self._enter("paused" if self.plan.fault_latch == "none" else "fault")

    def _fault(self) -> None:
        self._enter("fault")

    def _end(self) -> None:
        self._enter("ended")

    def _lost(self) -> None:
        self._enter("waiting")

    def _set_over(self) -> None:
        self._over = True

    def _set_low(self) -> None:
        self._over = False

    def _next_stage(self) -> None:
        if self._is_last():
            self._enter("ended")
        else:
            self.stage += 1
            self._enter("charging")


def _cell_V(pins_V: list[float], number: int) -> float:
    return pins_V[number - 1] - (pins_V[number - 2] if number > 1 else 0.0)
