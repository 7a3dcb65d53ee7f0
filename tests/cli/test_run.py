"""`packmime run` as people meet it: verdicts, exit statuses, trouble. Over sockets unless a test says otherwise."""

from __future__ import annotations

import json
import signal
import socket
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

from drivers.clock import wall_seconds
from sequencer.cli import running
from sequencer.engine.inputs import FOLDERS
from sequencer.engine.record_reader import Record

IN_PROCESS = ("--bench", "virtual-in-process")


def verdicts(record: Path) -> dict[str, str]:
    document = json.loads((record / "verdicts.json").read_text("utf-8"))
    return {verdict["limit"]: verdict["verdict"] for verdict in document["verdicts"]}


def test_sockets_and_process_give_the_same_samples_byte_for_byte(packmime: Callable, tmp_path: Path) -> None:
    over, inside = tmp_path / "sockets", tmp_path / "process"
    first = packmime("run", "charge-profile", "--seed", 7, "--out", over)
    second = packmime("run", "charge-profile", "--seed", 7, "--out", inside, *IN_PROCESS)
    assert (first.exit_code, second.exit_code) == (0, 0), first.output + second.output
    assert (over / "data/samples.parquet").read_bytes() == (inside / "data/samples.parquet").read_bytes()
    assert "Overall: pass" in first.output
    assert "virtual seconds per wall second" in first.output
    assert "exchanges per scan" in first.output
    assert "REHEARSAL" in first.output
    page = (over / "report.html").read_text("utf-8")
    assert "REHEARSAL" in page.upper()
    assert len(page) < 6_000_000
    assert (over / "report.html").read_bytes() == (over / "judged/001/report.html").read_bytes()


def test_another_seed_gives_other_samples(packmime: Callable, tmp_path: Path) -> None:
    for seed in (1, 2):
        words = ("--only", "insert", "--seed", seed, "--out", tmp_path / str(seed), *IN_PROCESS)
        assert packmime("run", "charge-profile", *words).exit_code == 0
    assert (tmp_path / "1/data/samples.parquet").read_bytes() != (tmp_path / "2/data/samples.parquet").read_bytes()


def test_hostile_text_in_every_free_field_is_text(packmime: Callable, tmp_path: Path) -> None:
    hostile = """<b>"bold"</b> & 'quoted' <script>alert(1)</script> ψηφίο 充電器 ‏مرحبا"""
    quoted = "'" + hostile.replace("'", "''") + "'"
    changed = {}
    for kind, name, key in (
        ("specification", "sprayer", "model"),
        ("pack", "sprayer", "name"),
        ("procedure", "charge-profile", "purpose"),
    ):
        lines = (FOLDERS[kind] / f"{name}.yaml").read_text("utf-8").splitlines()
        lines = [f"{key}: {quoted}" if line.startswith(f"{key}:") else line for line in lines]
        changed[kind] = tmp_path / f"{kind}.yaml"
        changed[kind].write_text("\n".join(lines), "utf-8")
    charger = tmp_path / "charger.yaml"
    shipped = Path(sys.modules["drivers"].__file__).parent / "virtual/chargers/sprayer.yaml"
    charger.write_text(
        shipped.read_text("utf-8").replace("name: greenhouse sprayer charger", f"name: {quoted}"), "utf-8"
    )
    words = ("--spec", changed["specification"], "--pack", changed["pack"], "--charger", charger)
    result = packmime("run", changed["procedure"], *words, "--out", tmp_path / "r", *IN_PROCESS)
    assert result.exit_code == 0, result.output
    page = (tmp_path / "r/report.html").read_text("utf-8")
    assert "<script>alert(1)</script>" not in page
    assert "<b>&#34;bold" not in page
    assert "充電器" in page
    assert "&lt;b&gt;" in page


def test_bad_input_lists_all_faults_and_touches_nothing(packmime: Callable, tmp_path: Path) -> None:
    spec = tmp_path / "spec.yaml"
    text = (FOLDERS["specification"] / "sprayer.yaml").read_text("utf-8")
    spec.write_text(
        text.replace("3.0 A ± 5 %", "3.0 V ± 5 %").replace("cutoff: 0.30 A ± 20 %", "cutof: [0.4 A, 0.2 A]"), "utf-8"
    )
    bench = tmp_path / "bench.yaml"
    bench.write_text(
        (FOLDERS["bench"] / "virtual-mains.yaml").read_text("utf-8").replace("node: 26 V", "node: 16 V"), "utf-8"
    )
    result = packmime(
        "run", "charge-profile", "--spec", spec, "--pack", "sprayer", "--bench", bench, "--out", tmp_path / "r"
    )
    assert result.exit_code == 2
    assert "nothing was touched" in result.stderr
    assert '"3.0 V" is a voltage; expected a current' in result.stderr
    assert "unknown key 'cutof'; did you mean 'cutoff'?" in result.stderr
    assert "above the bench's node limit 16 V" in result.stderr
    assert not (tmp_path / "r").exists()


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (("aceptance",), "did you mean 'acceptance'"),
        (("charge-profile", "--spec", "nowhere.yaml"), "there is no specification file 'nowhere.yaml'"),
        (("charge-profile", "--set", "comprssion=2"), "did you mean 'compression'"),
        (("charge-profile", "--set", "compression=2000"), "must lie between 1 and 100"),
        (("charge-profile", "--set", "compression"), "NAME=VALUE was expected"),
        (("charge-profile", "--charger", "sprinkler"), "unknown charger 'sprinkler'"),
        (("charge-profile", "--set", "start=3,7 V"), '--set start=3,7 V: cell_voltage: "3,7 V" has a comma'),
        (("charge-profile", "--bench", "bay-1"), "unknown bench 'bay-1'"),
    ],
)
def test_bad_words(packmime: Callable, tmp_path: Path, words: tuple[str, ...], said: str) -> None:
    result = packmime("run", *words, "--out", tmp_path / "r")
    assert result.exit_code == 2
    assert said in result.stderr
    assert not (tmp_path / "r").exists()


def test_a_folder_that_holds_something_is_refused(packmime: Callable, tmp_path: Path) -> None:
    (tmp_path / "mine.txt").write_text("mine", "utf-8")
    result = packmime("run", "charge-profile", "--out", tmp_path)
    assert result.exit_code == 2
    assert "not empty" in result.stderr
    assert [path.name for path in tmp_path.iterdir()] == ["mine.txt"]


def test_an_address_that_refuses_is_named_within_ten_seconds(packmime: Callable, tmp_path: Path) -> None:
    text = (FOLDERS["bench"] / "virtual-mains.yaml").read_text("utf-8").partition("virtual:\n  transport")[0]
    while "address: virtual" in text:
        with socket.socket() as taken:  # a port that was free a moment ago and that nobody serves
            taken.bind(("127.0.0.1", 0))
            address = f'"TCPIP::127.0.0.1::{taken.getsockname()[1]}::SOCKET"'
        text = text.replace("address: virtual", f"address: {address}", 1)
    bench = tmp_path / "bench.yaml"
    bench.write_text(text, "utf-8")
    begun = wall_seconds()
    result = packmime("run", "charge-profile", "--bench", bench, "--out", tmp_path / "r")
    assert wall_seconds() - begun < 10
    assert result.exit_code == 3
    assert "node_supply: nobody answers at TCPIP::127.0.0.1" in result.stderr


def test_a_fault_of_ours_is_70_and_leaves_a_safe_bench(
    packmime: Callable, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    from sequencer.engine import methods

    def broken(*_: object) -> str:
        raise ZeroDivisionError("a bug on purpose")

    monkeypatch.setattr(methods, "charge", broken)
    result = packmime("run", "charge-profile", "--out", tmp_path / "r", *IN_PROCESS)
    assert result.exit_code == 70
    assert "a fault of packmime itself: ZeroDivisionError: a bug on purpose" in result.output
    assert "Traceback" not in result.output
    record = Record.open(tmp_path / "r")
    happened = {event["event"]: event for event in record.events}
    assert "a bug on purpose" in happened["internal-fault"]["traceback"]
    assert happened["safe-state"]["verified"] is True


@pytest.mark.skipif(sys.platform == "win32", reason="SIGINT to a child needs a console of its own on Windows")
@pytest.mark.parametrize("name", ["SIGINT", "SIGTERM", "SIGHUP"])
def test_an_interrupted_charge_ends_safe_sealed_and_judgeable(command: Callable, tmp_path: Path, name: str) -> None:
    slow = ("--set", "compression=1", "--set", "start=3.1 V")
    with command("run", "charge-profile", *slow, "--out", tmp_path / "r", cwd=tmp_path) as process:
        said = ""
        for line in process.stdout:
            said += line
            if "charging until" in line:
                process.send_signal(getattr(signal, name))
        code = process.wait(60)
    assert code == 3, said
    record = Record.open(tmp_path / "r")
    assert record.manifest is not None
    assert record.manifest["ended"] == "stopped"
    assert record.manifest["safe"] is True
    assert record.notes == []
    assert verdicts(tmp_path / "r")["charges"] == "pass"
    assert verdicts(tmp_path / "r")["charge.ends"] == "not run"


LIMITED = """
import resource, signal, sys
signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
resource.setrlimit(resource.RLIMIT_FSIZE, (150_000, 150_000))
words = "run acceptance --set compression=1 --bench virtual-in-process --out".split()
sys.argv = ["packmime", *words, sys.argv[1]]
from sequencer.cli import main
main()
"""


@pytest.mark.skipif(sys.platform == "win32", reason="file size limits are POSIX")
def test_a_full_disk_ends_safe_and_what_was_written_can_be_judged(packmime: Callable, tmp_path: Path) -> None:
    done = subprocess.run(
        [sys.executable, "-P", "-c", LIMITED, str(tmp_path / "r")],
        capture_output=True,
        text=True,
        timeout=60,
        check=False,
    )
    assert done.returncode == 3, done.stdout + done.stderr
    assert "safe: de-energised, not isolated" in done.stdout
    assert "record cannot be written any more" in done.stdout
    assert Record.open(tmp_path / "r").series("charger.current").value.size > 100
    result = packmime("judge", tmp_path / "r", "--json")
    assert result.exit_code == 4
    assert verdicts(tmp_path / "r")["charges"] == "pass"
    assert verdicts(tmp_path / "r")["charge.ends"] == "not run"


def test_a_users_own_conftest_and_procedures_change_nothing(command: Callable, tmp_path: Path) -> None:
    (tmp_path / "conftest.py").write_text("raise SystemExit('the user’s conftest was read')\n", "utf-8")
    (tmp_path / "pytest.ini").write_text("[pytest]\naddopts = --no-such-option\n", "utf-8")
    for name in ("procedures", "reports", "drivers", "sequencer"):
        (tmp_path / name).mkdir()
        (tmp_path / name / "__init__.py").write_text("raise SystemExit('the user’s folder was imported')\n", "utf-8")
        (tmp_path / name / "charge-profile.yaml").write_text("not: ours\n", "utf-8")
    with command(
        "run", "charge-profile", *IN_PROCESS, "--out", "r", cwd=tmp_path, PYTEST_ADDOPTS="--no-such-option"
    ) as process:
        said = process.stdout.read()
    assert process.returncode == 0, said
    assert verdicts(tmp_path / "r")["charge.ends"] == "pass"


def test_only_leaves_out_on_purpose(packmime: Callable, tmp_path: Path) -> None:
    result = packmime("run", "charge-profile", "--only", "insert", "--out", tmp_path / "r", *IN_PROCESS)
    document = json.loads((tmp_path / "r/judged/001/verdicts.json").read_text("utf-8"))
    reasons = {one["why"] for one in document["verdicts"] if one["verdict"] == "not run"}
    assert reasons == {"its step was left out (--only)"}
    judgement = json.loads((tmp_path / "r/judged/001/judgement.json").read_text("utf-8"))
    assert judgement["deviations"] == ["steps were left out (--only): charge"]
    assert result.exit_code == 0, result.output


def test_ctrl_c_while_judging_says_how_to_finish(
    packmime: Callable, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def pressed(*_: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(running, "judge_and_report", pressed)
    result = packmime("run", "charge-profile", "--only", "insert", "--out", tmp_path / "r", *IN_PROCESS)
    assert result.exit_code == 3
    assert f"the record is sealed: `packmime judge {tmp_path / 'r'}`" in result.output


def test_a_folder_name_that_cannot_be_is_refused(packmime: Callable, tmp_path: Path) -> None:
    result = packmime("run", "charge-profile", "--out", tmp_path / ("n" * 300), *IN_PROCESS)
    assert result.exit_code == 2
    assert "name another folder" in result.output


@pytest.mark.skipif(sys.platform == "win32", reason="the C locale is POSIX")
def test_an_output_that_knows_no_ohm_sign_does_not_end_a_run(command: Callable, tmp_path: Path) -> None:
    plain = {"LC_ALL": "C", "PYTHONUTF8": "0", "PYTHONCOERCECLOCALE": "0"}
    with command("run", "charge-profile", "--out", "r", *IN_PROCESS, cwd=tmp_path, **plain) as process:
        said = process.stdout.read()
    assert process.returncode == 0, said
    assert "Overall: pass" in said


def test_parameters_changed_on_the_command_line_are_deviations(packmime: Callable, tmp_path: Path) -> None:
    result = packmime("run", "charge-profile", "--set", "after=20 s", "--out", tmp_path / "r", *IN_PROCESS)
    assert result.exit_code == 0
    judgement = json.loads((tmp_path / "r/judged/001/judgement.json").read_text("utf-8"))
    assert judgement["deviations"] == ["parameter after was set to 20 s on the command line"]
    assert "parameter after was set to 20 s" in (tmp_path / "r/report.html").read_text("utf-8")


@pytest.mark.skipif(sys.platform == "win32", reason="closed pipes are told otherwise on Windows")
def test_a_run_whose_output_nobody_reads_goes_on_to_its_end(command: Callable, tmp_path: Path) -> None:
    with command("run", "charge-profile", *IN_PROCESS, "--out", tmp_path / "r", cwd=tmp_path) as process:
        assert "REHEARSAL" in process.stdout.readline()
        process.stdout.close()  # as `packmime run ... | head -1` does
        code = process.wait(60)
    assert code in (0, 141)
    record = Record.open(tmp_path / "r")
    assert record.manifest is not None
    assert record.manifest["ended"] == "complete"
    assert record.manifest["safe"] is True


def test_an_order_goes_into_record_and_report(packmime: Callable, tmp_path: Path) -> None:
    result = packmime("run", "charge-profile", "--order", "garden", "--out", tmp_path / "r", *IN_PROCESS)
    assert result.exit_code == 0, result.output
    manifest = json.loads((tmp_path / "r/data/manifest.json").read_text("utf-8"))
    assert manifest["order"]["number"] == "G-2026-014"
    assert manifest["order"]["lacking"] == []
    assert manifest["person"] == "A. Gardener"
    assert (tmp_path / "r/data/inputs/order.yaml").is_file()
    page = (tmp_path / "r/report.html").read_text("utf-8")
    assert "S-00417" in page
    assert "new, seal unbroken" in page


def test_only_knows_the_kinds_of_step(packmime: Callable, tmp_path: Path) -> None:
    result = packmime("run", "acceptance", "--only", "sweep_ids", "--out", tmp_path / "r")
    assert result.exit_code == 2
    assert "did you mean 'sweep_id'?" in result.stderr
