"""Settings for the whole suite, and rehearsals on a virtual bench in this process."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest
from hypothesis import HealthCheck, settings

import drivers.virtual

# A shared 2-core machine is noisy: a deadline would measure the neighbours. No database: the suite also runs
# from a folder that it cannot write to.
settings.register_profile(
    "packmime", database=None, deadline=None, max_examples=60, suppress_health_check=[HealthCheck.too_slow]
)
settings.load_profile("packmime")

CHARGERS = Path(drivers.virtual.__file__).parent / "chargers"


@dataclass(frozen=True)
class Rehearsed:
    """One run on a virtual bench, judged; without a report."""

    record: Path
    ended: Any
    judged: Any

    @property
    def verdicts(self) -> dict[str, str]:
        return {verdict["limit"]: verdict["verdict"] for verdict in self.judged.document["verdicts"]}

    def verdict(self, limit: str) -> dict[str, Any]:
        return next(verdict for verdict in self.judged.document["verdicts"] if verdict["limit"] == limit)

    @property
    def failing(self) -> set[str]:
        return {limit for limit, word in self.verdicts.items() if word in ("fail", "conditional fail")}


@pytest.fixture
def rehearse(tmp_path: Path) -> Callable[..., Rehearsed]:
    """Run a procedure in process: rehearse(spec="lantern", charger={"ends": "false"}, bench={"node": ...}, ...).

    The mains are the charger's only contact, and it reads neither ID nor thermistor nor cells. `charger`, `bench` and
    `spec_text` are changes: a key's line in the charger file is replaced; texts in the bench file and in the shipped
    specification are replaced. Whole files (specification, pack, procedure) may be given by path.
    """
    return _rehearsals(tmp_path, "virtual-mains-in-process", "-power")


@pytest.fixture
def rehearse_full(tmp_path: Path) -> Callable[..., Rehearsed]:
    """As `rehearse`, with all of the pack's contacts, and chargers that read them."""
    return _rehearsals(tmp_path, "virtual-in-process", "")


def _rehearsals(tmp_path: Path, usual_bench: str, charger_kind: str) -> Callable[..., Rehearsed]:
    from drivers.open_bench import open_bench
    from sequencer.cli.access import access_to, charger_for
    from sequencer.engine.inputs import FOLDERS, Asked, gather
    from sequencer.engine.judging import Rejudging, judge
    from sequencer.engine.loop import StopFlag
    from sequencer.engine.run import Options, Watching, run

    count = 0

    def written(kind: str, name: str, changes: dict[str, str]) -> str:
        """A shipped file with texts replaced, as a path; the name itself where nothing is."""
        if not changes:
            return name
        text = (FOLDERS[kind] / f"{name}.yaml").read_text("utf-8")
        for old, new in changes.items():
            assert old in text, old
            text = text.replace(old, new)
        path = tmp_path / f"{kind}-{count}.yaml"
        path.write_text(text, "utf-8")
        return str(path)

    def rehearsing(
        procedure: str = "charge-profile",
        *,
        spec: str = "sprayer",
        pack: str | None = None,
        charger: dict[str, str] | None = None,
        bench: dict[str, str] | None = None,
        on: str = usual_bench,
        spec_text: dict[str, str] | None = None,
        seed: int = 1,
        changes: dict[str, str] | None = None,
        stop: StopFlag | None = None,
        watching: Watching | None = None,
        opened: Callable[[Any], None] = lambda bench: None,
        **options: Any,
    ) -> Rehearsed:
        nonlocal count
        count += 1
        charger_path = tmp_path / f"charger-{count}.yaml"
        charger_path.write_text(changed_charger(f"{Path(spec).stem}{charger_kind}", charger or {}), "utf-8")
        specification = written("specification", spec, spec_text or {})
        inputs = gather(Asked(procedure, specification, pack, written("bench", on, bench or {}), changes or {}, seed))
        record = tmp_path / f"record-{count}"
        with access_to(inputs.bench, charger_for(inputs.bench, str(charger_path), spec), seed) as access:
            links = open_bench(inputs.bench, access)
            try:
                opened(links)
                ended = run(inputs, links, Options(record, seed, **options), stop or StopFlag(), watching or Watching())
            finally:
                links.close()
        return Rehearsed(
            record, ended, judge(record, Rejudging(), "2026-01-01T00:00:00.000Z") if ended.sealed else None
        )

    return rehearsing


def changed_charger(name: str, changes: dict[str, str]) -> str:
    """The text of a shipped charger with some top-level keys replaced or added; "stages" takes the whole list."""
    lines, skipping = [], False
    for line in (CHARGERS / f"{name}.yaml").read_text("utf-8").splitlines():
        if line and not line[0].isspace() and line[0] != "#":
            skipping = line.partition(":")[0] in changes
        if not skipping:
            lines.append(line)
    return "\n".join([*lines, *(f"{key}: {value}" for key, value in changes.items())]) + "\n"
