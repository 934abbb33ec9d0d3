"""A board behind the driver contract: its bytes come over any wire (`drivers.ports`).

Commands are acknowledged before the next one goes out. An answer that does not come is asked for again under
the same number, which the board does not carry out twice; six times unanswered is a dead link. Rows that
come meanwhile are kept for the next read.
"""

from __future__ import annotations

from collections.abc import Callable
from contextlib import suppress

from drivers.clock import Clock
from drivers.contract import Bench, Halt, Hello, Notice, Reading
from drivers.errors import BenchError, BenchMisuse, BenchRefused, HardwareFault, LinkError, LinkTimeout
from drivers.link import messages as ms
from drivers.link.framing import LinkDamage, Unwrapper, wrap
from drivers.link.hello import read_hello
from drivers.link.rowcoding import RowCoding
from drivers.ports import Wire
from drivers.rows import FrameDamaged, FrameSequence, RowBlock, RowFrame, Status

#: Opening a port resets many boards: their boot loader may take seconds.
BOOT_S = 6.0
ASK_AGAIN_S = 0.25
# Answers come within some ms; asked again soon enough, one lost answer does not outlast a watchdog of 200 ms.
ANSWER_S = 0.06
TRIES = 6
#: A board stops sending rows to a host it has not heard for 2 s; one that only reads speaks up in time.
SPEAK_UP_S = 1.0
#: Frames out of order in a row that mean a board counting from zero again.
RESTARTED_FRAMES = 3
#: Commands that may go to a board whatever has happened to it.
OFF = (ms.Code.HALT, ms.Code.CLOSE)
WAYS = {Halt.COAST: 0, Halt.BRAKE: 1, Halt.RAMP: 2}


class BoardBench(Bench):
    """A bench at the end of a wire. `connect` opens the wire (LinkError if it cannot)."""

    def __init__(self, connect: Callable[[], Wire], clock: Clock, boot_s: float = BOOT_S) -> None:
        self._connect = connect
        self._clock = clock
        self._boot_s = boot_s
        self._wire: Wire | None = None
        self._unwrapper = Unwrapper()
        self._hello: Hello | None = None
        self._coding: RowCoding | None = None
        self._placed = FrameSequence()
        self._frames: list[RowFrame] = []
        self._blocks: list[RowBlock] = []
        self._notices: list[ms.BoardNotice] = []
        self._answers: dict[int, ms.Answer] = {}
        self._number = 0
        self._spoken_s = 0.0  # when something was last sent
        self._tick: int | None = None  # of the newest row placed, unwrapped
        self._status = 0  # of the newest row placed
        self._read_tick: int | None = None  # of the newest row handed to the owner
        self._disorder = 0
        self._rejected = 0  # frames with good check sums that this bench cannot have sent
        self._told_damaged = 0
        self._restarted = ""

    @property
    def damaged(self) -> int:
        """Stretches of bytes that were no message of this board since it was opened."""
        return self._unwrapper.damaged + self._rejected

    # Lifecycle

    def open(self) -> Hello:
        if self._wire is not None:
            raise BenchMisuse("the bench is open already")
        self._wire = self._connect()
        try:
            return self._introduce()
        except BaseException:
            self._drop()
            raise

    def _introduce(self) -> Hello:
        self._unwrapper.forget()
        self._rejected = self._told_damaged = 0
        self._hello = self._coding = None
        self._forget_rows()
        self._number = self._number + 1 & 0xFFFF
        end_s = self._clock.now_s() + self._boot_s
        self._write(b"\0")  # ends whatever half a message an earlier host left behind
        while self._hello is None or not self._blocks or self._restarted:  # ticks need a row for their place
            now_s = self._clock.now_s()
            if now_s > end_s:
                if self._hello is not None:
                    raise LinkTimeout("the board introduced itself but sends no rows")
                raise LinkTimeout(
                    f"no board answered within {self._boot_s:g} s; check port, baud rate and power"
                )
            if self._restarted:  # it had answered before the opening of its port reset it
                self._hello = self._coding = None
                self._forget_rows()
            self._send(ms.AskHello())
            while not (self._blocks or self._restarted) and self._clock.now_s() < now_s + ASK_AGAIN_S:
                self._listen(ASK_AGAIN_S)
        return self._hello

    def _forget_rows(self) -> None:
        self._placed = FrameSequence()
        self._frames, self._blocks, self._notices = [], [], []
        self._answers.clear()
        self._tick = self._read_tick = None
        self._status = 0
        self._disorder = 0
        self._restarted = ""

    def close(self) -> None:
        if self._wire is None:
            return
        with suppress(BenchError):
            self._ask(ms.Code.CLOSE)
        self._drop()

    def _drop(self) -> None:
        wire, self._wire = self._wire, None
        if wire is not None:
            wire.close()

    # Data

    def read(self, max_wait_s: float) -> Reading:
        """HardwareFault once the board has restarted, after all that came before."""
        wire = self._need()
        if self._clock.now_s() - self._spoken_s > SPEAK_UP_S:
            self._send(ms.AskHello())  # feeds no watchdog, as a heartbeat would
        if self._blocks or self._notices:
            data = b""
            with suppress(LinkError):  # the next read, with nothing else to hand over, meets it again
                data = wire.read(0.0)
            self._take(data)
        elif not self._restarted:
            self._listen(max_wait_s)
        if self._restarted and not (self._blocks or self._notices):
            raise HardwareFault(self._restarted)
        notices = [Notice(self._unwrapped(one.tick), one.kind, one.data) for one in self._notices]
        if self.damaged > self._told_damaged:
            stretches = self.damaged - self._told_damaged
            notices.append(Notice(self._tick or 0, "damaged_bytes", {"stretches": stretches}))
            self._told_damaged = self.damaged
        reading = Reading(self._frames, self._blocks, notices)
        if self._blocks:
            self._read_tick = int(self._blocks[-1].tick[-1])
        self._frames, self._blocks, self._notices = [], [], []
        return reading

    # Commands

    def heartbeat(self) -> None:
        self._need()
        if self._read_tick is not None:
            self._send(ms.Heartbeat(self._read_tick))

    def enable(self) -> int:
        # A lock an earlier host left behind: not every board ends it with the drive.
        if self._status & Status.LOCKED and not self._status & Status.ENABLED:
            with suppress(BenchRefused):  # the row was of before its end
                self.unlock()
        return self._command(ms.Code.ENABLE)[0]

    def drive(self, target_v: float, slew_v_per_s: float) -> int:
        return self._command(ms.Code.DRIVE, target_v, slew_v_per_s)[0]

    def halt(self, how: Halt, slew_v_per_s: float = 1.0) -> int:
        return self._command(ms.Code.HALT, WAYS[how], slew_v_per_s)[0]

    def lock(self) -> int:
        return self._command(ms.Code.LOCK)[0]

    def unlock(self) -> tuple[int, int]:
        return self._command(ms.Code.UNLOCK)

    def tap(self, impulse_n_m_s: float) -> int:
        self._part("tapper", "tapper")
        return self._command(ms.Code.TAP, impulse_n_m_s)[0]

    def sync(self) -> int:
        self._part("sync", "sync line")
        return self._command(ms.Code.SYNC)[0]

    def release(self, angle_rad: float) -> int:
        self._part("release", "releaser")
        return self._command(ms.Code.RELEASE, angle_rad)[0]

    def clear_latch(self) -> None:
        self._command(ms.Code.CLEAR_LATCH)

    # Asking

    def _need(self) -> Wire:
        if self._wire is None:
            raise BenchMisuse("the bench is not open")
        return self._wire

    def _part(self, name: str, words: str) -> None:
        self._need()
        if self._hello is None or not getattr(self._hello.capabilities, name):
            raise BenchMisuse(f"the bench has no {words}")

    def _send(self, message: ms.Message) -> None:
        self._write(wrap(ms.pack(message)))

    def _write(self, data: bytes) -> None:
        self._need().write(data)
        self._spoken_s = self._clock.now_s()

    def _command(self, code: ms.Code, *arguments: float) -> tuple[int, int]:
        """Tick of effect, unwrapped, and the value of the answer."""
        answer = self._ask(code, *arguments)
        if answer.result is ms.Result.REFUSED:
            raise BenchRefused(answer.reason or "the board refused, without a reason")
        if answer.result is ms.Result.LACKING:
            raise BenchMisuse(answer.reason or "the bench lacks that part")
        return self._unwrapped(answer.tick), answer.value

    def _ask(self, code: ms.Code, *arguments: float) -> ms.Answer:
        self._need()
        if self._restarted and code not in OFF:
            raise HardwareFault(self._restarted)  # nothing may arm a board that has forgotten all
        self._number = self._number + 1 & 0xFFFF
        number = self._number
        self._answers.clear()  # late ones and second ones
        try:
            asked = wrap(ms.pack(ms.Command(number, code, arguments)))
        except OverflowError:
            raise BenchRefused(f"{max(arguments, key=abs):g} is beyond what can be told to a board") from None
        for _ in range(TRIES):
            self._write(asked)
            end_s = self._clock.now_s() + ANSWER_S
            while number not in self._answers:
                if self._restarted and code not in OFF:
                    raise HardwareFault(self._restarted)
                left_s = end_s - self._clock.now_s()
                if left_s <= 0.0:
                    break
                self._listen(left_s)
            else:
                return self._answers[number]
        raise LinkTimeout(f"the board did not answer {code.name.lower().replace('_', ' ')} in time")

    # Listening

    def _listen(self, max_wait_s: float) -> None:
        self._take(self._need().read(max_wait_s))

    def _take(self, data: bytes) -> None:
        for checked in self._unwrapper.feed(data):
            try:
                message = ms.unpack(checked)
                self._hear(message)
            except (LinkDamage, FrameDamaged):
                self._rejected += 1

    def _hear(self, message: ms.Message) -> None:
        match message:
            case ms.HelloText(version, text):
                if self._hello is None:
                    self._know(version, text)
            case ms.Rows(payload):
                if self._coding is not None:
                    self._place(self._coding.unpack(payload))
            case ms.Answer():
                self._answers[message.number] = message
            case ms.BoardNotice():
                if self._hello is not None and not self._restarted:
                    self._notices.append(message)  # its tick has a place once there is a row
            case ms.Boot(cause):
                if self._hello is not None:
                    why = cause.name.lower().replace("_", "-")
                    self._restarted = (
                        f"the board has restarted ({why}): its drive stays off until it is armed anew"
                    )
            case _:
                raise LinkDamage("a message for boards came from one")

    def _know(self, version: int, text: bytes) -> None:
        if version != ms.VERSION:
            raise LinkError(
                f"the board speaks version {version} of the link, this program version {ms.VERSION}"
            )
        try:
            self._hello, widths = read_hello(text)
        except LinkDamage as error:
            raise LinkError(str(error)) from None
        self._coding = RowCoding(widths)
        # What came before was another conversation's tail, or a boot loader's.
        self._unwrapper.damaged = self._rejected = 0

    def _place(self, frame: RowFrame) -> None:
        hello = self._hello
        if hello is None or frame.period != hello.row_period_ticks or len(frame.raw) > hello.frame_rows:
            raise LinkDamage("a row frame that differs from the board's hello")
        if self._restarted:
            return  # counted from another beginning, they have no place
        try:
            # A board that counts from zero again may be ahead in frames by chance, but its clock is behind.
            if self._tick is not None and not 0 < (frame.tick - self._tick) & 0xFFFFFFFF < 2**31:
                raise FrameDamaged(f"row frame {frame.sequence} is older than the one before it")
            block = self._placed.place(frame)
        except FrameDamaged:
            self._disorder += 1
            if self._disorder >= RESTARTED_FRAMES:
                self._restarted = (
                    "the board counts from the beginning again: it has restarted, its drive stays off"
                )
            raise
        self._disorder = 0
        self._frames.append(frame)
        self._blocks.append(block)
        self._tick = int(block.tick[-1])
        self._status = frame.status

    def _unwrapped(self, tick: int) -> int:
        """The tick nearest to the newest row whose low 32 bits are `tick`."""
        if self._tick is None:
            return tick
        ahead = (tick - self._tick) & 0xFFFFFFFF
        return max(self._tick + (ahead - 2**32 if ahead >= 2**31 else ahead), 0)
