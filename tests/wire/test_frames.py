"""Framing against the published vectors, and damage that must be seen."""

from __future__ import annotations

import pytest
from cobs import cobs
from crcmod.predefined import mkPredefinedCrcFun
from hypothesis import given
from hypothesis import strategies as st

from pulsewright.wire.fields import WireMistake
from pulsewright.wire.frames import FrameReader, Hello, Message, crc16, decode_frame, decode_hello, encode_frame
from pulsewright.wire.tables import ABORT_RUN, FINGERPRINT, HELLO_LENGTH, Frame

# S. Cheshire and M. Baker, "Consistent Overhead Byte Stuffing", IEEE/ACM Trans. Networking 7(2), 1999: the paper's own
# example, from memory. The others: test cases of the cobs-python repository, src/cobs/cobs/test.py, commit 64f8c21.
# The last but one and the one before it: an encyclopaedia's table, from memory.
PUBLISHED = [
    (bytes.fromhex("4500002C4C79000040064F37"), bytes.fromhex("024501042C4C79010540064F37")),
    (b"", b"\x01"),
    (b"1", b"\x021"),
    (b"12345\x006789", b"\x0612345\x056789"),
    (b"\x0012345\x006789", b"\x01\x0612345\x056789"),
    (b"12345\x006789\x00", b"\x0612345\x056789\x01"),
    (b"\x00", b"\x01\x01"),
    (b"\x00\x00", b"\x01\x01\x01"),
    (b"\x00\x00\x00", b"\x01\x01\x01\x01"),
    (bytes(range(1, 254)), b"\xfe" + bytes(range(1, 254))),
    (bytes(range(1, 255)), b"\xff" + bytes(range(1, 255))),
    (bytes(range(1, 256)), b"\xff" + bytes(range(1, 255)) + b"\x02\xff"),
    (bytes(range(256)), b"\x01\xff" + bytes(range(1, 255)) + b"\x02\xff"),
    (bytes(range(2, 256)) + b"\0", b"\xff" + bytes(range(2, 256)) + b"\x01\x01"),
    (bytes(range(3, 256)) + b"\0\x01", b"\xfe" + bytes(range(3, 256)) + b"\x02\x01"),
    (bytes.fromhex("DEAD00BEEF"), bytes.fromhex("03DEAD03BEEF")),
]
# The same test file's inputs that no decoder may take.
REFUSED = [b"\x00", b"\x05123", b"\x051234\x00", b"\x0512\x004"]


@pytest.mark.parametrize(("data", "encoded"), PUBLISHED)
def test_the_stuffing_is_the_published_one(data: bytes, encoded: bytes) -> None:
    """The library that frames go through gives the published bytes, both ways."""
    assert cobs.encode(data) == encoded
    assert cobs.decode(encoded) == data


def test_both_forms_of_a_full_group_decode() -> None:
    """254 bytes without a zero may end with a further 01 or not: the paper's own form and the short one."""
    data = bytes(range(1, 255))
    assert cobs.decode(b"\xff" + data + b"\x01") == cobs.decode(b"\xff" + data) == data


@pytest.mark.parametrize("stretch", REFUSED)
def test_what_is_not_stuffed_is_damage(stretch: bytes) -> None:
    """Inputs that the published tests refuse are refused as frames."""
    with pytest.raises(WireMistake):
        decode_frame(stretch)


def test_the_check_value_of_the_catalogue() -> None:
    """CRC-16/IBM-SDLC of "123456789" is 906E (RevEng catalogue, from memory)."""
    assert crc16(b"123456789") == 0x906E


@pytest.mark.parametrize(
    ("name", "check"),
    [("crc-ccitt-false", 0x29B1), ("xmodem", 0x31C3), ("kermit", 0x2189), ("crc-16", 0xBB3D), ("modbus", 0x4B37)],
)
def test_the_librarys_other_check_values(name: str, check: int) -> None:
    """The library agrees with the catalogue (crc-catalog, src/algorithm.rs, commit ed4ad63) where both were read."""
    assert mkPredefinedCrcFun(name)(b"123456789") == check


@given(st.binary(max_size=300))
def test_the_crc_is_that_of_its_definition(data: bytes) -> None:
    """Bit by bit: reflected polynomial 8408, begun and ended with FFFF (ISO/IEC 13239)."""
    register = 0xFFFF
    for byte in data:
        register ^= byte
        for _ in range(8):
            register = register >> 1 ^ (0x8408 if register & 1 else 0)
    assert crc16(data) == register ^ 0xFFFF


def block(permit: int, index: int, data: bytes) -> Message:
    """A frame with a long tail."""
    return Message(Frame.BLOCK, permit, index, {"first": 3, "words": 5, "data": data})


@given(st.integers(0, 0xFFFF), st.integers(0, 0xFFFF), st.binary(max_size=600))
def test_a_frame_comes_back_as_it_went(permit: int, index: int, data: bytes) -> None:
    """Whatever the data, no zero stands inside, one ends it, and decoding gives the same message."""
    message = block(permit, index, data)
    line = encode_frame(message)
    assert line.index(0) == len(line) - 1
    assert decode_frame(line[:-1]) == message


@given(st.binary(max_size=60), st.integers(0, 10_000), st.integers(1, 255))
def test_one_damaged_byte_is_seen(data: bytes, at: int, mask: int) -> None:
    """A CRC of 16 bits sees every burst of up to 8 bits in the body; in the stuffing the length or the CRC is wrong."""
    line = bytearray(encode_frame(block(1, 2, data))[:-1])
    line[at % len(line)] ^= mask
    if 0 in line:
        return
    with pytest.raises(WireMistake):
        decode_frame(bytes(line))


def test_the_reader_finds_frames_between_noise() -> None:
    """Noise costs itself only: each stretch is counted, and every whole frame is found."""
    reader = FrameReader()
    message = block(1, 2, b"words")
    found = [reader.feed(byte) for byte in b"noise\0" + encode_frame(message) + b"\xff\0" + encode_frame(message)]
    assert [item for item in found if isinstance(item, Message)] == [message, message]
    assert reader.damaged == 2


def test_a_run_of_zeros_is_the_abort_once() -> None:
    """The abort shows at the fourth zero in a row, wherever the row begins, and once for a longer one."""
    reader = FrameReader()
    for byte in bytes(ABORT_RUN - 1) + b"x" + bytes(ABORT_RUN - 1):
        reader.feed(byte)
    assert reader.aborts == 0
    for byte in bytes(ABORT_RUN * 3):
        reader.feed(byte)
    assert reader.aborts == 1


def test_an_endless_stretch_is_bounded() -> None:
    """A megabyte without a zero is kept to what a frame can be, and counted as one damage."""
    reader = FrameReader()
    for _ in range(100_000):
        reader.feed(0x55)
    stretch = reader.feed(0)
    assert isinstance(stretch, bytes)
    assert len(stretch) <= 1024
    assert reader.damaged == 1


def test_an_unknown_kind_is_damage() -> None:
    """A whole frame of a kind that is not in the table is not taken."""
    body = bytes([0x7E, 1, 0, 2, 0])
    line = cobs.encode(body + crc16(body).to_bytes(2, "little"))
    with pytest.raises(WireMistake, match="unknown frame 7E"):
        decode_frame(line)


@given(
    st.builds(
        Hello,
        *[st.integers(0, 255)] * 2,
        st.integers(0, 0xFFFF),
        *[st.integers(0, 0xFFFFFFFF)] * 2,
        *[st.integers(0, 255)] * 2,
        st.integers(0, 0xFFFF),
        st.integers(0, 0xFFFFFFFF),
        *[st.integers(0, 0xFFFF)] * 2,
    )
)
def test_a_hello_comes_back_as_it_went(hello: Hello) -> None:
    """Every field survives in 32 bytes."""
    assert len(hello.encode()) == HELLO_LENGTH
    assert decode_hello(hello.encode()) == hello


@pytest.mark.parametrize("at", range(HELLO_LENGTH))
def test_a_damaged_hello_is_none(at: int) -> None:
    """Each byte of it counts."""
    data = bytearray(Hello(1, 4, 2048, FINGERPRINT, 7).encode())
    data[at] ^= 0x40
    with pytest.raises(WireMistake):
        decode_hello(bytes(data))
