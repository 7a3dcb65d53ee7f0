"""`packmime classify`: a foreign log, its algorithm, its stages."""

from __future__ import annotations

import json
from pathlib import Path
from typing import TYPE_CHECKING

import typer

from drivers.text.faults import BadInput, Fault, Faults, Place
from drivers.text.nearest import unknown
from drivers.text.si import clock_time, pm

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    from sequencer.analysis.classify import Classification

# Labels of the open Battery Data Format, then the plain ones of many exports.
LABELS = {
    "time": ("Test Time / s", "test_time_second", "time_s"),
    "voltage": ("Voltage / V", "voltage_volt", "voltage_V"),
    "current": ("Current / A", "current_ampere", "current_A"),
}


def classify_command(log: Path, as_json: bool, plot: Path | None, columns: str | None) -> None:
    """See `packmime classify --help`. Raises BadInput for a log that cannot be read."""
    from sequencer.analysis.classify import classify

    time_s, voltage_V, current_A = read_log(log, columns)
    found = classify(time_s, voltage_V, current_A)
    if plot is not None:
        _draw(plot, log, time_s, voltage_V, current_A, found)
    if as_json:
        typer.echo(json.dumps(found.as_dict(), ensure_ascii=False, allow_nan=False))
    else:
        _print(found)


def read_log(log: Path, columns: str | None) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Time s, voltage V, current A of a CSV file, each (n,). Raises BadInput naming file, column or row."""
    import pandas as pd

    names = _names(log, columns)
    try:
        table = pd.read_csv(log, usecols=list(names.values()), encoding="utf-8-sig")
    except (OSError, ValueError, UnicodeDecodeError) as reason:
        raise BadInput([Fault(Place(str(log)), f"cannot be read as CSV: {reason}")]) from reason
    read = []
    for what, name in names.items():
        column = table[name]
        values = pd.to_numeric(column, errors="coerce")
        wrong = values.isna() & column.notna()
        if wrong.any():
            row = int(wrong.to_numpy().argmax())
            told = f"column '{name}': '{column.iloc[row]}' is not a number ({what} was expected)"
            raise BadInput([Fault(Place(str(log), row + 2, 1), told)])
        read.append(values.to_numpy(dtype="float64"))
    if len(read[0]) == 0:
        raise BadInput([Fault(Place(str(log)), "has no rows")])
    return read[0], read[1], read[2]


def _names(log: Path, columns: str | None) -> dict[str, str]:
    header = _header(log)
    faults = Faults()
    chosen = {} if columns is None else _chosen(columns, faults)
    names = {}
    for what, labels in LABELS.items():
        wanted = (chosen[what],) if what in chosen else labels
        found = next((label for label in wanted if label in header), None)
        if found is None:
            told = (
                unknown(wanted[0], header, "column") if what in chosen else f"no column '{labels[0]}'; it has {header}"
            )
            faults.add(Place(str(log), 1, 1), f"{told}; name it with --columns {what}=...")
        else:
            names[what] = found
    faults.raise_if_any()
    return names


def _header(log: Path) -> list[str]:
    import csv

    try:
        with log.open(encoding="utf-8-sig", newline="") as lines:
            return next(csv.reader(lines), [])
    except (OSError, UnicodeDecodeError, csv.Error) as reason:
        told = "is a folder" if log.is_dir() else getattr(reason, "strerror", None) or str(reason)
        raise BadInput([Fault(Place(str(log)), f"cannot be read: {told}")]) from reason


def _chosen(columns: str, faults: Faults) -> dict[str, str]:
    chosen = {}
    for part in columns.split(","):
        what, _, name = part.partition("=")
        if what.strip() not in LABELS or not name.strip():
            faults.add(Place("--columns"), f"'{part}': expected time=NAME, voltage=NAME or current=NAME")
        else:
            chosen[what.strip()] = name.strip()
    return chosen


def _print(found: Classification) -> None:
    shown = found.as_dict()
    typer.echo(f"{shown['algorithm']} (confidence {shown['confidence']:.2f}): {shown['why']}")
    for stage in shown["stages"]:
        span = f"{clock_time(stage['start_s'])} to {clock_time(stage['end_s'])}"
        current, voltage = stage["current_A"], stage["voltage_V"]
        typer.echo(
            f"  {stage['kind']:<14} {span:<28} {pm(current['value'], 2 * current['u'], 'A'):<24}"
            f" {pm(voltage['value'], 2 * voltage['u'], 'V'):<24}"
            f" {pm(stage['charge_Ah'], 2 * stage['charge_u_Ah'], 'Ah')}"
        )
    if shown["voltage_limit_V"]:
        typer.echo(f"  voltage limit {pm(shown['voltage_limit_V']['value'], 2 * shown['voltage_limit_V']['u'], 'V')}")
    if shown["cutoff_current_A"]:
        typer.echo(f"  ends at {pm(shown['cutoff_current_A']['value'], 2 * shown['cutoff_current_A']['u'], 'A')}")
    if shown["flags"]:
        typer.echo(f"  seen too: {', '.join(shown['flags'])}")


def _draw(
    plot: Path,
    log: Path,
    time_s: NDArray[np.float64],
    voltage_V: NDArray[np.float64],
    current_A: NDArray[np.float64],
    found: Classification,
) -> None:
    from reports.figures import charge_figure, save_figure

    kind = plot.suffix[1:].lower()
    if kind not in ("svg", "png", "pdf"):
        raise BadInput([Fault(Place("--plot"), f"'{plot.name}': .svg, .png or .pdf was expected")])
    figure = charge_figure(time_s, voltage_V, current_A, found.as_dict(), log.name)
    try:
        save_figure(figure, str(plot), kind)
    except OSError as reason:
        raise BadInput([Fault(Place("--plot"), f"'{plot}' cannot be written: {reason.strerror}")]) from reason
