"""The framing: published check values, an independent codec, every cut, every flipped bit, every length."""

from __future__ import annotations

import itertools
import random
from binascii import crc32, crc_hqx

import plain_codec
import pytest
from cobs import cobs
from hypothesis import given, settings
from hypothesis import strategies as st

from drivers.link.framing import CHECK, LONGEST, LONGEST_MESSAGE, Unwrapper, check_of, wrap

FIXED = settings(deadline=None, derandomize=True)  # the same cases everywhere, however slow
SEQUENCE = bytes(range(1, 255))
#: Worked examples: the IP header at the beginning of Cheshire and Baker's paper, and the table of short and of
#: 254-byte packets that goes round with every implementation. Values from memory.
STUFFED = [
    ("45 00 00 2c 4c 79 00 00 40 06 4f 37", "02 45 01 04 2c 4c 79 01 05 40 06 4f 37"),
    ("00", "01 01"),
    ("00 00", "01 01 01"),
    ("00 11 00", "01 02 11 01"),
    ("11 22 00 33", "03 11 22 02 33"),
    ("11 22 33 44", "05 11 22 33 44"),
    ("11 00 00 00", "02 11 01 01 01"),
    (SEQUENCE.hex(), "ff" + SEQUENCE.hex()),
    ("00" + SEQUENCE.hex(), "01 ff" + SEQUENCE.hex()),
    (SEQUENCE.hex() + "ff", "ff" + SEQUENCE.hex() + "02 ff"),
    (SEQUENCE[1:].hex() + "ff 00", "ff" + SEQUENCE[1:].hex() + "ff 01 01"),
    (SEQUENCE[2:].hex() + "ff 00 01", "fe" + SEQUENCE[2:].hex() + "ff 02 01"),
]
MESSAGES = [b"\x01", b"\0", b"\0\0\0", bytes(300), SEQUENCE * 3, b"row \0 frame", bytes(range(256)) * 4]


@pytest.mark.parametrize(("packet", "stuffed"), STUFFED)
def test_the_published_examples_of_byte_stuffing(packet: str, stuffed: str) -> None:
    plain, wanted = bytes.fromhex(packet), bytes.fromhex(stuffed)
    assert plain_codec.stuff(plain) == wanted and plain_codec.unstuff(wanted) == plain
    assert cobs.encode(plain) == wanted and cobs.decode(wanted) == plain


def test_the_published_check_values() -> None:
    """0x29B1 for polynomial 0x1021 and start 0xFFFF, 0xCBF43926 for the CRC of IEEE 802.3, both of "123456789".

    From the published catalogues of parametrised CRC algorithms; values from memory.
    """
    assert plain_codec.crc16(b"123456789") == crc_hqx(b"123456789", 0xFFFF) == 0x29B1
    assert plain_codec.crc32(b"123456789") == crc32(b"123456789") == 0xCBF43926
    assert check_of(b"123456789") == bytes.fromhex("29b1 3926")


def test_a_message_on_the_wire_byte_by_byte() -> None:
    """Written out by hand from the format: other programs may be written from this line."""
    assert wrap(b"123456789") == bytes.fromhex("0e 313233343536373839 29b1 3926 00")


@FIXED
@given(st.binary(min_size=1, max_size=1200))
def test_the_wire_is_what_the_plain_codec_says(message: bytes) -> None:
    wired = wrap(message)
    assert wired == plain_codec.wire(message)
    assert 0 not in wired[:-1]
    assert Unwrapper().feed(wired) == [message]


@FIXED
@given(st.lists(st.binary(min_size=1, max_size=600), max_size=8), st.data())
def test_however_the_stream_is_cut(messages: list[bytes], data: st.DataObject) -> None:
    stream = b"".join(map(wrap, messages))
    cuts = sorted(data.draw(st.lists(st.integers(0, len(stream)), max_size=12)))
    unwrapper = Unwrapper()
    came = []
    for begin, end in itertools.pairwise([0, *cuts, len(stream)]):
        came += unwrapper.feed(stream[begin:end])
    assert came == messages and unwrapper.damaged == 0


@pytest.mark.parametrize("message", MESSAGES)
def test_cut_in_two_at_every_position_and_into_single_bytes(message: bytes) -> None:
    stream = wrap(message) + wrap(b"next")
    for at in range(len(stream) + 1):
        unwrapper = Unwrapper()
        assert unwrapper.feed(stream[:at]) + unwrapper.feed(stream[at:]) == [message, b"next"]
        assert unwrapper.damaged == 0
    unwrapper = Unwrapper()
    came = [one for byte in stream for one in unwrapper.feed(bytes((byte,)))]
    assert came == [message, b"next"] and unwrapper.damaged == 0


@pytest.mark.parametrize("message", MESSAGES)
def test_what_is_cut_off_is_one_damage_and_the_next_message_is_whole(message: bytes) -> None:
    wired = wrap(message)
    for length in range(len(wired) - 1):
        for tail in (wired[:length], wired[len(wired) - 1 - length : -1]):  # its beginning, its end
            unwrapper = Unwrapper()
            assert unwrapper.feed(tail + b"\0" + wrap(b"next")) == [b"next"]
            assert unwrapper.damaged == (1 if tail else 0)


def test_zeros_between_messages_are_nothing() -> None:
    unwrapper = Unwrapper()
    assert unwrapper.feed(b"") == []
    assert unwrapper.feed(b"\0\0\0" + wrap(b"one") + b"\0" * 1000 + wrap(b"two") + b"\0") == [b"one", b"two"]
    assert unwrapper.damaged == 0


def test_a_check_without_a_message_is_none() -> None:
    unwrapper = Unwrapper()
    assert unwrapper.feed(cobs.encode(check_of(b"")) + b"\0") == []
    assert unwrapper.damaged == 1
    with pytest.raises(ValueError, match="0 bytes"):
        wrap(b"")


def test_neither_check_alone_lets_a_message_pass() -> None:
    message = b"0123456789"
    for at in range(CHECK.size):
        for bit in range(8):
            wrong = bytearray(check_of(message))
            wrong[at] ^= 1 << bit
            unwrapper = Unwrapper()
            assert unwrapper.feed(cobs.encode(message + bytes(wrong)) + b"\0") == []
            assert unwrapper.damaged == 1


@pytest.mark.parametrize("message", [b"\x82" + bytes(range(108)), b"\x02\x10\0\0\0", bytes(300)])
def test_every_flipped_bit_is_found(message: bytes) -> None:
    wired = wrap(message)
    for bit in range(8 * len(wired)):
        sent = bytearray(wired)
        sent[bit // 8] ^= 1 << bit % 8
        unwrapper = Unwrapper()
        assert unwrapper.feed(bytes(sent) + b"\0" + wrap(b"next")) == [b"next"]
        assert unwrapper.damaged >= 1


def test_every_two_flipped_bits_of_a_command_are_found() -> None:
    """The message that matters most: `drive`, 12 bytes, 17 on the wire; 9180 pairs."""
    wired = wrap(bytes.fromhex("03 2a00 02 00004041 0000803f"))
    assert len(wired) == 18
    for one, other in itertools.combinations(range(8 * 17), 2):
        sent = bytearray(wired)
        sent[one // 8] ^= 1 << one % 8
        sent[other // 8] ^= 1 << other % 8
        assert Unwrapper().feed(bytes(sent)) == []


def test_every_burst_of_two_bytes_is_found() -> None:
    wired = wrap(bytes.fromhex("03 2a00 02 00004041 0000803f"))
    chance = random.Random(5)
    for at in range(len(wired) - 2):
        for _ in range(3000):
            burst = chance.randrange(1, 65536).to_bytes(2, "big")
            sent = bytearray(wired)
            sent[at] ^= burst[0]
            sent[at + 1] ^= burst[1]
            assert Unwrapper().feed(bytes(sent)) == []


# Length


@pytest.mark.parametrize("block", [1 << 20, 4096, 1000])
def test_the_longest_message_passes_and_one_more_byte_does_not(block: int) -> None:
    """However it comes: the limit is the wire's, not the reader's blocks'."""
    for stretch, good in ((wrap(b"\1" * LONGEST_MESSAGE), 1), (b"\1" * (LONGEST + 1) + b"\0", 0)):
        unwrapper = Unwrapper()
        stream = wrap(b"before") + stretch + wrap(b"after")
        cuts = range(0, len(stream), block)
        came = [one for at in cuts for one in unwrapper.feed(stream[at : at + block])]
        assert came == [b"before", *[b"\1" * LONGEST_MESSAGE] * good, b"after"]
        assert unwrapper.damaged == 1 - good


def test_a_good_message_that_is_too_long_is_refused_in_one_piece_as_in_many() -> None:
    message = bytes(range(1, 256)) * 300
    stretch = plain_codec.wire(message)
    assert len(stretch) > LONGEST
    for block in (len(stretch), 999):
        unwrapper = Unwrapper()
        for at in range(0, len(stretch), block):
            assert unwrapper.feed(stretch[at : at + block]) == []
        assert unwrapper.damaged == 1
        assert unwrapper.feed(wrap(b"after")) == [b"after"]
    with pytest.raises(ValueError, match="bytes, expected 1 to"):
        wrap(message)


def test_the_longest_message_fits_whatever_its_bytes_are() -> None:
    for byte in (b"\0", b"\1", b"\xff"):
        assert len(wrap(byte * LONGEST_MESSAGE)) <= LONGEST + 1
    with pytest.raises(ValueError, match="bytes, expected 1 to"):
        wrap(b"\1" * (LONGEST_MESSAGE + 10))


def test_noise_without_a_zero_takes_no_memory_and_is_told_once() -> None:
    unwrapper = Unwrapper()
    for _ in range(100):
        assert unwrapper.feed(b"\xaa" * 10_000) == []
        assert len(unwrapper._rest) <= LONGEST + 10_000
    assert unwrapper.damaged == 1
    assert unwrapper.feed(b"the end\0" + wrap(b"after")) == [b"after"]
    assert unwrapper.damaged == 1


def test_a_new_connection_begins_anew() -> None:
    unwrapper = Unwrapper()
    unwrapper.feed(b"noise\0" + b"\xaa" * (LONGEST + 1))
    unwrapper.forget()
    assert unwrapper.feed(wrap(b"first")) == [b"first"] and unwrapper.damaged == 0
    unwrapper.feed(wrap(b"half")[:4])
    unwrapper.forget()
    assert unwrapper.feed(wrap(b"first")) == [b"first"] and unwrapper.damaged == 0
