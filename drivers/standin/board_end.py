"""The board's side of the link over any bench: bytes of the host in, bytes for the host out. No I/O.

What the line does not take in time is dropped whole, frame by frame, as a board's own buffer would overflow:
the rows' `overruns` tell it, and so do the counts here, so that the reader is not blamed for it.
"""

from __future__ import annotations

import json
from collections import deque
from collections.abc import Callable
from contextlib import suppress
from dataclasses import replace
from typing import Any

from drivers.clock import Clock
from drivers.contract import Bench, Halt
from drivers.errors import BenchMisuse, BenchRefused
from drivers.link import messages as ms
from drivers.link.framing import LinkDamage, Unwrapper, wrap
from drivers.link.hello import hello_text
from drivers.link.rowcoding import RowCoding, widths_for
from drivers.rows import RowFrame, Status

WAYS = (Halt.COAST, Halt.BRAKE, Halt.RAMP)
#: A board hears nothing for so long: the host has gone, rows need not be sent.
FORSAKEN_S = 2.0
BOOT_S = 0.3

#: Called with what happened, for a log: tick (from the stand-in's beginning) and whatever belongs to it.
Tell = Callable[[dict[str, Any]], None]


class BoardEnd:
    """Answers the host for `bench`, which it opens; `room_bytes` is the size of the board's send buffer."""

    def __init__(
        self, bench: Bench, clock: Clock, *, room_bytes: int = 1 << 16, tell: Tell | None = None
    ) -> None:
        self._bench = bench
        self._clock = clock
        self._room = room_bytes
        self._tell = tell or (lambda fields: None)
        hello = bench.open()
        # A board that drives a motor for a host it does not know asks for the same care as any other.
        self._hello = replace(
            hello,
            name=f"{hello.name} (stand-in)",
            firmware="haltere stand-in",
            capabilities=replace(hello.capabilities, hardware=True),
        )
        widths = widths_for(hello.channels)
        self._text = hello_text(self._hello, widths)
        self._coding = RowCoding(widths)
        self._unwrapper = Unwrapper()
        self._queue: deque[bytes] = deque()
        self._pending = 0
        self._streaming = False
        self._heard_s = clock.now_s()
        self._boot_at_s: float | None = None
        self._boot_cause = ms.BootCause.POWER
        self._powered = True
        # Counters as the board counts them, from its last start.
        self._tick_base = self._sequence_base = self._row_base = 0
        self._dropped = 0
        self._overruns = 0
        self._last_frame: RowFrame | None = None
        self._last_answer: bytes | None = None
        self._last_command: ms.Command | None = None
        self._beat_tick: int | None = None  # the row the newest heartbeat named
        self._beat_at = 0  # tick at which it was taken, not set back by a restart
        self._enabled = False
        self._lose = self._damage = 0
        # What the far end saw, to be compared with what the host says.
        self.counts = {
            "frames_sent": 0,
            "rows_sent": 0,
            "frames_dropped": 0,
            "rows_dropped": 0,
            "frames_lost_on_purpose": 0,
            "frames_damaged_on_purpose": 0,
            "damaged_messages_received": 0,
            "commands": 0,
            "heartbeats": 0,
        }

    # The wire

    @property
    def pending(self) -> int:
        """Bytes that wait to be sent."""
        return self._pending

    def outgoing(self) -> bytes:
        """What is to be sent next; `sent` takes away what the line took."""
        if len(self._queue) > 1:
            together = b"".join(self._queue)
            self._queue.clear()
            self._queue.append(together)
        return self._queue[0] if self._queue else b""

    def sent(self, taken: int) -> None:
        rest = self.outgoing()[taken:]
        self._pending = len(rest)
        self._queue.clear()
        if rest:
            self._queue.append(rest)

    def take(self, data: bytes) -> None:
        """Bytes from the host."""
        if not self._powered or self._boot_at_s is not None:
            return
        for checked in self._unwrapper.feed(data):
            try:
                message = ms.unpack(checked)
            except LinkDamage:
                self.counts["damaged_messages_received"] += 1
                continue
            self._heard_s = self._clock.now_s()
            self._hear(message)

    def turn(self) -> None:
        """Let the bench go on to the present moment and queue what it has to say."""
        now_s = self._clock.now_s()
        if self._boot_at_s is not None and now_s >= self._boot_at_s:
            self._boot_at_s = None
            self._queue_message(ms.Boot(self._boot_cause))
        if self._streaming and now_s - self._heard_s > FORSAKEN_S:
            self._streaming = False
            self._tell({"event": "nobody listens", "tick": self._beat_at})
        reading = self._bench.read(0.0)
        for frame in reading.frames:
            self._last_frame = frame
            self._watch(frame)
            if self._streaming:
                self._queue_rows(frame)
        for notice in reading.notices:
            self._tell({"event": notice.kind, "tick": notice.tick & 0xFFFFFFFF, **notice.data})
            if self._streaming:
                self._queue_message(ms.BoardNotice(self._board_tick(notice.tick), notice.kind, notice.data))

    # What can go wrong with a board and its line

    def lose_frames(self, frames: int = 1) -> None:
        """The next frames never arrive."""
        self._lose += frames

    def damage_frames(self, frames: int = 1) -> None:
        """The next frames arrive with a flipped bit."""
        self._damage += frames

    def babble(self, count: int = 500) -> None:
        """Noise on the line, zeros among it."""
        self._push(bytes((index * 167 + 13) % 256 for index in range(count)))

    def reset(self) -> None:
        """The board is reset, as by DTR or a button."""
        self._start_anew(ms.BootCause.RESET)

    def power_off(self) -> None:
        """Board and motor lose their supply."""
        self._forget()
        self._powered = False

    def power_on(self) -> None:
        self._powered = True
        self._start_anew(ms.BootCause.POWER)

    def _start_anew(self, cause: ms.BootCause) -> None:
        self._forget()
        self._boot_at_s = self._clock.now_s() + BOOT_S
        self._boot_cause = cause
        if self._last_frame is not None:
            last = self._last_frame
            rows = len(last.raw)
            self._tick_base = (last.tick + (rows - 1) * last.period) & 0xFFFFFFFF
            self._sequence_base = (last.sequence + 1) & 0xFFFFFFFF
            self._row_base = (last.first_row + rows) & 0xFFFFFFFF
        self._dropped = self._overruns = 0

    def _forget(self) -> None:
        restart = getattr(getattr(self._bench, "faults", None), "restart_board", None)
        if restart is not None:
            restart()
        self._queue.clear()
        self._pending = 0
        self._streaming = False
        self._last_command = self._beat_tick = self._boot_at_s = None
        self._unwrapper.forget()

    # Listening

    def _hear(self, message: ms.Message) -> None:
        match message:
            case ms.AskHello():
                self._queue_message(ms.HelloText(ms.VERSION, self._text))
                # Another host numbers its commands anew: none of them may be taken for one of before.
                self._last_command = None
                if not self._streaming:
                    self._beat_tick = None
                self._streaming = True
            case ms.Heartbeat(tick):
                self._beat(tick)
            case ms.Command():
                self._obey(message)

    def _beat(self, tick: int) -> None:
        newer = self._beat_tick is None or 0 < (tick - self._beat_tick) & 0xFFFFFFFF < 2**31
        sampled = (self._now_tick() - tick) & 0xFFFFFFFF < 2**31
        if not (newer and sampled):
            return
        self._beat_tick = tick
        self._beat_at = (self._now_tick() + self._tick_base) & 0xFFFFFFFF
        self.counts["heartbeats"] += 1
        self._bench.heartbeat()

    def _obey(self, command: ms.Command) -> None:
        if command == self._last_command and self._last_answer is not None:
            self._push(self._last_answer)  # the answer was lost, not the command
            return
        self.counts["commands"] += 1
        result, tick, value, reason = ms.Result.DONE, 0, 0, ""
        try:
            tick, value = self._carry_out(command)
        except BenchRefused as refusal:
            result, reason = ms.Result.REFUSED, str(refusal)
        except BenchMisuse as lack:
            result, reason = ms.Result.LACKING, str(lack)
        answer = ms.Answer(command.number, result, self._board_tick(tick), value, reason)
        self._last_command, self._last_answer = command, wrap(ms.pack(answer))
        self._push(self._last_answer)
        if command.code is ms.Code.CLOSE:
            self._streaming = False

    def _carry_out(self, command: ms.Command) -> tuple[int, int]:
        bench, given = self._bench, command.arguments
        match command.code:
            case ms.Code.ENABLE:
                # The watchdog counts from here; no heartbeat of an earlier drive may feed it.
                return bench.enable(), 0
            case ms.Code.DRIVE:
                return bench.drive(given[0], given[1]), 0
            case ms.Code.HALT:
                way = WAYS[int(given[0])] if given[0] < len(WAYS) else Halt.COAST
                return bench.halt(way, given[1]), 0
            case ms.Code.LOCK:
                return bench.lock(), 0
            case ms.Code.UNLOCK:
                return bench.unlock()
            case ms.Code.TAP:
                return bench.tap(given[0]), 0
            case ms.Code.SYNC:
                return bench.sync(), 0
            case ms.Code.RELEASE:
                return bench.release(given[0]), 0
            case ms.Code.CLEAR_LATCH:
                bench.clear_latch()
                return self._now_tick() + self._tick_base, 0
            case ms.Code.CLOSE:
                tick = bench.halt(Halt.COAST)
                with suppress(BenchRefused):  # it was not locked
                    bench.unlock()
                return tick, 0

    # Speaking

    def _now_tick(self) -> int:
        """Board tick of the newest row, wrapped."""
        if (tick := getattr(self._bench, "tick", None)) is not None:
            return self._board_tick(tick)
        last = self._last_frame
        return 0 if last is None else self._board_tick(last.tick + (len(last.raw) - 1) * last.period)

    def _board_tick(self, tick: int) -> int:
        return (tick - self._tick_base) & 0xFFFFFFFF

    def _watch(self, frame: RowFrame) -> None:
        """Tell when the power stage went on or off; the frame in which it did is not counted as off."""
        enabled = bool(frame.status & Status.ENABLED)
        if enabled != self._enabled:
            self._enabled = enabled
            self._tell(
                {
                    "event": "on" if enabled else "off",
                    "tick": frame.tick,
                    "last_heartbeat_tick": self._beat_at,
                }
            )

    def _queue_rows(self, frame: RowFrame) -> None:
        rows = len(frame.raw)
        if self._pending > self._room:
            self._dropped += 1
            self._overruns += rows
            self.counts["frames_dropped"] += 1
            self.counts["rows_dropped"] += rows
            return
        told = RowFrame(
            (frame.sequence - self._sequence_base - self._dropped) & 0xFFFFFFFF,
            self._board_tick(frame.tick),
            frame.period,
            (frame.first_row - self._row_base) & 0xFFFFFFFF,
            frame.status,
            (frame.overruns + self._overruns) & 0xFFFF,
            frame.raw,
        )
        if self._lose > 0:
            self._lose -= 1
            self.counts["frames_lost_on_purpose"] += 1
            return
        wired = wrap(ms.pack(ms.Rows(self._coding.pack(told))))
        if self._damage > 0:
            self._damage -= 1
            self.counts["frames_damaged_on_purpose"] += 1
            at = told.sequence % (len(wired) - 1)
            wired = wired[:at] + bytes((wired[at] ^ 1 << told.sequence % 8,)) + wired[at + 1 :]
        else:
            self.counts["frames_sent"] += 1
            self.counts["rows_sent"] += rows
        self._push(wired)

    def _queue_message(self, message: ms.Message) -> None:
        self._push(wrap(ms.pack(message)))

    def _push(self, data: bytes) -> None:
        self._queue.append(data)
        self._pending += len(data)

    def summary(self) -> str:
        """The counts as JSON."""
        told = dict(self.counts)
        told["damaged_messages_received"] += self._unwrapper.damaged
        return json.dumps(told)
