"""A comparison counts, and sorts the differences into classes."""

from __future__ import annotations

import hashlib

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pulsewright.image.compare import LISTED, Mismatch, compare

WANT = hashlib.shake_256(b"comparison").digest(1024)


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
