"""Rows known in advance, and a line that spoils their bytes: whatever comes through must be one of them.

Every sample is a function of its row's number, and the tick is too; all counters begin shortly before they wrap.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator

import numpy as np
from numpy.typing import NDArray

from drivers.link import messages as ms
from drivers.link.framing import LinkDamage, Unwrapper, wrap
from drivers.link.rowcoding import RowCoding
from drivers.rows import FrameDamaged, FrameSequence, RowBlock, RowFrame

Bytes = NDArray[np.uint8]
Mutation = Callable[[Bytes, float, np.random.Generator], Bytes]
WIDTHS = ("i32", "i16", "u16", "i16")
ROWS = 8  # a frame: 109 bytes on the wire
PERIOD = 1000
FIRST_TICK = 2**32 - 3_000_000
FIRST_SEQUENCE = 2**32 - 400
FIRST_ROW = 2**32 - 3200
FACTORS = np.array([2654435761, 40503, 60493, 31153], dtype=np.uint64)
CODING = RowCoding(WIDTHS)


def samples(rows: NDArray[np.int64]) -> NDArray[np.int32]:
    """The samples of rows, shape (n, 4): every bit of a row's number changes many of them."""
    mixed = ((rows.astype(np.uint64)[:, None] + np.uint64(1)) * FACTORS) ^ (
        rows.astype(np.uint64)[:, None] >> 3
    )
    raw = np.empty((len(rows), 4), dtype=np.int32)
    raw[:, 0] = mixed[:, 0].astype(np.uint32).view(np.int32)
    raw[:, 1] = mixed[:, 1].astype(np.uint16).view(np.int16)
    raw[:, 2] = mixed[:, 2].astype(np.uint16)
    raw[:, 3] = mixed[:, 3].astype(np.uint16).view(np.int16)
    return raw


def frame(index: int) -> RowFrame:
    first = index * ROWS
    return RowFrame(
        FIRST_SEQUENCE + index & 0xFFFFFFFF,
        FIRST_TICK + first * PERIOD & 0xFFFFFFFF,
        PERIOD,
        FIRST_ROW + first & 0xFFFFFFFF,
        index & 0x3FF,
        0,
        samples(np.arange(first, first + ROWS)),
    )


def wired(index: int) -> bytes:
    return wrap(ms.pack(ms.Rows(CODING.pack(frame(index)))))


def stream(begin: int, end: int) -> bytes:
    """Frames `begin` to `end` - 1 on the wire."""
    return b"".join(wired(index) for index in range(begin, end))


def rows_of(blocks: list[RowBlock]) -> NDArray[np.int64]:
    """Numbers of the rows in blocks, by their ticks. AssertionError if a row is not what its tick says."""
    if not blocks:
        return np.empty(0, dtype=np.int64)
    ticks = np.concatenate([block.tick for block in blocks]).astype(np.int64) - FIRST_TICK
    rows, rest = np.divmod(ticks, PERIOD)
    assert not rest.any() and rows[0] >= 0
    assert np.all(np.diff(rows) > 0)
    assert np.array_equal(np.concatenate([block.raw for block in blocks]), samples(rows))
    for block in blocks:
        index, within = divmod((int(block.tick[0]) - FIRST_TICK) // PERIOD, ROWS)
        assert within == 0 and len(block) == ROWS
        assert block.sequence == FIRST_SEQUENCE + index and block.status == index & 0x3FF
    return rows


def check_losses(blocks: list[RowBlock]) -> int:
    """Frames told as lost between the first block and the last. AssertionError if rows vanish untold."""
    rows = rows_of(blocks)
    lost = sum(block.lost_rows for block in blocks[1:])
    assert lost == (rows[-1] - rows[0] + 1) - len(rows)
    assert lost == ROWS * sum(block.lost_frames for block in blocks[1:])
    return lost // ROWS


class Listener:
    """What `drivers.board` does with bytes, without the rest of it."""

    def __init__(self) -> None:
        self.unwrapper = Unwrapper()
        self.placed = FrameSequence()
        self.blocks: list[RowBlock] = []
        self.rejected = 0

    @property
    def damaged(self) -> int:
        return self.unwrapper.damaged + self.rejected

    def feed(self, data: bytes) -> None:
        for checked in self.unwrapper.feed(data):
            try:
                message = ms.unpack(checked)
                if isinstance(message, ms.Rows):
                    self.blocks.append(self.placed.place(CODING.unpack(message.payload)))
            except (LinkDamage, FrameDamaged):
                self.rejected += 1


# What a line does to bytes; `often` is the chance per byte


def flip(sent: Bytes, often: float, rng: np.random.Generator) -> Bytes:
    at = rng.random(len(sent)) < often
    return np.where(at, sent ^ (1 << rng.integers(0, 8, len(sent))).astype(np.uint8), sent)


def replace(sent: Bytes, often: float, rng: np.random.Generator) -> Bytes:
    at = rng.random(len(sent)) < often
    return np.where(at, rng.integers(0, 256, len(sent), dtype=np.uint8), sent)


def zero(sent: Bytes, often: float, rng: np.random.Generator) -> Bytes:
    return np.where(rng.random(len(sent)) < often, np.uint8(0), sent)


def drop(sent: Bytes, often: float, rng: np.random.Generator) -> Bytes:
    return sent[rng.random(len(sent)) >= often]


def insert(sent: Bytes, often: float, rng: np.random.Generator) -> Bytes:
    at = np.flatnonzero(rng.random(len(sent)) < often)
    return np.insert(sent, at, rng.integers(0, 256, len(at), dtype=np.uint8))


def stretches(sent: Bytes, often: float, rng: np.random.Generator, longest: int) -> Iterator[tuple[int, int]]:
    """Stretches of up to `longest` bytes, one after another, none touching the next."""
    begin = 0
    while True:
        begin += 1 + int(rng.exponential(1.0 / often))
        length = int(rng.integers(1, longest + 1))
        if begin + length > len(sent):
            return
        yield begin, begin + length
        begin += length


def pieced(change: Callable[[Bytes, np.random.Generator], Bytes], longest: int) -> Mutation:
    def mutate(sent: Bytes, often: float, rng: np.random.Generator) -> Bytes:
        out, done = [], 0
        for begin, end in stretches(sent, often, rng, longest):
            out += [sent[done:begin], change(sent[begin:end], rng)]
            done = end
        return np.concatenate([*out, sent[done:]])

    return mutate


def noise(piece: Bytes, rng: np.random.Generator) -> Bytes:
    return rng.integers(0, 256, len(piece), dtype=np.uint8)


def exchanged(piece: Bytes, rng: np.random.Generator) -> Bytes:
    middle = int(rng.integers(0, len(piece) + 1))
    return np.concatenate([piece[middle:], piece[:middle]])


MUTATIONS: dict[str, tuple[Mutation, float]] = {
    "flipped bits": (flip, 1 / 400),
    "flipped bits, nearly all frames hit": (flip, 1 / 30),
    "other bytes": (replace, 1 / 300),
    "zeros": (zero, 1 / 250),
    "dropped bytes": (drop, 1 / 350),
    "inserted bytes": (insert, 1 / 350),
    "bursts": (pieced(noise, 40), 1 / 600),
    "long bursts": (pieced(noise, 1500), 1 / 3000),
    "stuck at ones": (pieced(lambda piece, rng: np.full_like(piece, 255), 300), 1 / 1500),
    "cut out": (pieced(lambda piece, rng: piece[:0], 400), 1 / 1200),
    "repeated": (pieced(lambda piece, rng: np.concatenate([piece, piece]), 330), 1 / 1500),
    "exchanged": (pieced(exchanged, 330), 1 / 1500),
    "backwards": (pieced(lambda piece, rng: piece[::-1], 200), 1 / 1500),
    "garbage between": (pieced(lambda piece, rng: np.concatenate([piece, noise(piece, rng)]), 400), 1 / 1500),
}
#: In these, frames come again or in another order: their bytes are good, it is the frame that is refused.
DISORDERED = ("repeated", "exchanged")


def spoil(data: bytes, name: str, rng: np.random.Generator, share: float = 1.0) -> bytes:
    """`data` as it arrives from a line with that trouble, in `share` of its usual density."""
    mutate, often = MUTATIONS[name]
    return mutate(np.frombuffer(data, dtype=np.uint8), often * share, rng).tobytes()


def fuzz(total: int, seed: int) -> dict[str, int]:
    """At least `total` bytes with every trouble in turn, and all at once, through a `Listener`.

    Counts of bytes, frames sent, frames that came, told as lost and damaged stretches. AssertionError for a row
    that was never sent, a loss that is not told, or damage that is not counted.
    """
    rng = np.random.default_rng(seed)
    counts = dict.fromkeys(("bytes", "frames_sent", "frames_came", "frames_lost", "damaged"), 0)
    listener = Listener()
    index = kept = 0
    while counts["bytes"] < total:
        for name in [*MUTATIONS, "everything"]:
            clean = stream(index, index + 300)
            index += 300
            if name == "everything":
                sent = clean
                for one in MUTATIONS:
                    sent = spoil(sent, one, rng, share=0.1)
            else:
                sent = spoil(clean, name, rng)
            before = listener.damaged
            for at in range(0, len(sent), 4096):
                listener.feed(sent[at : at + 4096])
            assert listener.damaged > before, f"{name}: damage was not counted"
            counts["bytes"] += len(sent)
        counts["frames_came"] += len(listener.blocks) - kept
        counts["frames_lost"] += check_losses(listener.blocks)
        listener.blocks, kept = listener.blocks[-1:], 1  # what follows must join it
    counts["frames_sent"], counts["damaged"] = index, listener.damaged
    return counts
