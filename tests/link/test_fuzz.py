"""Ten million spoilt bytes: no wrong row, no untold loss, no exception. Seeds are fixed."""

from __future__ import annotations

import random

import bad_line
import numpy as np
import pytest
from scripted_board import ScriptedBoard, hello_for

from drivers.board import BoardBench
from drivers.channels import Channel, ChannelTable
from drivers.contract import Notice
from drivers.errors import HardwareFault, LinkError
from drivers.link import messages as ms
from drivers.link.framing import Unwrapper, wrap
from drivers.rows import RowBlock

CHANNELS = ChannelTable(tuple(Channel(f"c{index}", "other", "1", 1.0) for index in range(4)))


def test_the_rows_sent_come_through_a_good_line() -> None:
    listener = bad_line.Listener()
    listener.feed(bad_line.stream(0, 500))
    assert bad_line.rows_of(listener.blocks).tolist() == list(range(4000))
    assert bad_line.check_losses(listener.blocks) == listener.damaged == 0


def test_a_wrong_row_would_be_noticed() -> None:
    """The check itself: one bit of one sample, one tick, one missing loss."""
    listener = bad_line.Listener()
    listener.feed(bad_line.stream(0, 20) + bad_line.stream(25, 40))
    assert bad_line.check_losses(listener.blocks) == 5
    untold = [*listener.blocks[:10], *listener.blocks[11:]]
    with pytest.raises(AssertionError):
        bad_line.check_losses(untold)
    listener.blocks[7].raw[3, 2] ^= 1
    with pytest.raises(AssertionError):
        bad_line.rows_of(listener.blocks)
    listener.blocks[7].raw[3, 2] ^= 1
    listener.blocks[-1].tick[2] += 1
    with pytest.raises(AssertionError):
        bad_line.rows_of(listener.blocks)


def test_ten_million_spoilt_bytes() -> None:
    counts = bad_line.fuzz(10_000_000, seed=20)
    assert counts["bytes"] >= 10_000_000
    assert counts["frames_came"] > 0.6 * counts["frames_sent"]
    assert counts["frames_lost"] > 0.2 * counts["frames_sent"]
    # All that were sent came or are told as lost, but for those before the first and after the last.
    untold = counts["frames_sent"] - counts["frames_came"] - counts["frames_lost"]
    assert 0 <= untold < 20


@pytest.mark.parametrize("seed", range(5))
def test_exactly_the_frames_that_were_hit_are_missing(seed: int) -> None:
    rng = np.random.default_rng(seed)
    wires = [bytearray(bad_line.wired(index)) for index in range(2000)]
    hit = set(rng.choice(1999, 600, replace=False).tolist())
    ends = set(rng.choice(1999, 100, replace=False).tolist())
    for index in hit:
        wires[index][int(rng.integers(0, len(wires[index]) - 1))] ^= 1 << int(rng.integers(0, 8))
    for index in ends:
        wires[index][-1] ^= 1 << int(rng.integers(0, 8))  # the zero: this frame and the next are one stretch
    listener = bad_line.Listener()
    listener.feed(b"".join(map(bytes, wires)))
    missing = hit | ends | {index + 1 for index in ends}
    came = bad_line.rows_of(listener.blocks)[:: bad_line.ROWS] // bad_line.ROWS
    assert came.tolist() == [index for index in range(2000) if index not in missing]
    assert listener.damaged >= len(missing) - len(ends)


def test_random_bytes_bring_nothing() -> None:
    rng = np.random.default_rng(8)
    listener = bad_line.Listener()
    for _ in range(40):
        listener.feed(rng.bytes(65_536))
    stretches = np.random.default_rng(8)
    everything = b"".join(stretches.bytes(65_536) for _ in range(40))
    assert not listener.blocks
    assert listener.damaged == sum(1 for piece in everything.split(b"\0")[:-1] if piece)


def test_no_command_comes_out_changed() -> None:
    """The other direction: what a board would obey is what was sent, whatever the line does."""
    chance = random.Random(4)
    sent = []
    for number in range(20_000):
        choice = chance.randrange(4)
        if choice == 0:
            sent.append(ms.pack(ms.Heartbeat(number * 20_000)))
        elif choice == 1:
            sent.append(ms.pack(ms.Command(number, ms.Code.DRIVE, (chance.uniform(0, 24), 2.0))))
        else:
            code = chance.choice([ms.Code.ENABLE, ms.Code.LOCK, ms.Code.UNLOCK])
            sent.append(ms.pack(ms.Command(number, code)))
    known = set(sent)
    clean = b"".join(map(wrap, sent))
    rng = np.random.default_rng(4)
    for name in bad_line.MUTATIONS:
        unwrapper = Unwrapper()
        came = unwrapper.feed(bad_line.spoil(clean, name, rng, share=4.0))
        assert 0.01 * len(sent) < len(came) and unwrapper.damaged > 0
        assert known.issuperset(came), name


# Through the driver itself


def opened(board: ScriptedBoard) -> BoardBench:
    """A bench whose first frame has come."""

    def greet() -> None:
        board.say(ms.HelloText(ms.VERSION, board.text))
        board.send(bad_line.wired(0))

    board.greet = greet
    bench = board.bench
    bench.open()
    return bench


def read_all(bench: BoardBench) -> tuple[list[RowBlock], list[Notice]]:
    blocks: list[RowBlock] = []
    notices: list[Notice] = []
    silent = 0
    while silent < 3:
        reading = bench.read(0.01)
        assert len(reading.frames) == len(reading.blocks)
        blocks += reading.blocks
        notices += reading.notices
        silent = 0 if reading.blocks or reading.notices else silent + 1
    return blocks, notices


@pytest.mark.parametrize("name", bad_line.MUTATIONS)
def test_the_driver_on_a_spoilt_line(name: str) -> None:
    rng = np.random.default_rng(9)
    chance = random.Random(9)
    for block in (5000, 777, 64):
        board = ScriptedBoard(hello_for(CHANNELS), bad_line.WIDTHS)
        bench = opened(board)
        board.block = block
        board.send(bad_line.spoil(bad_line.stream(1, 600), name, rng) + bytes(1) + bad_line.stream(600, 610))
        blocks, notices = [], []
        try:
            while not (blocks and blocks[-1].sequence == bad_line.FIRST_SEQUENCE + 609):
                more = read_all(bench)
                blocks += more[0]
                notices += more[1]
                assert more[0], "the last frames never came"
                board.block = 1 + chance.randrange(2000)
        except HardwareFault as fault:
            # Many frames in the order of long ago are what a restarted board sends.
            assert name in bad_line.DISORDERED and "it has restarted" in str(fault)
        lost = bad_line.check_losses(blocks) if blocks else 0
        told = sum(int(str(one.data["stretches"])) for one in notices)
        assert {one.kind for one in notices} <= {"damaged_bytes"}
        assert lost > 0 and bench.damaged > 0
        assert 0 <= bench.damaged - told <= (0 if name not in bad_line.DISORDERED else bench.damaged)
        bench.close()


def test_good_check_sums_around_nonsense() -> None:
    """A board with faulty firmware: messages of random bytes, well wrapped, of every kind. No exception leaves the
    driver but the errors of a bench."""
    chance = random.Random(77)
    kinds = [0x01, 0x02, 0x03, 0x82, 0x82, 0x82, 0x83, 0x84, 0x86]
    board = ScriptedBoard(hello_for(CHANNELS), bad_line.WIDTHS)
    bench = opened(board)
    head = ms.pack(ms.Rows(bad_line.CODING.pack(bad_line.frame(1))))
    faults = came = newest = 0
    for _ in range(20_000):
        kind = chance.choice(kinds)
        message = bytes((kind,)) + chance.randbytes(chance.randrange(40))
        if kind == 0x82 and chance.random() < 0.7:  # a frame of the right size whose header is nonsense
            at = chance.randrange(1, 23)
            message = head[:at] + chance.randbytes(1) + head[at + 1 :]
        board.send(wrap(message))
        try:
            for block in bench.read(0.0).blocks:
                came += 1
                assert np.all(np.diff(block.tick.astype(np.int64)) == bad_line.PERIOD)
                assert int(block.tick[0]) > newest
                newest = int(block.tick[-1])
        except HardwareFault:
            faults += 1
            bench.close()
            bench = opened(board)
            newest = 0
    assert bench.damaged > 0 and faults > 0 and came > 100
    bench.close()


def test_nonsense_from_the_beginning_is_no_board() -> None:
    rng = np.random.default_rng(6)
    board = ScriptedBoard(hello_for(CHANNELS), bad_line.WIDTHS)
    board.greet = lambda: board.send(rng.bytes(3000))
    with pytest.raises(LinkError, match="no board answered"):
        board.bench.open()
    assert board.closed == 1


@pytest.mark.parametrize("seed", range(3))
def test_answers_through_noise_are_those_of_their_commands(seed: int) -> None:
    """Every value of an answer comes from its own command; what is lost too often is a timeout."""
    rng = np.random.default_rng(seed)
    board = ScriptedBoard(hello_for(CHANNELS), bad_line.WIDTHS)
    bench = opened(board)
    frames = iter(range(1, 100_000))

    def obey(command: ms.Command) -> None:
        answer = ms.Answer(command.number, ms.Result.DONE, bad_line.FIRST_TICK, command.number * 7)
        clean = bad_line.wired(next(frames)) + wrap(ms.pack(answer)) + bad_line.wired(next(frames))
        board.send(bad_line.spoil(clean, "flipped bits", rng, share=2.0))

    board.obey = obey
    done = timeouts = 0
    for _ in range(400):
        try:
            tick, value = bench.unlock()
        except LinkError:
            timeouts += 1
            continue
        asked = [one for one in board.heard if isinstance(one, ms.Command)][-1]
        assert value == asked.number * 7 and tick == bad_line.FIRST_TICK
        done += 1
    assert done > 390 and done + timeouts == 400
    blocks, _ = read_all(bench)
    assert bad_line.check_losses(blocks) > 0
