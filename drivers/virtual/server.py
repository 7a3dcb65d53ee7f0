"""The virtual bench as a process: a TCP port an instrument, and one for the clock.

`python -m drivers.virtual.server` reads one line of JSON on standard input,
{"plan": ..., "seed": 1, "mode": "clock"|"wall", "ports": {name: port}}, and answers on standard output with
{"ports": {name: port}, "clock": port}. It serves on 127.0.0.1 until standard input ends or the clock port hears "bye".
Clock port, line by line: "advance 0.1" and "now" answer the bench's time, "stats" answers JSON.
"""

from __future__ import annotations

import contextlib
import heapq
import json
import os
import selectors
import signal
import socket
import sys
import threading
from collections.abc import Callable
from functools import partial
from typing import Any

from drivers.virtual.instrument import Instrument
from drivers.virtual.plan import Plan, dumps
from drivers.virtual.world import World

HOST = "127.0.0.1"
RECEIVE = 65_536
QUICK_ACK: int | None = getattr(socket, "TCP_QUICKACK", None)  # else a client's second bare message waits 40 ms
MOST_LINE = 1_000  # bytes of a line on the clock port


class Server:
    """Serves one world. `clock`: seconds of a wall clock that rules the bench's time; None: the clock port does."""

    def __init__(self, world: World, clock: Callable[[], float] | None = None) -> None:
        self.world = world
        self._clock = clock
        self._zero_s = clock() if clock else 0.0
        self._selector = selectors.DefaultSelector()
        self._running = True
        self._clients: dict[str, socket.socket] = {}
        self._half_line = b""
        self._owed: list[tuple[float, int, socket.socket, bytes]] = []  # answers of slow instruments, a heap
        self._count = 0

    # -- listening --------------------------------------------------------------------------------------------

    def listen(self, ports: dict[str, int]) -> dict[str, Any]:
        """Open all ports (0 or none given: any free one) and say which they are. Raises OSError."""
        opened = {}
        for name, instrument in self.world.instruments.items():
            opened[name] = self._listen(name, ports.get(name, 0), partial(self._heard, instrument))
            # an instrument's own lines never mix between two clients, because it has only one
        return {"ports": opened, "clock": self._listen("", 0, self._heard_clock)}

    def _listen(self, name: str, port: int, heard: Callable[[socket.socket, bytes], None]) -> int:
        listener = socket.socket(socket.AF_INET, socket.SOCK_STREAM)
        if os.name == "posix":  # elsewhere this option lets two programs share a port
            listener.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        listener.bind((HOST, port))
        listener.listen(8)
        listener.setblocking(False)
        self._selector.register(listener, selectors.EVENT_READ, partial(self._accept, listener, name, heard))
        return int(listener.getsockname()[1])

    def _accept(self, listener: socket.socket, name: str, heard: Callable[[socket.socket, bytes], None]) -> None:
        """Take a client; a second one beside a live first one is turned away."""
        try:
            client, _ = listener.accept()
        except BlockingIOError:  # gone again already
            return
        if name in self._clients:
            self._hear_out(name, heard)
        if name in self._clients:
            client.close()
            return
        client.setblocking(False)
        client.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        self._clients[name] = client
        if name:
            self.world.instruments[name].clear_link()
        else:
            self._half_line = b""
        self._selector.register(client, selectors.EVENT_READ, partial(self._receive, name, client, heard))

    def _hear_out(self, name: str, heard: Callable[[socket.socket, bytes], None]) -> None:
        """Read all that a client has sent: it may have left since, for opening follows probing closely."""
        while name in self._clients and self._receive(name, self._clients[name], heard):
            pass

    def _drop(self, name: str, client: socket.socket) -> None:
        self._selector.unregister(client)
        client.close()
        del self._clients[name]

    # -- hearing ----------------------------------------------------------------------------------------------

    def _receive(self, name: str, client: socket.socket, heard: Callable[[socket.socket, bytes], None]) -> bool:
        """Hear what has come in; False where nothing had, or where the client has left."""
        try:
            data = client.recv(RECEIVE)
            if data:
                heard(client, data)
                return True
        except BlockingIOError:
            return False
        except OSError:  # reset by the peer, or it does not take its answers
            pass
        self._drop(name, client)
        return False

    def _heard(self, instrument: Instrument, client: socket.socket, data: bytes) -> None:
        if self._clock is not None:
            self._follow(self._clock)
        answer = instrument.stream(data)
        if answer and self._clock is not None and instrument.answer_s:
            self._count += 1
            due_s = self._clock() + instrument.answer_s * max(answer.count(b"\n"), 1)
            heapq.heappush(self._owed, (due_s, self._count, client, answer))
        elif answer:
            _say(client, answer)
        elif QUICK_ACK is not None:  # a command without an answer: acknowledge it now (it lasts for this one only)
            client.setsockopt(socket.IPPROTO_TCP, QUICK_ACK, 1)

    def _say_owed(self) -> float | None:
        """Say what slow instruments owe by now, and return how long the next one takes; None: nothing is owed."""
        while self._owed and self._clock is not None:
            left_s = self._owed[0][0] - self._clock()
            if left_s > 0:
                return left_s
            _, _, client, answer = heapq.heappop(self._owed)
            with contextlib.suppress(OSError):  # the client has left, or does not take its answers: it will be seen
                _say(client, answer)
        return None

    def _follow(self, clock: Callable[[], float]) -> None:
        """Bring the bench's time up to the wall clock."""
        self.world.advance(max(clock() - self._zero_s - self.world.now, 0.0))

    def _heard_clock(self, client: socket.socket, data: bytes) -> None:
        *lines, self._half_line = (self._half_line + data).split(b"\n")
        if len(self._half_line) > MOST_LINE:
            raise ConnectionError("a line without an end on the clock port")
        for line in lines:
            _say(client, (self._asked(line.decode("latin-1").split()) + "\n").encode("latin-1"))

    def _asked(self, words: list[str]) -> str:
        match words:
            case ["advance", text]:
                return self._advance(text)
            case ["now"]:
                if self._clock is not None:
                    self._follow(self._clock)
                return repr(self.world.now)
            case ["stats"]:
                return dumps({"busy_s": self.world.busy_s, "exchanges": self.world.exchanges})
            case ["bye"]:
                self._running = False
                return "bye"
        return "error expected: advance SECONDS, now, stats or bye"

    def _advance(self, text: str) -> str:
        if self._clock is not None:
            return "error this bench follows the wall clock"
        try:
            return repr(self.world.advance(float(text)))
        except ValueError as reason:
            return f"error {reason}"

    # -- running ----------------------------------------------------------------------------------------------

    def stop_when_readable(self, waker: socket.socket) -> None:
        """End serving when `waker` can be read."""
        self._selector.register(waker, selectors.EVENT_READ, self._stop)

    def _stop(self) -> None:
        self._running = False

    def serve(self) -> None:
        """Serve until told to stop, then let every port go."""
        select = self._selector.select
        while self._running:
            for key, _ in select(self._say_owed()):
                if key.fileobj.fileno() >= 0:  # type: ignore[union-attr]  # dropped earlier in this round
                    key.data()
        for key in list(self._selector.get_map().values()):
            key.fileobj.close()  # type: ignore[union-attr]  # only sockets are registered
        self._selector.close()


def _say(client: socket.socket, answer: bytes) -> None:
    """Send all of an answer; a client that does not take its answers loses its link."""
    if client.send(answer) != len(answer):
        raise ConnectionError("the client does not take its answers")


def _watch_standard_input(waker: socket.socket) -> None:
    """Wake the server when the process that started it has gone, however it went."""
    try:
        while os.read(0, 4096):
            pass
    except OSError:
        pass
    waker.close()


def main() -> None:
    from drivers.clock import WallClock, wall_seconds

    signal.signal(signal.SIGINT, signal.SIG_IGN)  # Ctrl-C is for the run, which still needs its instruments
    request = json.loads(sys.stdin.buffer.readline())
    world = World(Plan.from_json(request["plan"]), request["seed"], wall_seconds)
    server = Server(world, WallClock().now if request["mode"] == "wall" else None)
    ours, theirs = socket.socketpair()
    server.stop_when_readable(ours)
    opened = server.listen(request.get("ports") or {})
    sys.stdout.write(dumps(opened) + "\n")
    sys.stdout.flush()
    threading.Thread(target=_watch_standard_input, args=(theirs,), daemon=True).start()
    server.serve()


if __name__ == "__main__":
    main()
