"""Images as segments, and how they are laid on a chip."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pulsewright.errors import ImageMistake, UsageMistake
from pulsewright.image.intel_hex import parse_intel_hex
from pulsewright.image.memory import Image, Piece, Segment, fit, image_of, join_pieces

TWO = Image((Segment(0x10, b"\x01\x02"), Segment(0x20, b"\x03")), "two.hex")


@pytest.mark.parametrize(
    "wrong",
    [
        (Segment(4, b""),),
        (Segment(4, b"12"), Segment(6, b"3")),
        (Segment(4, b"12"), Segment(5, b"3")),
        (Segment(9, b"1"), Segment(4, b"2")),
    ],
    ids=["empty", "touching", "overlapping", "unsorted"],
)
def test_an_image_holds_its_promise(wrong: tuple[Segment, ...]) -> None:
    """Segments that are empty, touch, overlap or are unsorted cannot be made into an image."""
    with pytest.raises(ValueError, match="empty, unsorted, touching or overlapping"):
        Image(wrong)


def test_an_image_tells_its_extent() -> None:
    """First and last address, size without gaps, and the gaps."""
    assert (TWO.first, TWO.last, TWO.size, TWO.gaps()) == (0x10, 0x20, 3, ((0x12, 0x1F),))


def test_pieces_in_any_order_become_segments() -> None:
    """Pieces that touch become one segment, whatever their order; gaps stay."""
    image = join_pieces([Piece(7, b"C", 3), Piece(4, b"AB", 9), Piece(6, b"-", 1), Piece(20, b"Z", 2)])
    assert image.segments == (Segment(4, b"AB-C"), Segment(20, b"Z"))


def test_bytes_not_given_are_left_alone() -> None:
    """Without a fill only the image's bytes are used; the rest holds the blank value and is not used."""
    fitted = fit(TWO, 64)
    assert fitted.data == b"\xff" * 16 + b"\x01\x02" + b"\xff" * 14 + b"\x03" + b"\xff" * 31
    assert list(fitted.ranges()) == [(0x10, 0x11), (0x20, 0x20)]
    assert (fitted.given, fitted.cut, len(fitted.used)) == (3, 0, 64)


def test_blank_is_the_chips() -> None:
    """A chip that is blank at 00 gets 00 where the image gives nothing."""
    assert fit(TWO, 64, blank=0x00).data[:0x13] == bytes(16) + b"\x01\x02\x00"


def test_a_fill_uses_every_byte() -> None:
    """With a fill each byte of the chip is used, and the image's own bytes stay."""
    fitted = fit(TWO, 64, fill=0xA5)
    assert fitted.data == b"\xa5" * 16 + b"\x01\x02" + b"\xa5" * 14 + b"\x03" + b"\xa5" * 31
    assert list(fitted.ranges()) == [(0, 63)]
    assert fitted.given == 3


def test_the_origin_lands_at_chip_address_0() -> None:
    """The image address named by the origin is the chip's first."""
    fitted = fit(TWO, 64, origin=0x10)
    assert fitted.data[0:2] == b"\x01\x02"
    assert list(fitted.ranges()) == [(0, 1), (0x10, 0x10)]


def test_a_range_cuts_and_bounds_the_fill() -> None:
    """With a range only its addresses are used; what the image has elsewhere is counted as cut."""
    fitted = fit(TWO, 64, first=0x11, last=0x1F, fill=0)
    assert list(fitted.ranges()) == [(0x11, 0x1F)]
    assert fitted.data[0x10:0x13] == b"\xff\x02\x00"
    assert (fitted.given, fitted.cut) == (1, 2)


def test_a_range_takes_part_of_an_image_larger_than_the_chip() -> None:
    """Origin and a range together burn the upper half of a dump of twice the chip's size."""
    whole = image_of(bytes(range(64)))
    fitted = fit(whole, 32, origin=32, last=31)
    assert fitted.data == bytes(range(32, 64))
    assert fitted.cut == 32


def test_data_above_the_chip_is_named_with_its_line() -> None:
    """The first address that has no cell is named, with its line and the chip's size."""
    image = parse_intel_hex(":020040000102BB\n:04FFFC000102030AF1\n:00000001FF\n", "big.hex")
    with pytest.raises(ImageMistake) as caught:
        fit(image, 0xFFFE, name="27e512")
    assert caught.value.lines() == [
        "the image has data outside the chip: the first such byte is at image address FFFE",
        "  where: big.hex:2",
        (
            "  wanted: image addresses 0000 to FFFD: the chip 27e512 has 65534 bytes, "
            "and image address 0000 lands at chip address 0000"
        ),
        "  got: image addresses 0040 to FFFF, 6 bytes",
        "  try: --origin 0x40 makes the image's first byte land at chip address 0",
    ]


def test_data_below_the_origin_is_outside_too() -> None:
    """A byte below the origin has no cell."""
    with pytest.raises(ImageMistake, match="outside the chip: the first such byte is at image address 0010"):
        fit(TWO, 64, origin=0x11)


def test_a_raw_file_one_byte_too_long_is_outside() -> None:
    """A dump of the chip's size fits, one byte more does not."""
    assert fit(image_of(bytes(64)), 64).given == 64
    with pytest.raises(ImageMistake, match="first such byte is at image address 0040"):
        fit(image_of(bytes(65)), 64)


def test_an_image_that_leaves_nothing_is_an_error() -> None:
    """A range in which the image has no byte would make a job that does nothing."""
    with pytest.raises(ImageMistake, match="no byte in the wanted range"):
        fit(TWO, 64, first=0x30, last=0x3F, fill=0)


@pytest.mark.parametrize(("first", "last"), [(0, 64), (9, 8), (64, None), (-1, 5)])
def test_a_range_outside_the_chip_is_a_usage_mistake(first: int, last: int | None) -> None:
    """A range must lie in the chip, its first address not above its last."""
    with pytest.raises(UsageMistake, match="range"):
        fit(TWO, 64, first=first, last=last)


def test_a_fill_must_be_a_byte() -> None:
    """A fill above FF is a usage mistake."""
    with pytest.raises(UsageMistake, match="fill"):
        fit(TWO, 64, fill=256)


@given(
    pieces=st.lists(st.tuples(st.integers(0, 150), st.binary(max_size=20)), max_size=6),
    origin=st.integers(0, 60),
    fill=st.none() | st.integers(0, 255),
    bounds=st.none() | st.tuples(st.integers(0, 63), st.integers(0, 63)).map(sorted),
)
def test_every_cell_is_the_images_the_fills_or_left(
    pieces: list[tuple[int, bytes]], origin: int, fill: int | None, bounds: list[int] | None
) -> None:
    """Cell by cell: the image's byte, else the fill, else left blank; or the image is refused for a stated reason."""
    cells = {start + i: byte for start, data in pieces for i, byte in enumerate(data)}
    image = join_pieces(Piece(at, bytes([byte])) for at, byte in cells.items())
    first, last = bounds or (0, 63)
    inside = {at - origin: byte for at, byte in cells.items() if first <= at - origin <= last}
    refused = not inside or (bounds is None and len(inside) < len(cells))
    wanted_last = None if bounds is None else last
    if refused:
        with pytest.raises(ImageMistake):
            fit(image, 64, origin=origin, fill=fill, first=first, last=wanted_last)
        return
    fitted = fit(image, 64, origin=origin, fill=fill, first=first, last=wanted_last)
    other = 0xFF if fill is None else fill
    for at in range(64):
        bounded = first <= at <= last
        assert fitted.data[at] == (inside.get(at, other) if bounded else 0xFF)
        assert fitted.used[at] == (bounded and (fill is not None or at in inside))
    assert (fitted.given, fitted.cut) == (len(inside), len(cells) - len(inside))
