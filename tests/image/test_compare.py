"""A comparison counts, sorts the differences into classes, and names a line fault that explains them all."""

from __future__ import annotations

import hashlib

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pulsewright.image.compare import LISTED, Mismatch, compare

WANT = hashlib.shake_256(b"comparison").digest(1024)


def read_through(change: dict[str, int], *, stuck_high: int = 0, stuck_low: int = 0) -> bytes:
    """WANT as it would be read: address bits forced `low` or `high`, data bits stuck."""
    addresses = (at & ~change.get("low", 0) | change.get("high", 0) for at in range(len(WANT)))
    return bytes((WANT[at] | stuck_high) & ~stuck_low & 0xFF for at in addresses)


def test_equal_bytes_are_equal() -> None:
    """No difference, no hints."""
    result = compare(WANT, WANT)
    assert result.equal
    assert result.lines() == ["1024 bytes compared, all equal"]


def test_the_classes_of_mismatch() -> None:
    """A 1 for a 0 needs a burn, a 0 for a 1 needs an erase, and a byte can need both."""
    result = compare(b"\x00\xff\x0f\x55", b"\x01\x7f\xf0\x55")
    assert (result.differing, result.burn_missing, result.needs_erase) == (3, 2, 2)
    assert result.first == (Mismatch(0, 0x00, 0x01), Mismatch(1, 0xFF, 0x7F), Mismatch(2, 0x0F, 0xF0))
    assert result.lines()[:4] == [
        "3 of 4 bytes differ",
        "a burn is missing (chip 1, image 0) in 2",
        "an erase is needed (chip 0, image 1) in 2",
        "0000: wanted 00, got 01",
    ]


def test_only_masked_bytes_are_compared() -> None:
    """Where the mask is 0 a difference does not count."""
    result = compare(b"\x00\x00\x00", b"\x01\x01\x00", b"\x01\x00\x01")
    assert (result.compared, result.differing, result.first) == (2, 1, (Mismatch(0, 0, 1),))


def test_the_list_is_short_and_says_how_many_more() -> None:
    """A long list of differences ends with the number of the rest."""
    result = compare(bytes(100), b"\x01\x02" * 50)
    assert len(result.first) == LISTED
    assert f"and {100 - LISTED} more" in result.lines()


def test_lengths_must_agree() -> None:
    """Comparing runs of different lengths is the caller's mistake."""
    with pytest.raises(ValueError, match="lengths differ: 1, 2"):
        compare(b"1", b"12")


def exchanged(data: bytes, low: int, high: int) -> bytes:
    """The bytes as read with two data lines exchanged."""
    rest = 0xFF & ~(1 << low | 1 << high)
    return bytes(v & rest | (v >> low & 1) << high | (v >> high & 1) << low for v in data)


def address_exchanged(low: int, high: int) -> bytes:
    """WANT as read with two address lines exchanged."""
    rest = 1023 & ~(1 << low | 1 << high)
    return bytes(WANT[at & rest | (at >> low & 1) << high | (at >> high & 1) << low] for at in range(1024))


def address_joined(low: int, high: int, *, up: bool) -> bytes:
    """WANT as read with two address pins that touch."""
    both = 1 << low | 1 << high
    return bytes(WANT[at if at & both in (0, both) else at | both if up else at & ~both] for at in range(1024))


@pytest.mark.parametrize(
    ("got", "hint"),
    [
        (read_through({}, stuck_high=0x08), "D3 reads 1 in every byte: an open or stuck data line"),
        (read_through({}, stuck_low=0x80), "D7 reads 0 in every byte: an open or stuck data line"),
        (exchanged(WANT, 2, 5), "D2 and D5 look exchanged"),
        (
            bytes(v if v >> 1 & 1 == v & 1 else v & 0xFC for v in WANT),
            "D0 and D1 read alike, 0 wherever one is 0: shorted together",
        ),
        (
            bytes(v if v >> 1 & 1 == v & 1 else v | 0x03 for v in WANT),
            "D0 and D1 read alike, 1 wherever one is 1: shorted together",
        ),
        (read_through({"low": 0x10}), "A4 reads as if always low: an open or stuck address line"),
        (read_through({"high": 0x200}), "A9 reads as if always high: an open or stuck address line"),
        (address_exchanged(1, 7), "A1 and A7 look exchanged"),
        (address_joined(3, 8, up=False), "A3 and A8 read as if both low where one is: shorted together"),
        (address_joined(3, 8, up=True), "A3 and A8 read as if both high where one is: shorted together"),
        (
            bytes(WANT[at ^ 1] for at in range(1024)),
            "bytes look exchanged in pairs: the image may be for the other byte order",
        ),
        (b"\x00" * 5 + WANT[:-5], "the chip holds the image 5 bytes too high: check --origin"),
        (WANT[256:] + b"\x00" * 256, "the chip holds the image 256 bytes too low: check --origin"),
        (b"\xff" * 1024, "every byte reads FF: a blank chip, or outputs that never drive"),
        (b"\x00" * 1024, "every byte reads 00: no data reaches the rig"),
    ],
)
def test_a_line_fault_is_named(got: bytes, hint: str) -> None:
    """Exactly the fault that was put in is named, in words, and nothing else."""
    assert compare(WANT, got).hints == (hint,)


def test_a_fault_is_named_when_only_part_is_compared() -> None:
    """Bytes the image does not give do not hide a stuck address line."""
    mask = b"\x01" * 600 + bytes(424)
    assert compare(WANT, read_through({"low": 0x10}), mask).hints == (
        "A4 reads as if always low: an open or stuck address line",
    )


@pytest.mark.parametrize(("at", "value"), [(0, WANT[0] ^ 1), (2, WANT[2])], ids=["wrong anyway", "right though"])
def test_one_byte_that_speaks_against_it_silences_the_hint(at: int, value: int) -> None:
    """A fault that does not explain every byte, those that are right included, is not named."""
    got = bytearray(address_exchanged(1, 7))
    assert got[at] != value
    got[at] = value
    assert compare(WANT, bytes(got)).hints == ()


def test_few_differences_give_no_hint() -> None:
    """A few wrong bytes are no evidence of a line fault."""
    want = bytes([0, 1] * 4)
    assert compare(want, b"\x00" * 8).hints == ()


@given(st.lists(st.tuples(st.integers(0, 255), st.integers(0, 255), st.integers(0, 1)), max_size=40))
def test_counts_agree_with_counting_bits(cells: list[tuple[int, int, int]]) -> None:
    """The counts are those of a plain count, byte by byte."""
    want, got, mask = (bytes(column) for column in zip(*cells, strict=True)) if cells else (b"", b"", b"")
    result = compare(want, got, mask)
    pairs = [(w, g) for w, g, m in cells if m]
    bits = [[(w >> bit & 1, g >> bit & 1) for bit in range(8)] for w, g in pairs]
    assert result.compared == len(pairs)
    assert result.differing == sum(w != g for w, g in pairs)
    assert result.burn_missing == sum((0, 1) in row for row in bits)
    assert result.needs_erase == sum((1, 0) in row for row in bits)
