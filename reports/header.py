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
        rows.append(("virtual charger", clean(manifest["charger"]), NOTHING, NOTHING))
    return tuple(rows)


def instruments(manifest: Json) -> tuple[tuple[str, str, str, str, str], ...]:
    """Name, role, identity, address with dialect, certificate of each instrument."""
    return tuple(
        (
            clean(one.get("name")),
            clean(one.get("role")),
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


def standin(values: Json) -> str:
    """The stand-in's resistances and loop (design 8), rounded."""
    words = {"Rp_ohm": ("Rp", "Ω"), "Rv_ohm": ("Rv", "Ω"), "lag_s": ("lag", "s"), "gain": ("gain", "")}
    words["delay_scans"] = ("delay in scans", "")
    named = {name: words.get(name, (clean(name), "")) for name in values}
    return ", ".join(f"{label} {_number(values[name], unit)}" for name, (label, unit) in named.items())


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
    last = {str(event.get("event")): event for event in events}
    ended = clean(manifest.get("ended"))
    why = last.get("run-end", {}).get("why")
    words = f"Run ended: {ended}" + (f" ({clean(why)})" if why else "")
    return f"{words}. Safe state: {_safe(manifest.get('safe'), last.get('safe-state', {}).get('words'))}."


def _safe(safe: object, words: object) -> str:
    """True is proven, False is not, None was never reached."""
    detail = f" ({clean(words).rstrip('.')})" if words else ""
    if safe is None:
        return "not recorded"
    return ("verified" if safe else "NOT VERIFIED") + detail


def trip_lines(events: Sequence[Json]) -> tuple[str, ...]:
    """Each trip of the guard in one line."""
    return tuple(
        f"{clean(event.get('cause'))} trip: {clean(event.get('quantity'))} "
        f"{_number(event.get('value'), str(event.get('unit') or ''))}"
        f" against {_number(event.get('bound'), str(event.get('unit') or ''))}; {clean(event.get('why'))}"
        for event in events
        if event.get("event") == "trip"
    )


def dated(manifest: Json) -> str:
    """The run's start and end."""
    return f"{utc(manifest.get('started_utc'))} to {utc(manifest.get('ended_utc'))}"
