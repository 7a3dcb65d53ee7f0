"""`packmime classify`: logs from elsewhere, read by the open Battery Data Format's labels or by --columns."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

# Labels: Battery Data Format, preferred labels of the required columns (batterydf 0.1.0, normalize/spec.py).
HEADER = "Test Time / s,Voltage / V,Current / A"


def closed_form() -> np.ndarray:
    """CC-CV of one cell: 3 Ah, OCV 3.0 to 4.2 V linear, 50 mΩ, 3 A, 4.2 V, 0.3 A (textbook relation, computed)."""
    t = np.arange(0.0, 4187.0, 1.0)
    rising = t < 3150.0
    current = np.where(rising, 3.0, 3.0 * np.exp(-(t - 3150.0) / 450.0))
    voltage = np.where(rising, 3.0 + t * 3.0 / 9000.0 + 0.15, 4.2)
    return np.column_stack([t, voltage, current])


@pytest.fixture
def log(tmp_path: Path) -> Path:
    path = tmp_path / "charge.csv"
    np.savetxt(path, closed_form(), delimiter=",", header=HEADER, comments="", fmt="%.6f")
    return path


def test_json_is_one_document(packmime: Callable, log: Path) -> None:
    found = json.loads(packmime("classify", log, "--json").stdout)
    assert found["algorithm"] == "cc-cv"
    assert 0.9 < found["confidence"] < 1
    assert [stage["kind"] for stage in found["stages"]] == ["cc", "cv"]
    assert found["stages"][0]["current_A"]["value"] == pytest.approx(3.0, abs=1e-3)
    # A plateau ends where the current has left it by 1.5 to 2 %: up to 450 s x 0.02 after the analytic knee.
    assert 3150 - 1 <= found["stages"][0]["end_s"] <= 3150 + 9
    assert found["voltage_limit_V"]["value"] == pytest.approx(4.2, abs=1e-3)


def test_words_and_plot(packmime: Callable, log: Path, tmp_path: Path) -> None:
    result = packmime("classify", log, "--plot", tmp_path / "charge.svg")
    assert result.exit_code == 0
    assert "cc-cv (confidence" in result.output
    assert "voltage limit 4.2" in result.output
    assert (tmp_path / "charge.svg").read_text("utf-8").lstrip().startswith("<?xml")


def test_columns_by_name(packmime: Callable, log: Path) -> None:
    text = log.read_text("utf-8").replace(HEADER, "t,u,i")
    log.write_text(text, "utf-8")
    refused = packmime("classify", log)
    assert refused.exit_code == 2
    assert "no column 'Test Time / s'" in refused.stderr
    assert packmime("classify", log, "--columns", "time=t,voltage=u,current=i").exit_code == 0
    assert "expected time=NAME" in packmime("classify", log, "--columns", "when=t").stderr


@pytest.mark.parametrize(
    ("content", "said"),
    [
        (f"{HEADER}\n", "has no rows"),
        (f"{HEADER}\n0,3.0,1\n1,three,1\n", ":3:1: column 'Voltage / V': 'three' is not a number"),
        ("", "no column"),
        ("\x00\xff", "cannot be read"),
    ],
)
def test_a_log_that_cannot_be_read(packmime: Callable, tmp_path: Path, content: str, said: str) -> None:
    path = tmp_path / "log.csv"
    path.write_bytes(content.encode("latin-1"))
    result = packmime("classify", path)
    assert result.exit_code == 2
    assert said in result.stderr


def test_no_such_file(packmime: Callable, tmp_path: Path) -> None:
    assert packmime("classify", tmp_path / "none.csv").exit_code == 2
    assert "is a folder" in packmime("classify", tmp_path).stderr
