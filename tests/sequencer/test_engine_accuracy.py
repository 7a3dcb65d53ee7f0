"""From accuracy statements and certificates to standard uncertainties, against worked values."""

from __future__ import annotations

import math
from pathlib import Path

import pytest

from drivers.bench_file import DIALECTS, BenchFile, load_bench
from drivers.text.faults import Faults
from sequencer.analysis.uncertainty import Budget
from sequencer.engine.accuracy import Accuracy
from sequencer.engine.inputs import FOLDERS


@pytest.fixture
def bench_with(tmp_path: Path) -> object:
    """A bench file with some texts replaced, and its meters' dialect with some of its own."""

    def made(replacing: dict[str, str] | None = None, meter: dict[str, str] | None = None) -> BenchFile:
        text = (FOLDERS["bench"] / "virtual-mains-in-process.yaml").read_text("utf-8")
        dialect = (DIALECTS / "scpi-meter.yaml").read_text("utf-8")
        for old, new in (meter or {}).items():
            assert old in dialect, old
            dialect = dialect.replace(old, new)
        (tmp_path / "meter.yaml").write_text(dialect, "utf-8")
        text = text.replace("dialect: scpi-meter", "dialect: meter.yaml")
        for old, new in (replacing or {}).items():
            assert old in text, old
            text = text.replace(old, new)
        (tmp_path / "bench.yaml").write_text(text, "utf-8")
        faults = Faults()
        bench = load_bench(tmp_path / "bench.yaml", faults)
        faults.raise_if_any()
        assert bench is not None
        return bench

    return made


def u_of(lines: list[object]) -> float:
    return Budget(0.0, "V", tuple(lines)).u  # type: ignore[arg-type]


def test_five_volts_on_ten(bench_with: object) -> None:
    """±(0.0020 % + 0.0005 %): ±150 µV, u = 86.60 µV (a manual of an instrument maker; u computed, GUM 4.3.7)."""
    bench = bench_with(meter={"reading: 0.0035 %": "reading: 0.0020 %"})  # type: ignore[operator]
    assert u_of(Accuracy(bench, 8.0).volts("node.voltage", 5.0)) == pytest.approx(86.60e-6, abs=0.01e-6)


@pytest.mark.parametrize(
    ("highest_V", "value_V", "half_V"),
    [(8.0, 4.2, 197e-6), (26.0, 21.0, 1.545e-3)],  # 10 V and 100 V range, one year (from memory; computed)
)
def test_the_shipped_meter(bench_with: object, highest_V: float, value_V: float, half_V: float) -> None:
    lines = Accuracy(bench_with(), highest_V).volts("node.voltage", value_V)  # type: ignore[operator]
    assert u_of(lines) == pytest.approx(half_V / math.sqrt(3), rel=1e-3)


def test_a_certificate_overrides_its_family(bench_with: object) -> None:
    """U = 4 mV at k = 2: u = 2 mV (GUM 4.3.3); beyond its range the family's statement holds."""
    certificate = "certificate: {number: C-77, due: 2027-03-01, voltage: {range: 30 V, U: 4 mV}}"
    certified = f"meter_node: {{address: virtual, dialect: meter.yaml, {certificate}}}"
    bench = bench_with({"meter_node: {address: virtual, dialect: meter.yaml}": certified})  # type: ignore[operator]
    (line,) = Accuracy(bench, 26.0).volts("node.voltage", 21.0)
    assert (line.u, line.distribution, line.source) == (2e-3, "normal", "certificate C-77")
    assert Accuracy(bench, 40.0).volts("node.voltage", 35.0)[0].distribution == "rectangular"


def test_the_chargers_current(bench_with: object) -> None:
    """3 A by 10 mΩ ± 0.1 %: shunt 3 mA half width, meter 5 µV over 10 mΩ, 1 µV of thermal EMF (all computed)."""
    lines = {line.name: line for line in Accuracy(bench_with(), 26.0).current(3.0)}  # type: ignore[operator]
    assert lines["shunt"].contribution == pytest.approx(3e-3 / math.sqrt(3))
    half_V = 0.0050e-2 * 30e-3 + 0.0035e-2 * 0.1  # 120 mV at most, on the 1 V range: 12 A of the bench times 10 mΩ
    on_1_V = 0.0040e-2 * 30e-3 + 0.0007e-2 * 1.0
    assert lines["meter_shunt"].contribution == pytest.approx(max(half_V, on_1_V) / 0.01 / math.sqrt(3))
    assert lines["thermal EMF"].contribution == pytest.approx(1e-6 / 0.01 / math.sqrt(3))


def test_a_readback_has_its_resolution(bench_with: object) -> None:
    """±(0.1 % + 0.05 % of 15 A), and 1 mA steps: q/√12 (GUM F.2.2.1)."""
    stated, resolution = Accuracy(bench_with(), 26.0).readback("node.supply", 2.0)  # type: ignore[operator]
    assert stated.u == pytest.approx((0.001 * 2 + 0.0005 * 15) / math.sqrt(3))
    assert resolution.u == pytest.approx(1e-3 / math.sqrt(12))
