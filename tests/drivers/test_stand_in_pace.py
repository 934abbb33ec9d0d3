"""A stand-in that was not given the processor for a while does not take the host for dead."""

from __future__ import annotations

from simulated_rigs import make_bench

from drivers.clock import VirtualClock
from drivers.contract import Bench, Halt, Reading
from drivers.link import messages as ms
from drivers.link.framing import Unwrapper, wrap
from drivers.standin.board_end import BoardEnd
from drivers.standin.pace import SlippingClock
from drivers.standin.serving import Server

TURN_S = 0.001


class Line:
    """A place whose host beats for every row frame it gets, and asks for what it is told to."""

    address = "memory"

    def __init__(self) -> None:
        self.to_board = wrap(ms.pack(ms.AskHello()))
        self._unwrapper = Unwrapper()
        self.last_status = 0

    def descriptors(self) -> list[int]:
        return []

    def read(self) -> bytes:
        data, self.to_board = self.to_board, b""
        return data

    def write(self, data: bytes) -> int:
        for checked in self._unwrapper.feed(data):
            if checked[0] == ms.ROWS:
                tick = int.from_bytes(checked[5:9], "little") + 19_000
                self.last_status = int.from_bytes(checked[17:19], "little")
                self.to_board += wrap(ms.pack(ms.Heartbeat(tick)))
        return len(data)

    def unplug(self) -> None: ...

    def plug_in(self) -> None: ...

    def close(self) -> None: ...


class Pausing(Bench):
    """Passes everything on; loses the processor for `pause_s` in the middle of every hundredth read."""

    def __init__(self, bench: Bench, host: VirtualClock, pause_s: float) -> None:
        self._bench = bench
        self._host = host
        self._pause_s = pause_s
        self._reads = 0
        for name in (
            "open",
            "close",
            "heartbeat",
            "enable",
            "drive",
            "halt",
            "lock",
            "unlock",
            "tap",
            "sync",
        ):
            setattr(self, name, getattr(bench, name))

    def read(self, max_wait_s: float) -> Reading:
        self._reads += 1
        if self._reads % 100 == 0:
            self._host.sleep_s(self._pause_s)
        return self._bench.read(max_wait_s)

    def __getattr__(self, name: str) -> object:
        return getattr(self._bench, name)

    open = close = heartbeat = enable = drive = halt = lock = unlock = tap = sync = release = clear_latch = (
        None  # type: ignore[assignment]
    )


def test_pauses_in_the_middle_of_a_turn_are_left_out() -> None:
    host = VirtualClock()
    pace = SlippingClock(host)
    bench = Pausing(make_bench(clock=pace), host, 0.3)
    board = BoardEnd(bench, pace)
    line = Line()
    server = Server(board, line, host, pace)
    turns = 0

    def going() -> bool:
        nonlocal turns
        turns += 1
        if turns == 50:
            line.to_board += wrap(ms.pack(ms.Command(1, ms.Code.ENABLE)))
        return turns < 2000

    server.serve(going, TURN_S)
    assert pace.pauses >= 15 and pace.slipped_s > 15 * 0.25
    assert line.last_status & 1 and not line.last_status & 4  # enabled, not latched
    bench._bench.halt(Halt.COAST)
