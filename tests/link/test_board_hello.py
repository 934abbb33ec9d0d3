"""The board driver and what stands at the other end of the wire: nobody, a boot loader, a liar, a board reset."""

from __future__ import annotations

import json

import bad_line
import pytest
from scripted_board import ScriptedBoard, hello_for
from test_hello import FIELDS, changed, without

from drivers.board import ASK_AGAIN_S
from drivers.channels import Channel, ChannelTable
from drivers.errors import BenchMisuse, HardwareFault, LinkError, LinkTimeout
from drivers.link import messages as ms
from drivers.link.framing import wrap

CHANNELS = ChannelTable(tuple(Channel(f"c{index}", "other", "1", 1.0) for index in range(4)))
BOOT_S = 3.0


@pytest.fixture
def board() -> ScriptedBoard:
    """Answers with its hello and its first frame."""
    board = ScriptedBoard(hello_for(CHANNELS), bad_line.WIDTHS)
    board.greet = lambda: greet(board)
    return board


def greet(board: ScriptedBoard, index: int = 0) -> None:
    board.say(ms.HelloText(ms.VERSION, board.text))
    board.send(bad_line.wired(index))


def asked(board: ScriptedBoard) -> int:
    return sum(isinstance(message, ms.AskHello) for message in board.heard)


# Nobody, or nobody yet


def test_nobody_at_the_other_end(board: ScriptedBoard) -> None:
    board.greet = lambda: None
    with pytest.raises(LinkTimeout, match="no board answered within 3 s; check port, baud rate and power"):
        board.bench.open()
    assert BOOT_S <= board.clock.now_s() < BOOT_S + 2 * ASK_AGAIN_S
    assert board.closed == 1
    assert BOOT_S / ASK_AGAIN_S - 1 <= asked(board) <= BOOT_S / ASK_AGAIN_S + 2


def test_a_plug_that_only_returns_what_is_sent(board: ScriptedBoard) -> None:
    board.greet = lambda: board.say(ms.AskHello())
    with pytest.raises(LinkTimeout, match="no board answered"):
        board.bench.open()


def test_a_board_that_takes_its_time(board: ScriptedBoard) -> None:
    def slowly() -> None:
        if board.clock.now_s() > 2.5:
            greet(board)

    board.greet = slowly
    bench = board.bench
    assert bench.open().name == "scripted"
    assert 2.5 < board.clock.now_s() < BOOT_S


def test_a_boot_loader_babbles_before_the_hello(board: ScriptedBoard) -> None:
    """Text, zeros, half a message, and the message that the board has started."""
    board.send(b"\0\0boot v1\r\n" + bytes(range(256)) * 9 + wrap(b"\x82half")[:5] + b"\0")
    board.say(ms.Boot(ms.BootCause.POWER))
    board.send(b"\xf0\xf0\xf0\xf0" * 50 + b"\0")
    bench = board.bench
    bench.open()
    reading = bench.read(0.01)
    assert bench.damaged == 0 and not reading.notices
    assert bad_line.rows_of(list(reading.blocks)).tolist() == list(range(8))


def test_a_hello_behind_babble_that_does_not_end_is_asked_for_again(board: ScriptedBoard) -> None:
    board.send(b"no end of")
    bench = board.bench
    bench.open()
    assert asked(board) == 2  # the first answer was part of the babble


def test_half_a_message_of_an_earlier_host_is_ended_first(board: ScriptedBoard) -> None:
    board.write(wrap(ms.pack(ms.Command(7, ms.Code.DRIVE, (12.0, 1.0))))[:9])
    bench = board.bench
    bench.open()
    assert board.heard == [ms.AskHello()]  # the first is heard already
    assert board.clock.now_s() < ASK_AGAIN_S


def test_an_earlier_conversation_ends_before_the_hello(board: ScriptedBoard) -> None:
    """Rows, notices and answers on their way to the host before this one are not taken for its own."""
    board.send(bad_line.stream(700, 720))
    board.say(
        ms.BoardNotice(5, "latch", {"cause": "stall"}),
        *(ms.Answer(n, ms.Result.REFUSED, 1) for n in range(9)),
    )
    bench = board.bench
    bench.open()
    reading = bench.read(0.01)
    assert bad_line.rows_of(list(reading.blocks)).tolist() == list(range(8)) and not reading.notices
    board.obey = lambda command: board.answer(command, bad_line.FIRST_TICK, 42)
    assert bench.unlock() == (bad_line.FIRST_TICK, 42)


def test_a_hello_without_rows(board: ScriptedBoard) -> None:
    board.greet = lambda: board.say(ms.HelloText(ms.VERSION, board.text))
    with pytest.raises(LinkTimeout, match="introduced itself but sends no rows"):
        board.bench.open()
    assert board.closed == 1


def test_a_board_reset_by_the_opening_of_its_port_is_asked_again(board: ScriptedBoard) -> None:
    """Its hello was on the way already when the reset came."""

    def reset_first() -> None:
        if asked(board) == 1:
            board.say(ms.HelloText(ms.VERSION, board.text), ms.Boot(ms.BootCause.RESET))
        else:
            greet(board)

    board.greet = reset_first
    bench = board.bench
    bench.open()
    assert board.clock.now_s() < 2 * ASK_AGAIN_S
    assert len(bench.read(0.01).blocks) == 1
    bench.enable()


def test_and_so_is_one_whose_first_rows_had_come(board: ScriptedBoard) -> None:
    def reset_first() -> None:
        if asked(board) == 1:
            greet(board, 500)
            board.say(ms.Boot(ms.BootCause.RESET))
        else:
            greet(board)

    board.greet = reset_first
    bench = board.bench
    bench.open()
    assert bad_line.rows_of(list(bench.read(0.01).blocks)).tolist() == list(range(8))


def test_a_second_hello_changes_nothing(board: ScriptedBoard) -> None:
    bench = board.bench
    hello = bench.open()
    board.text = json.dumps({"name": "another"}).encode()
    greet(board, 1)
    board.say(ms.HelloText(99, b"{"))
    assert len(bench.read(0.01).blocks) == 2 and bench.damaged == 0
    assert hello.name == "scripted"


# Liars

TOLD = json.loads(ScriptedBoard(hello_for(CHANNELS), bad_line.WIDTHS).text)
LIES: dict[str, object] = {
    **{f"no {path[-1]}": without(TOLD, path) for path in FIELDS},
    "more than 60 V": TOLD | {"max_voltage_v": 61.0},
    "endless volts": TOLD | {"max_voltage_v": float("inf")},
    "no number of volts": TOLD | {"max_voltage_v": float("nan")},
    "volts of 400 digits": TOLD | {"max_voltage_v": 10**400},
    "no channels": TOLD | {"channels": []},
    "channels are none": TOLD | {"channels": None},
    "256 channels": TOLD | {"channels": TOLD["channels"] * 64},
    "no rows in a frame": TOLD | {"frame_rows": 0},
    "ticks that stand still": TOLD | {"tick_hz": 0},
    "a watchdog that never acts": TOLD | {"heartbeat_timeout_s": 1e9},
    "an unknown width": changed(TOLD, ("channels", 1, "width"), "f64"),
    "a scale of nothing": changed(TOLD, ("channels", 1, "scale"), 0.0),
    "a list": [TOLD],
    "nothing": b"",
    "half": json.dumps(TOLD).encode()[:300],
    "very deep": b'{"name":' * 8000,
    "lists in lists": b"[" * 60_000,
    "bytes": bytes(range(128, 256)),
}


@pytest.mark.parametrize("lie", LIES)
def test_a_hello_that_lies_is_a_link_error_in_a_sentence(board: ScriptedBoard, lie: str) -> None:
    told = LIES[lie]
    good = board.text
    board.text = told if isinstance(told, bytes) else json.dumps(told).encode()
    bench = board.bench
    with pytest.raises(LinkError) as error:
        bench.open()
    sentence = str(error.value)
    assert sentence.startswith("the board's hello cannot be understood: ")
    assert "\n" not in sentence and len(sentence) < 250
    assert board.closed == 1
    with pytest.raises(BenchMisuse):
        bench.read(0.0)
    bench.close()
    board.text = good  # another board
    assert bench.open().max_voltage_v == 60.0
    bench.close()


@pytest.mark.parametrize("version", [0, 2, 255])
def test_another_version_is_told(board: ScriptedBoard, version: int) -> None:
    board.greet = lambda: board.say(ms.HelloText(version, b"whatever that version says"))
    with pytest.raises(LinkError, match=f"speaks version {version} of the link, this program version 1"):
        board.bench.open()
    assert board.closed == 1


# Resets later


@pytest.mark.parametrize("cause", ms.BootCause)
def test_the_cause_of_a_restart_is_told(board: ScriptedBoard, cause: ms.BootCause) -> None:
    bench = board.bench
    bench.open()
    bench.read(0.01)
    board.say(ms.Boot(cause))
    word = {"POWER": "power", "RESET": "reset", "BROWN_OUT": "brown-out", "WATCHDOG": "watchdog"}[cause.name]
    with pytest.raises(HardwareFault) as fault:
        bench.read(0.01)
    assert str(fault.value) == (
        f"the board has restarted ({word}): its drive stays off until it is armed anew"
    )
    bench.close()


def test_rows_before_a_restart_are_handed_over_and_those_behind_it_are_not(board: ScriptedBoard) -> None:
    bench = board.bench
    bench.open()
    board.send(bad_line.stream(1, 4))
    board.say(ms.Boot(ms.BootCause.RESET))
    board.send(bad_line.stream(10, 14))  # even if they would fit: they are of another beginning
    board.say(ms.BoardNotice(7, "latch"))
    reading = bench.read(0.01)
    assert bad_line.rows_of(list(reading.blocks)).tolist() == list(range(32)) and not reading.notices
    begun_s = board.clock.now_s()
    with pytest.raises(HardwareFault, match="reset"):
        bench.read(10.0)
    assert board.clock.now_s() == begun_s  # there is nothing to wait for


def test_a_command_in_flight_does_not_arm_a_restarted_board(board: ScriptedBoard) -> None:
    """Its answer was lost, the board restarts: asked again, the command would switch the power stage on."""
    bench = board.bench
    bench.open()
    board.obey = lambda command: board.say(ms.Boot(ms.BootCause.BROWN_OUT))
    with pytest.raises(HardwareFault, match="brown-out"):
        bench.enable()
    assert sum(isinstance(message, ms.Command) for message in board.heard) == 1


@pytest.mark.parametrize(
    ("sequences", "ticks", "restarted"),
    [
        ([0, 1, 2], [1000, 9000, 17_000], True),
        ([0, 1], [1000, 9000], False),  # two stray frames are no restart
        ([0, 1, 1001, 0, 1], [1000, 9000, 10_016_000, 1000, 9000], False),  # a good one between
        ([1001, 1002, 1003], [1000, 9000, 17_000], True),  # ahead by chance, but the clock is behind
    ],
)
def test_counters_from_the_beginning_are_a_restart(
    board: ScriptedBoard, sequences: list[int], ticks: list[int], restarted: bool
) -> None:
    def send(sequence: int, tick: int) -> None:
        head = bad_line.RowFrame(sequence, tick, 1000, sequence * 8, 0, 0, bad_line.frame(0).raw)
        board.say(ms.Rows(bad_line.CODING.pack(head)))

    def first() -> None:
        board.say(ms.HelloText(ms.VERSION, board.text))
        send(1000, 10_000_000)

    board.greet = first
    bench = board.bench
    bench.open()
    assert len(bench.read(0.01).blocks) == 1
    for sequence, tick in zip(sequences, ticks, strict=True):
        send(sequence, tick)
    if restarted:
        with pytest.raises(HardwareFault, match="counts from the beginning again: it has restarted"):
            bench.read(0.01)
    else:
        assert all(int(block.tick[0]) >= 10_000_000 for block in bench.read(0.01).blocks)
        assert bench.damaged == sum(tick < 10_000_000 for tick in ticks)
    bench.close()
