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

    `charger`, `bench` and `files` are changes: a key's line in the charger file is replaced; texts in the bench file
    are replaced; whole files (specification, pack, procedure) may be given by path.
    """
    from drivers.open_bench import open_bench
    from sequencer.cli.access import access_to, charger_for
    from sequencer.engine.inputs import FOLDERS, Asked, gather
    from sequencer.engine.judging import Rejudging, judge
    from sequencer.engine.loop import StopFlag
    from sequencer.engine.run import Options, Watching, run

    count = 0

    def rehearsing(
        procedure: str = "charge-profile",
        *,
        spec: str = "sprayer",
        pack: str | None = None,
        charger: dict[str, str] | None = None,
        bench: dict[str, str] | None = None,
        seed: int = 1,
        changes: dict[str, str] | None = None,
        stop: StopFlag | None = None,
        watching: Watching | None = None,
        **options: Any,
    ) -> Rehearsed:
        nonlocal count
        count += 1
        bench_text = (FOLDERS["bench"] / "virtual-mains-in-process.yaml").read_text("utf-8")
        for old, new in (bench or {}).items():
            assert old in bench_text, old
            bench_text = bench_text.replace(old, new)
        bench_path = tmp_path / f"bench-{count}.yaml"
        bench_path.write_text(bench_text, "utf-8")
        charger_path = tmp_path / f"charger-{count}.yaml"
        charger_path.write_text(changed_charger(f"{Path(spec).stem}-power", charger or {}), "utf-8")
        inputs = gather(Asked(procedure, spec, pack, str(bench_path), changes or {}, seed))
        record = tmp_path / f"record-{count}"
        with access_to(inputs.bench, charger_for(inputs.bench, str(charger_path), spec), seed) as access:
            opened = open_bench(inputs.bench, access)
            try:
                ended = run(
                    inputs, opened, Options(record, seed, **options), stop or StopFlag(), watching or Watching()
                )
            finally:
                opened.close()
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
