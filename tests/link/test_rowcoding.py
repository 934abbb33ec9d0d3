"""Row frames on the wire: every width there and back, the layout by hand, and frames that are none."""

from __future__ import annotations

import struct

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from drivers.link.framing import LinkDamage
from drivers.link.rowcoding import WIDTHS, RowCoding
from drivers.rows import HEADER, FrameDamaged, FrameSequence, RowFrame

U16, U32 = st.integers(0, 2**16 - 1), st.integers(0, 2**32 - 1)
RANGES = {"i32": (-(2**31), 2**31 - 1), "i16": (-(2**15), 2**15 - 1), "u16": (0, 2**16 - 1)}


@st.composite
def frames(draw: st.DrawFn) -> tuple[tuple[str, ...], RowFrame]:
    widths = tuple(draw(st.lists(st.sampled_from(sorted(WIDTHS)), min_size=1, max_size=9)))
    rows = draw(st.integers(1, 30))
    columns = [draw(st.lists(st.integers(*RANGES[w]), min_size=rows, max_size=rows)) for w in widths]
    raw = np.array(columns, dtype=np.int32).T
    head = draw(st.tuples(U32, U32, st.integers(1, 2**32 - 1), U32, U16, U16))
    return widths, RowFrame(*head, raw=raw)


@settings(deadline=None, derandomize=True)
@given(frames())
def test_there_and_back(case: tuple[tuple[str, ...], RowFrame]) -> None:
    widths, frame = case
    coding = RowCoding(widths)
    payload = coding.pack(frame)
    assert len(payload) == coding.frame_bytes(len(frame.raw))
    came = coding.unpack(payload)
    assert came.raw.dtype == np.int32 and np.array_equal(came.raw, frame.raw)
    assert came.raw.flags.writeable and came.raw.flags.c_contiguous
    for name in ("sequence", "tick", "period", "first_row", "status", "overruns"):
        assert getattr(came, name) == getattr(frame, name)


def test_the_layout_by_hand() -> None:
    """From the docstrings, with `struct` alone: firmware is written from them."""
    raw = np.array([[-5, -300, 65535], [2**31 - 1, 32767, 0]], dtype=np.int32)
    payload = struct.pack("<IIIIHHBB", 7, 0xFFFFFFF0, 1000, 140, 0x101, 3, 2, 3)
    payload += struct.pack("<ihH", -5, -300, 65535) + struct.pack("<ihH", 2**31 - 1, 32767, 0)
    frame = RowFrame(7, 0xFFFFFFF0, 1000, 140, 0x101, 3, raw)
    coding = RowCoding(("i32", "i16", "u16"))
    assert coding.pack(frame) == payload
    assert np.array_equal(coding.unpack(payload).raw, raw)


def test_all_of_32_bits_is_the_frame_of_a_journal() -> None:
    raw = np.arange(12, dtype=np.int32).reshape(4, 3) - 6
    frame = RowFrame(1, 2, 3, 4, 5, 6, raw)
    assert RowCoding(("i32",) * 3).pack(frame) == frame.pack()


@pytest.mark.parametrize("widths", [("i32", "i16"), ("i16", "u16", "i16"), ("i32",) * 4])
def test_frames_of_another_size_are_damage(widths: tuple[str, ...]) -> None:
    coding = RowCoding(widths)
    raw = np.ones((5, len(widths)), dtype=np.int32)
    payload = coding.pack(RowFrame(1, 2, 1000, 4, 5, 6, raw))
    for length in range(len(payload)):
        with pytest.raises(LinkDamage):
            coding.unpack(payload[:length])
    with pytest.raises(LinkDamage):
        coding.unpack(payload + b"\0")
    for field, value in ((6, 0), (6, 4), (6, 6), (6, 255), (7, 0), (7, len(widths) + 1), (2, 0)):
        head = list(HEADER.unpack_from(payload))
        head[field] = value
        with pytest.raises(LinkDamage):
            coding.unpack(HEADER.pack(*head) + payload[HEADER.size :])
    with pytest.raises(LinkDamage):  # no rows, and rightly no samples
        coding.unpack(HEADER.pack(1, 2, 1000, 4, 5, 6, 0, len(widths)))
    with pytest.raises(LinkDamage):
        RowCoding((*widths, "i16")).unpack(payload)


@settings(deadline=None, derandomize=True)
@given(st.binary(max_size=120))
def test_noise_is_a_frame_of_this_bench_or_damage(noise: bytes) -> None:
    coding = RowCoding(("i32", "i16"))
    try:
        frame = coding.unpack(noise)
    except LinkDamage:
        return
    assert coding.pack(frame) == noise


def test_an_unknown_width_is_our_mistake() -> None:
    with pytest.raises(KeyError):
        RowCoding(("f32",))


# Placing, over many wraps of every counter


def frame_at(index: int, *, rows: int = 4, period: int = 1_000_000) -> RowFrame:
    """Frame `index` of a board whose every counter has long wrapped."""
    raw = np.full((rows, 1), index % 2**31, dtype=np.int32)
    first = index * rows
    return RowFrame(
        index & 0xFFFFFFFF, (first + 1) * period & 0xFFFFFFFF, period, first & 0xFFFFFFFF, 0, 0, raw
    )


def test_days_of_frames_are_placed_without_a_jump() -> None:
    """Ten days of rows a second apart, a clock of 1 MHz: 201 wraps of the tick, through losses of every length."""
    placed = FrameSequence()
    rng = np.random.default_rng(3)
    last = None
    index = 0
    while index < 216_000:
        block = placed.place(frame_at(index))
        assert block.tick[0] == (index * 4 + 1) * 1_000_000 and np.all(np.diff(block.tick) == 1_000_000)
        if last is not None:
            assert (block.lost_frames, block.lost_rows) == (index - last - 1, 4 * (index - last - 1))
        last, index = index, index + (1 if rng.random() < 0.9 else int(rng.integers(2, 300)))
    assert last is not None and (last * 4_000_000) >> 32 > 190


def test_sequence_and_row_counts_wrap() -> None:
    placed = FrameSequence()
    begin = 2**32 - 3
    placed.place(frame_at(begin, period=10))
    for index in (begin + 1, begin + 2, begin + 3, begin + 6):
        block = placed.place(frame_at(index, period=10))
        assert block.sequence == index
    assert (block.lost_frames, block.lost_rows) == (2, 8)
    for index in (begin + 6, begin + 5, begin):
        with pytest.raises(FrameDamaged):
            placed.place(frame_at(index, period=10))
