"""A board played by a test: a wire that says what it is told to say, and keeps what it hears."""

from __future__ import annotations

from collections.abc import Callable

from drivers.board import BoardBench
from drivers.clock import VirtualClock
from drivers.contract import Capabilities, Hello
from drivers.errors import LinkError
from drivers.link import messages as ms
from drivers.link.framing import LinkDamage, Unwrapper, wrap
from drivers.link.hello import hello_text


class ScriptedBoard:
    """The wire and the board at its end. Hooks say what comes back; silence takes time on `clock`.

    `greet` is called for each hello asked for, `obey` for each command; both may `say` something.
    """

    def __init__(self, hello: Hello, widths: tuple[str, ...], block: int = 1 << 16) -> None:
        self.clock = VirtualClock()
        self.hello = hello
        self.text = hello_text(hello, widths)
        self.block = block
        self.heard: list[ms.Message] = []
        self.closed = 0
        self.gone = False
        self.greet: Callable[[], None] = lambda: self.say(ms.HelloText(ms.VERSION, self.text))
        self.obey: Callable[[ms.Command], None] = lambda command: self.answer(command)
        self._unwrapper = Unwrapper()
        self._queue = bytearray()

    @property
    def bench(self) -> BoardBench:
        return BoardBench(lambda: self, self.clock, boot_s=3.0)

    # What the board says

    def say(self, *messages: ms.Message) -> None:
        for message in messages:
            self.send(wrap(ms.pack(message)))

    def send(self, data: bytes) -> None:
        self._queue += data

    def answer(self, command: ms.Command, tick: int = 0, value: int = 0) -> None:
        self.say(ms.Answer(command.number, ms.Result.DONE, tick, value))

    # The wire

    def read(self, max_wait_s: float) -> bytes:
        if self.gone:
            raise LinkError("the line to the bench is down")
        data = bytes(self._queue[: self.block])
        del self._queue[: self.block]
        self.clock.sleep_s(max_wait_s if not data else 1e-4)
        return data

    def write(self, data: bytes) -> None:
        if self.gone:
            raise LinkError("the line to the bench is down")
        for checked in self._unwrapper.feed(data):
            try:
                message = ms.unpack(checked)
            except LinkDamage:
                continue
            self.heard.append(message)
            if isinstance(message, ms.AskHello):
                self.greet()
            elif isinstance(message, ms.Command):
                self.obey(message)

    def close(self) -> None:
        self.closed += 1


def hello_for(channels: object, **changes: object) -> Hello:
    settings: dict[str, object] = {
        "name": "scripted",
        "firmware": "of a test",
        "tick_hz": 1_000_000,
        "row_period_ticks": 1000,
        "frame_rows": 8,
        "channels": channels,
        "capabilities": Capabilities(tapper=True, sync=True, release=True),
        **changes,
    }
    return Hello(**settings)  # type: ignore[arg-type]
