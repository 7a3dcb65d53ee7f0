"""What a report says of the run as a whole: from the manifest, the judgement and the events."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import Any

from reports.rows import Pair
from reports.wording import NOTHING, clean, si, utc

Json = Mapping[str, Any]


def part(manifest: Json, name: str) -> Json:
    """A section of the manifest; empty where it is missing or null."""
    section = manifest.get(name)
    return section if isinstance(section, Mapping) else {}


def unique(*lists: Iterable[object] | None) -> tuple[str, ...]:
    """All texts of several lists in order, each once."""
    return tuple(dict.fromkeys(clean(text) for texts in lists for text in texts or ()))


def inputs(manifest: Json) -> tuple[tuple[str, str, str, str], ...]:
    """Kind, name, file and the head of its SHA-256 of each file that the run obeyed."""
    rows = []
    for kind, key in (("procedure", "name"), ("specification", "model"), ("pack", "name"), ("bench", "name")):
        section = part(manifest, kind)
        digest = str(section.get("sha256") or "")
        rows.append((kind, clean(section.get(key)), clean(section.get("file")), clean(digest[:12] or None)))
    if manifest.get("charger") is not None:
        held = part(manifest, "charger_file")
        digest = str(held.get("sha256") or "")
        rows.append(
            ("virtual charger", clean(manifest["charger"]), clean(held.get("file")), clean(digest[:12] or None))
        )
    return tuple(rows)


def instruments(manifest: Json) -> tuple[tuple[str, str, str, str, str], ...]:
    """Name, role, identity, address with dialect, certificate of each instrument."""
    return tuple(
        (
            clean(one.get("name")),
            clean(one.get("role")) + (f" ({clean(one['place'])})" if one.get("place") is not None else ""),
            clean(one.get("identity")),
            f"{clean(one.get('address'))} ({clean(one.get('dialect'))})",
            certificate(one.get("certificate")),
        )
        for one in manifest.get("instruments") or ()
    )


def certificate(declared: object) -> str:
    """A certificate in words: "C-77, due 2027-03-01"."""
    if not isinstance(declared, Mapping) or not declared:
        return "no certificate declared"
    number = clean(declared.get("number"))
    return f"{number}, due {clean(declared['due'])}" if declared.get("due") is not None else number


def surroundings(manifest: Json) -> tuple[Pair, ...]:
    """Program, stand-in and machine, one line each."""
    environment = part(manifest, "environment")
    packages = part(environment, "packages")
    rows = [
        Pair("packmime", f"{clean(manifest.get('packmime'))}, record format {clean(manifest.get('format'))}"),
        Pair("Python", f"{clean(environment.get('python'))} on {clean(environment.get('platform'))}"),
        Pair("packages", ", ".join(f"{clean(name)} {clean(packages[name])}" for name in sorted(packages)) or NOTHING),
    ]
    if manifest.get("seed") is not None:
        rows.append(Pair("seed", clean(manifest["seed"])))
    if part(manifest, "standin"):
        rows.insert(0, Pair("stand-in", standin(part(manifest, "standin"))))
    if part(manifest, "performance"):
        rows.append(Pair("performance", _flat(part(manifest, "performance"))))
    return tuple(rows)


def order(manifest: Json) -> tuple[Pair, ...]:
    """For whom, where, on which sample and by whom; nothing for a run without an order."""
    content = part(manifest, "order")
    skipped = ("file", "sha256", "lacking")
    return tuple(row for key, value in content.items() if key not in skipped for row in _order_rows(key, value))


def _order_rows(key: str, value: object) -> list[Pair]:
    if isinstance(value, Mapping):
        return [row for inner, one in value.items() for row in _order_rows(f"{key}, {inner}", one)]
    if isinstance(value, list):
        listed = [
            ", ".join(clean(part) for part in one.values()) if isinstance(one, Mapping) else clean(one) for one in value
        ]
        return [Pair(clean(key), "; ".join(listed))] if listed else []
    return [] if value is None else [Pair(clean(key), clean(value))]


def order_lacks(manifest: Json) -> tuple[str, ...]:
    """What a report that is issued would still need; everything where there is no order."""
    return unique(part(manifest, "order").get("lacking"))


_STANDIN = {"Rp_ohm": ("Rp", "Ω"), "Rv_ohm": ("Rv", "Ω"), "delay_scans": ("delay in scans", "")}


def standin(values: Json) -> str:
    """The stand-in's resistances and loop, rounded; a pace of its own in brackets."""
    return ", ".join(_standin_part(str(name), value) for name, value in values.items())


def _standin_part(name: str, value: object) -> str:
    if isinstance(value, Mapping):
        return f"{clean(name)} ({standin(value)})"
    label, unit = _STANDIN.get(name, (clean(name).removesuffix("_s"), "s" if name.endswith("_s") else ""))
    return f"{label} {_number(value, unit)}"


def _number(value: object, unit: str) -> str:
    if isinstance(value, int | float) and not isinstance(value, bool):
        return si(float(value), unit, 3)
    return clean(value)


def _flat(values: Json) -> str:
    return ", ".join(f"{clean(name).replace('_', ' ')} {_number(value, '')}" for name, value in values.items())


def protections(manifest: Json) -> tuple[Pair, ...]:
    """The hardware that acts without the program, as the bench file declares it."""
    return tuple(Pair(clean(name).replace("_", " "), clean(text)) for name, text in part(manifest, "hardware").items())


def ending(manifest: Json, events: Sequence[Json]) -> str:
    """How the run ended, why, and whether the bench was proven safe."""
    why = manifest.get("why") or _last(events, "run-end").get("why")
    words = f"Run ended: {clean(manifest.get('ended'))}" + (f" ({clean(why)})" if why else "")
    return f"{words}. Safe state: {_SAFE[manifest.get('safe')]}."


# A value that is neither proven nor disproven was never reached.
_SAFE = {True: "verified", False: "NOT VERIFIED", None: "not recorded"}


def way_to_safety(events: Sequence[Json]) -> tuple[str, ...]:
    """What was done and seen on the way to the safe state, in order, troubles last."""
    event = _last(events, "safe-state")
    return unique(_listed(event.get("words")), _listed(event.get("troubles")))


def _last(events: Sequence[Json], name: str) -> Json:
    return next((event for event in reversed(events) if event.get("event") == name), {})


def _listed(words: object) -> Sequence[object]:
    return words if isinstance(words, list) else [words] if words else []


def alarms(events: Sequence[Json]) -> tuple[str, ...]:
    """Each trip of the guard and each fault of the bench or of packmime itself, in one line."""
    told = {"trip": _trip, "bench-fault": _bench_fault, "internal-fault": _internal_fault}
    return tuple(told[name](event) for event in events if (name := str(event.get("event"))) in told)


def _trip(event: Json) -> str:
    unit = str(event.get("unit") or "")
    value, bound = _number(event.get("value"), unit), _number(event.get("bound"), unit)
    whose = clean(event.get("cause")).capitalize()
    return f"{whose} trip: {clean(event.get('quantity'))} {value} against a bound of {bound}; {clean(event.get('why'))}"


def _bench_fault(event: Json) -> str:
    return f"Bench fault: {clean(event.get('instrument'))}: {clean(event.get('what'))}"


def _internal_fault(event: Json) -> str:
    lines = str(event.get("traceback") or "").strip().splitlines()
    return f"Fault of packmime itself: {clean(lines[-1] if lines else None)}; the traceback is in the record's events"


def dated(manifest: Json, *, virtual: bool) -> str:
    """The run's start and end. virtual : by a clock that may run ahead, so that the end can lie in the future."""
    told = f"{utc(manifest.get('started_utc'))} to {utc(manifest.get('ended_utc'))}"
    return f"{told} in virtual time" if virtual else told
