"""A cable that loses, doubles, spoils or delays messages, and a bench at its end that keeps count of its commands."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from conformance import Owner
from simulated_rigs import make_bench
from wired import Cable, wired

from drivers.board import BoardBench
from drivers.contract import Reading
from drivers.link import messages as ms
from drivers.link.framing import Unwrapper
from drivers.rows import Status

Meddle = Callable[[bytes], bytes]


def lost(message: bytes) -> bytes:
    return b""


def twice(message: bytes) -> bytes:
    return message + message


def damaged(message: bytes) -> bytes:
    return message[:3] + bytes((message[3] ^ 0x10,)) + message[4:]


def change(kind: type, how: Meddle, times: int = 1 << 30) -> Meddle:
    """The next `times` messages of a kind suffer `how`, the rest pass."""
    left = times

    def meddle(data: bytes) -> bytes:
        nonlocal left
        out = b""
        for stretch in data.split(b"\0")[:-1]:
            whole = stretch + b"\0"
            for message in Unwrapper().feed(whole):
                if left > 0 and isinstance(ms.unpack(message), kind):
                    left -= 1
                    whole = how(whole)
            out += whole
        return out

    return meddle


def late(cable: Cable, kind: type, delay_s: float) -> Meddle:
    """Messages of a kind come `delay_s` after they were sent; the others pass them by."""
    held: list[tuple[float, bytes]] = []

    def hold(message: bytes) -> bytes:
        held.append((cable.clock.now_s() + delay_s, message))
        return b""

    others = change(kind, hold)

    def meddle(data: bytes) -> bytes:
        out = others(data)
        while held and held[0][0] <= cable.clock.now_s():
            out += held.pop(0)[1]
        return out

    return meddle


class Rig:
    """An open bench on a cable, its owner, and what the bench at the far end was made to do."""

    def __init__(self) -> None:
        self.carried: list[str] = []
        self.bench: BoardBench
        self.bench, self.cable = wired(self._make)
        self.end = self.cable.end
        self.owner = Owner(self.bench, self.bench.open())
        self.owner.run(0.1)

    def _make(self, clock: Any) -> Any:
        bench = make_bench(clock=clock)
        for name in ("enable", "drive", "halt", "lock", "unlock", "tap"):
            setattr(bench, name, self._counted(name, getattr(bench, name)))
        return bench

    def _counted(self, name: str, command: Callable[..., Any]) -> Callable[..., Any]:
        def counted(*arguments: Any) -> Any:
            self.carried.append(name)
            return command(*arguments)

        return counted

    def spin(self) -> None:
        self.bench.enable()
        self.bench.drive(4.0, 8.0)
        self.owner.run(1.0)
        assert self.owner.status & Status.ENABLED

    def read(self, duration_s: float) -> list[Reading]:
        """What reads of 20 ms bring in that time, silence too."""
        return [self.bench.read(0.02) for _ in range(round(duration_s / 0.02))]
