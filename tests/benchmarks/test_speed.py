"""How fast, how big: run once by CI. Ratios within one run where a machine's noise would decide otherwise.

Printed figures are for the closing line of whoever runs it; the bounds are those that the project promises.
"""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from drivers.clock import wall_seconds

pytestmark = pytest.mark.benchmark
PACKMIME = (sys.executable, "-P", "-c", "from sequencer.cli import main; main()")


def best_of(times: int, *words: object) -> float:
    """Shortest wall seconds of a command over some repeats: the others measure the neighbours."""
    spent = []
    for _ in range(times):
        begun = wall_seconds()
        subprocess.run([str(word) for word in words], check=True, capture_output=True)
        spent.append(wall_seconds() - begun)
    return min(spent)


def test_help_answers_at_once() -> None:
    bare_s = best_of(5, sys.executable, "-c", "pass")
    typer_s = best_of(5, sys.executable, "-c", "import typer")
    help_s = best_of(5, *PACKMIME, "--help")
    print(
        f"bare Python {bare_s * 1e3:.0f} ms, import typer {typer_s * 1e3:.0f} ms, packmime --help {help_s * 1e3:.0f} ms"
    )
    assert help_s < 0.3
    assert help_s < 3 * typer_s  # nothing but typer is imported


def test_classify_of_a_hundred_thousand_lines(tmp_path: Path) -> None:
    time_s = np.arange(100_000) * 0.0418
    current_A = np.where(time_s < 3150, 3.0, 3.0 * np.exp(-(time_s - 3150) / 450))
    voltage_V = np.where(time_s < 3150, 3.15 + time_s * 3 / 9000, 4.2)
    noise = np.random.default_rng(1)
    rows = [time_s, voltage_V + noise.normal(0, 2e-4, time_s.size), current_A + noise.normal(0, 1e-3, time_s.size)]
    log = tmp_path / "log.csv"
    header = "Test Time / s,Voltage / V,Current / A"
    np.savetxt(log, np.column_stack(rows), delimiter=",", header=header, comments="", fmt="%.6f")
    spent_s = best_of(3, *PACKMIME, "classify", log)
    pandas_s = best_of(3, sys.executable, "-c", f"import pandas; pandas.read_csv({str(log)!r})")
    print(f"packmime classify {spent_s:.2f} s; reading the file with pandas alone {pandas_s:.2f} s")
    assert spent_s < 2.0


@pytest.mark.skipif(sys.platform == "win32", reason="peak memory is read by the POSIX resource module")
@pytest.mark.parametrize("spec", ["sprayer", "lantern"])
def test_acceptance_over_sockets(tmp_path: Path, spec: str) -> None:
    measuring = (
        "import resource, sys; from sequencer.cli import app; code = app(standalone_mode=False); "
        "print('PEAK', max(resource.getrusage(who).ru_maxrss for who in "
        "(resource.RUSAGE_SELF, resource.RUSAGE_CHILDREN))); sys.exit(code or 0)"
    )
    begun = wall_seconds()
    done = subprocess.run(
        [sys.executable, "-P", "-c", measuring, "run", "acceptance", "--spec", spec, "--out", str(tmp_path / "r")],
        capture_output=True,
        text=True,
        check=False,
    )
    spent_s = wall_seconds() - begun
    assert done.returncode == 0, done.stdout + done.stderr
    peak_MB = int(done.stdout.rpartition("PEAK ")[2]) / (1024.0 if sys.platform != "darwin" else 1024.0**2)
    report_MB = (tmp_path / "r/report.html").stat().st_size / 1e6
    line = next(line for line in done.stdout.splitlines() if "virtual seconds per wall second" in line)
    print(f"{spec}: {spent_s:.1f} s wall, peak {peak_MB:.0f} MB, report {report_MB:.2f} MB; {line}")
    assert spent_s < 60
    assert peak_MB < 400
    assert report_MB < 6


def test_in_process_is_faster_than_sockets(rehearse: Callable) -> None:
    done = rehearse(spec="lantern")
    print(f"in process: {done.ended.performance}")
    assert done.ended.performance["run_s_per_wall_s"] > 300
