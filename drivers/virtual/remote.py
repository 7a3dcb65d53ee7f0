"""The client's side of the virtual bench's process: start it, move its time, end it for sure."""

from __future__ import annotations

import contextlib
import json
import socket
import subprocess
import sys
import threading
from types import TracebackType
from typing import Any

from drivers.text.binding import bind
from drivers.text.document import compose
from drivers.text.faults import Faults
from drivers.trouble import LinkFault
from drivers.virtual.plan import Plan, dumps, plan_of

HOST = "127.0.0.1"
WHO = "virtual bench"
START_TIMEOUT_s = 30.0
ANSWER_TIMEOUT_s = 30.0
END_TIMEOUT_s = 2.0
# Ctrl-C goes to a terminal's whole process group; the instruments must outlive it until the safe state is reached.
_APART: dict[str, Any] = (
    {"creationflags": 0x00000200}  # CREATE_NEW_PROCESS_GROUP
    if sys.platform == "win32"
    else {"start_new_session": True}
)


class VirtualServer:
    """A virtual bench in a process of its own. Use it in `with`, or call `close`."""

    def __init__(self, process: subprocess.Popen[bytes], opened: dict[str, Any]) -> None:
        self._process = process
        self.ports: dict[str, int] = opened["ports"]
        self.clock_port: int = opened["clock"]
        self._clock: socket.socket | None = None
        self._heard = b""

    @classmethod
    def start(
        cls,
        bench_text: str | bytes,
        charger_text: str | bytes,
        seed: int,
        *,
        wall: bool = False,
        ports: dict[str, int] | None = None,
    ) -> VirtualServer:
        """Start from the texts of a bench file and a charger file. Raises BadInput, ValueError, LinkFault."""
        return cls.launch(_plan_from_texts(bench_text, charger_text), seed, wall=wall, ports=ports)

    @classmethod
    def launch(cls, plan: Plan, seed: int, *, wall: bool = False, ports: dict[str, int] | None = None) -> VirtualServer:
        """Start from a plan. `wall`: time follows the wall clock; `ports`: fixed ones by instrument.

        Raises LinkFault where the process does not come up, such as for a port in use.
        """
        request = {"plan": plan.to_json(), "seed": seed, "mode": "wall" if wall else "clock", "ports": ports or {}}
        process = subprocess.Popen(
            [sys.executable, "-P", "-m", "drivers.virtual.server"],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            **_APART,
        )
        try:
            return cls(process, _first_answer(process, dumps(request)))
        except BaseException:
            _end(process)
            raise

    @property
    def addresses(self) -> dict[str, str]:
        """The VISA resource name of each instrument."""
        return {name: f"TCPIP0::{HOST}::{port}::SOCKET" for name, port in self.ports.items()}

    def advance(self, dt_s: float) -> float:
        """Let virtual time pass and return the new time, s. Raises ValueError (negative), LinkFault (process gone)."""
        return float(self._ask(f"advance {float(dt_s)!r}"))

    def now(self) -> float:
        """The bench's time, s."""
        return float(self._ask("now"))

    def stats(self) -> dict[str, float]:
        """busy_s: wall seconds that the circuit worked; exchanges: messages that the instruments heard."""
        answer: dict[str, float] = json.loads(self._ask("stats"))
        return answer

    def _ask(self, line: str) -> str:
        try:
            if self._clock is None:
                self._clock = socket.create_connection((HOST, self.clock_port), timeout=ANSWER_TIMEOUT_s)
                self._clock.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
            self._clock.sendall(line.encode() + b"\n")
            answer = self._line(self._clock)
        except OSError as reason:
            raise LinkFault(WHO, f"its clock does not answer ({reason}); {self._state()}") from reason
        if answer.startswith("error "):
            raise ValueError(answer.removeprefix("error "))
        return answer

    def _line(self, clock: socket.socket) -> str:
        while b"\n" not in self._heard:
            data = clock.recv(4096)
            if not data:
                raise ConnectionError("closed")
            self._heard += data
        line, _, self._heard = self._heard.partition(b"\n")
        return line.decode()

    @property
    def running(self) -> bool:
        """Whether the process is there."""
        return self._process.poll() is None

    def _state(self) -> str:
        if self.running:
            return "its process still runs"
        return f"its process ended with {self._process.returncode}{_last_words(self._process)}"

    def wait(self) -> None:
        """Return when the process has ended by itself; Ctrl-C ends the waiting, not the process."""
        self._process.wait()

    def close(self) -> None:
        """End the process: its input closes, and if that is not enough it is killed. Closing twice does nothing."""
        if self._clock is not None:
            self._clock.close()
            self._clock = None
        _end(self._process)

    def __enter__(self) -> VirtualServer:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, value: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()


def _plan_from_texts(bench_text: str | bytes, charger_text: str | bytes) -> Plan:
    from drivers.bench import Bench
    from drivers.virtual.charger_file import read_charger

    faults = Faults()
    bench = bind(Bench, compose(_bytes(bench_text), "bench"), "bench", faults)
    charger = read_charger(compose(_bytes(charger_text), "charger"), faults)
    faults.raise_if_any()
    assert bench is not None
    assert charger is not None
    return plan_of(bench.model, charger.model)


def _bytes(text: str | bytes) -> bytes:
    return text.encode() if isinstance(text, str) else text


def _first_answer(process: subprocess.Popen[bytes], request: str) -> dict[str, Any]:
    """Hand over the request and read which ports were opened."""
    assert process.stdin is not None
    assert process.stdout is not None
    alarm = threading.Timer(START_TIMEOUT_s, process.kill)
    alarm.start()
    try:
        process.stdin.write(request.encode() + b"\n")
        process.stdin.flush()
        line = process.stdout.readline()
    except OSError:
        line = b""
    finally:
        alarm.cancel()
    if not line:
        raise LinkFault(WHO, f"its process did not come up{_last_words(process)}")
    opened: dict[str, Any] = json.loads(line)
    return opened


def _last_words(process: subprocess.Popen[bytes]) -> str:
    """What an ended process said last on its standard error, as the tail of a sentence."""
    if process.stderr is None or process.stderr.closed:
        return ""
    said = process.stderr.read().decode(errors="replace").strip().splitlines()
    return f": {said[-1]}" if said else ""


def _end(process: subprocess.Popen[bytes]) -> None:
    if process.stdin is not None:
        with contextlib.suppress(OSError):  # it was gone already
            process.stdin.close()
    try:
        process.wait(END_TIMEOUT_s)
    except subprocess.TimeoutExpired:
        process.kill()
        process.wait()
    for pipe in (process.stdout, process.stderr):
        if pipe is not None:
            pipe.close()
