"""The manifest: what a run was, with which files, instruments and versions."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from sequencer.engine.durable import RecordError
from sequencer.engine.evidence import open_evidence
from sequencer.engine.manifest import program_version, sha256
from sequencer.engine.record_reader import Record


def test_the_manifest_is_what_was_run(rehearse: Callable[..., Any]) -> None:
    done = rehearse(seed=5, changes={"start": "4.00 V", "after": "10 s"})
    manifest, inputs = open_evidence(done.record).manifest, done.record / "data" / "inputs"
    assert manifest["ended"] == "complete"
    assert manifest["rehearsal"] is True
    assert manifest["seed"] == 5
    assert manifest["safe"] is True
    for kind in ("procedure", "specification", "pack", "bench"):
        digest = hashlib.sha256((inputs / f"{kind}.yaml").read_bytes()).hexdigest()
        assert manifest[kind]["sha256"] == digest
        assert "/" not in manifest[kind]["file"]
    assert {part["place"] for part in manifest["instruments"]} >= {"node.supply", "node.load", "mains.switch"}
    assert all(part["identity"] for part in manifest["instruments"])
    assert manifest["standin"]["Rp_ohm"] == pytest.approx(0.118, rel=2e-3)  # 100 + 10 + 8 mΩ, as the bench file has it
    assert manifest["deviations"] == [
        "parameter start was set to 4.00 V on the command line",
        "parameter after was set to 10 s on the command line",
    ]
    assert manifest["duration_s"] == pytest.approx(done.ended.performance["run_s"], abs=1e-3)
    assert manifest["packmime"] == program_version()
    assert all(manifest["environment"]["packages"][name] for name in ("numpy", "pyvisa", "pytest-html"))
    assert manifest["charger"] == "greenhouse sprayer charger"
    assert manifest["missing_hardware"] == []


def test_the_virtual_charger_is_in_the_record(rehearse: Callable[..., Any], tmp_path: Path) -> None:
    done = rehearse(charger={"cutoff": "0.31 A"}, changes={"start": "4.00 V", "after": "10 s"})
    kept = done.record / "data" / "inputs" / "charger.yaml"
    given = tmp_path / "charger-1.yaml"
    digest = hashlib.sha256(given.read_bytes()).hexdigest()
    manifest = open_evidence(done.record).manifest
    assert kept.read_bytes() == given.read_bytes()
    assert manifest["charger_file"] == {"file": "charger-1.yaml", "sha256": digest}
    assert manifest["files"]["inputs/charger.yaml"] == digest
    kept.chmod(0o644)
    kept.write_bytes(kept.read_bytes().replace(b"0.31 A", b"0.30 A"))
    with pytest.raises(RecordError, match=r"data/inputs/charger\.yaml: was changed since sealing"):
        open_evidence(done.record)
    assert Record.open(done.record).notes == ["data/inputs/charger.yaml: was changed since sealing"]


def test_sha256() -> None:
    """FIPS 180-4, its example "abc"."""
    assert sha256(b"abc") == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"


def test_what_protects_and_is_not_there_is_named(rehearse: Callable[..., Any]) -> None:
    done = rehearse(bench={"fuse: virtual, ": ""}, changes={"start": "4.00 V", "after": "10 s"})
    assert open_evidence(done.record).manifest["missing_hardware"] == ["fuse"]


def test_a_certificate_that_has_run_out_is_a_deviation(rehearse: Callable[..., Any]) -> None:
    meter = "meter_node: {address: virtual, dialect: scpi-meter"
    certificates = {
        f"{meter}}}": f"{meter}, certificate: {{number: C-77, due: 2020-03-01, voltage: {{range: 30 V, U: 4 mV}}}}}}",
        "node_load: {address: virtual, dialect: scpi-load}": "node_load: {address: virtual, dialect: scpi-load, "
        "certificate: {number: C-78, due: 9999-12-31}}",
    }
    done = rehearse(bench=certificates, changes={"start": "4.00 V"})
    deviations = open_evidence(done.record).manifest["deviations"]
    assert deviations[1:] == ["certificate C-77 of meter_node was due on 2020-03-01"]
