"""The likely causes of a mismatch: a planted one is found with its numbers, and none is claimed that is not there."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from random import Random

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pulsewright.image.causes import EVIDENCE, TOLD
from pulsewright.image.compare import Comparison, compare

WANT = hashlib.shake_256(b"comparison").digest(1024)


def texts(want: bytes, got: bytes, mask: bytes | None = None) -> tuple[str, ...]:
    """The causes told, without their numbers."""
    return tuple(cause.text for cause in compare(want, got, mask).causes)


def read_from(source: Callable[[int], int]) -> bytes:
    """WANT as it would be read where each address reaches another one."""
    return bytes(WANT[source(at)] for at in range(len(WANT)))


def wrong_values(change: Callable[[int], int]) -> bytes:
    """WANT as it would be read where each value becomes another one."""
    return bytes(change(value) for value in WANT)


def bits_moved(value: int, order: tuple[int, ...]) -> int:
    """A value whose bit `at` is its old bit `order[at]`."""
    return sum((value >> bit & 1) << at for at, bit in enumerate(order))


def swapped(value: int, low: int, high: int) -> int:
    """A value with two bits exchanged."""
    order = list(range(10))
    order[low], order[high] = high, low
    return bits_moved(value, tuple(order))


def joined(value: int, low: int, high: int, *, up: bool) -> int:
    """A value with two bits that are both 1 (`up`) or both 0 where one is."""
    both = 1 << low | 1 << high
    return value if value & both in (0, both) else value | both if up else value & ~both


OPEN_D, OPEN_A = "an open or stuck data line", "an open or stuck address line"
PLANTED = [
    (wrong_values(lambda v: v | 8), f"D3 reads always 1: {OPEN_D}"),
    (wrong_values(lambda v: v & 0x7F), f"D7 reads always 0: {OPEN_D}"),
    (wrong_values(lambda v: v & 0x7F | 3), "D0 and D1 read always 1 and D7 reads always 0: open or stuck data lines"),
    (wrong_values(lambda v: swapped(v, 2, 5)), "D2 and D5 look exchanged"),
    (
        wrong_values(lambda v: bits_moved(v, (7, 6, 5, 4, 3, 2, 1, 0))),
        "data lines in another order: "
        "D0 acts as D7, D1 acts as D6, D2 acts as D5, D3 acts as D4, D4 acts as D3, D5 acts as D2, D6 acts as D1, "
        "D7 acts as D0",
    ),
    (wrong_values(lambda v: joined(v, 0, 1, up=False)), "D0 and D1 read alike, 0 wherever one is 0: shorted together"),
    (wrong_values(lambda v: joined(v, 0, 1, up=True)), "D0 and D1 read alike, 1 wherever one is 1: shorted together"),
    (wrong_values(lambda v: v ^ 0xFF), "every bit is the other way up: the image is inverted"),
    (read_from(lambda at: at & ~0x10), f"A4 reads as if always low: {OPEN_A}"),
    (read_from(lambda at: at | 0x200), f"A9 reads as if always high: {OPEN_A}"),
    (read_from(lambda at: swapped(at, 1, 7)), "A1 and A7 look exchanged"),
    (
        read_from(lambda at: bits_moved(at, (0, 1, 5, 2, 4, 3, 6, 7, 8, 9))),
        "address lines in another order: A2 acts as A3, A3 acts as A5, A5 acts as A2",
    ),
    (read_from(lambda at: joined(at, 3, 8, up=False)), "A3 and A8 read as if both low where one is: shorted together"),
    (read_from(lambda at: joined(at, 3, 8, up=True)), "A3 and A8 read as if both high where one is: shorted together"),
    (read_from(lambda at: at ^ 1), "bytes look exchanged in pairs: the image may be for the other byte order"),
    (read_from(lambda at: at ^ 512), "blocks of 512 bytes look exchanged in pairs: A9 the other way up"),
    (read_from(lambda at: at & 127), "the chip holds the first 128 bytes of the image again and again"),
    (WANT[::2] + b"\xff" * 512, "the chip holds the even bytes of the image only: one half of a pair?"),
    (b"\x00" * 5 + WANT[:-5], "the chip holds the image 5 bytes too high: check --origin"),
    (WANT[256:] + b"\x00" * 256, "the chip holds the image 256 bytes too low: check --origin"),
    (b"\xff" * 1024, "every byte reads FF: a blank chip, or outputs that never drive"),
    (b"\x00" * 1024, "every byte reads 00: no data reaches the rig"),
]


@pytest.mark.parametrize(("got", "text"), PLANTED, ids=[text.split(":")[0] for _, text in PLANTED])
def test_a_planted_cause_is_told_alone(got: bytes, text: str) -> None:
    """Exactly what was put in is named, as explaining every byte that differs, and nothing else."""
    (cause,) = compare(WANT, got).causes
    assert (cause.text, cause.full) == (text, True)
    beyond = f" that it says anything of; {cause.beyond} more differ" if cause.beyond else ""
    assert cause.line() == f"{text} (explains all {cause.of} differing bytes{beyond})"


@given(planted=st.sampled_from(PLANTED[:-2]), seed=st.integers(0, 2**32))
@settings(max_examples=40)
def test_a_few_bytes_that_do_not_fit_are_counted(planted: tuple[bytes, str], seed: int) -> None:
    """With three more bytes wrong by chance the cause is still told, with numbers no longer whole."""
    draw, harmed = Random(seed), bytearray(planted[0])
    for at in draw.sample(range(512), 3):
        harmed[at] ^= draw.randrange(1, 256)
    (cause,) = compare(WANT, bytes(harmed)).causes
    assert cause.text == planted[1]
    assert 1 <= cause.of - cause.explained + cause.against <= 3


def test_numbers_stand_beside_a_cause() -> None:
    """A byte that is wrong in another way is not explained; one that is right where it should be wrong is against."""
    got = bytearray(read_from(lambda at: swapped(at, 1, 7)))
    got[2] ^= 1
    got[4 + 2] = WANT[4 + 2]
    result = compare(WANT, bytes(got))
    (cause,) = result.causes
    assert (cause.explained, cause.of, cause.against) == (result.differing - 1, result.differing, 1)
    assert result.lines()[-1] == (
        f"A1 and A7 look exchanged (explains {cause.explained} of {cause.of} differing bytes; "
        "1 byte that is right speaks against it)"
    )


def test_a_cause_is_told_when_only_part_is_compared() -> None:
    """Bytes the image does not give do not hide a stuck address line."""
    mask = b"\x01" * 600 + bytes(424)
    assert texts(WANT, read_from(lambda at: at & ~0x10), mask) == (f"A4 reads as if always low: {OPEN_A}",)


def test_bytes_that_the_image_does_not_give_foretell_nothing() -> None:
    """A line that reaches into them is judged by the others, and how many it says nothing of is told."""
    want, mask = WANT[:600] + b"\xff" * 424, b"\x01" * 600 + bytes(424)
    (cause,) = compare(want, read_from(lambda at: at | 0x200), mask).causes
    assert cause.text == f"A9 reads as if always high: {OPEN_A}"
    assert (cause.full, cause.of <= 88, cause.beyond > 400) == (True, True, True)


def test_causes_that_explain_as_much_are_told_both() -> None:
    """55 and AA in turn, read the other way round: inverted, or exchanged in pairs; nothing tells which."""
    kinds = [cause.kind for cause in compare(b"\x55\xaa" * 64, b"\xaa\x55" * 64).causes]
    assert {"data inverted", "bytes swapped"} <= set(kinds)


@pytest.mark.parametrize("share", [2, 5, 13])
def test_what_explains_too_little_is_not_told(share: int) -> None:
    """Two lines are exchanged, but every so many bytes are wrong in another way: more than a tenth of what differs."""
    got = bytes(swapped(v, 2, 5) if at % share else v ^ 0x42 for at, v in enumerate(WANT))
    assert texts(WANT, got) == ()


def test_what_right_bytes_speak_against_is_not_told() -> None:
    """Exchanged lines explain every byte that differs, all in one part of the chip; the rest of it is right."""
    assert texts(WANT, bytes(swapped(v, 2, 5) if at < 256 else v for at, v in enumerate(WANT))) == ()
    assert texts(WANT, bytes(WANT[swapped(at, 1, 7) if at < 256 else at] for at in range(1024))) == ()


def test_a_burn_that_was_cut_is_told_with_its_place() -> None:
    """A quarter is right and the rest blank: not a blank chip, but one that is not burnt from there on."""
    (cause,) = compare(WANT, WANT[:256] + b"\xff" * 768).causes
    assert cause.kind == "not burnt"
    assert cause.text.startswith("what differs reads FF, the erased state, within 0100..03FF")


def test_the_erased_state_is_the_parts_own() -> None:
    """A part whose erased cells read 0 is blank when it reads 00."""
    assert "a blank chip" in compare(WANT, bytes(1024), blank=0).causes[0].text


def test_few_differences_give_no_cause() -> None:
    """A few wrong bytes are no evidence of a line fault."""
    want = bytes([0, 1] * 4)
    assert texts(want, b"\x00" * 8) == ()


def test_another_image_has_no_cause() -> None:
    """Noise against other noise: nothing is claimed."""
    assert texts(WANT, hashlib.shake_256(b"another").digest(1024)) == ()


@given(seed=st.integers(0, 2**32), rotten=st.integers(EVIDENCE, 1024))
def test_cells_that_rotted_by_chance_have_no_cause(seed: int, rotten: int) -> None:
    """Bits that turned anywhere, in few bytes or in all, are no line fault, no moved image, no cut burn."""
    draw, got = Random(seed), bytearray(WANT)
    for at in draw.sample(range(1024), rotten):
        got[at] ^= draw.choice([1 << draw.randrange(8), draw.randrange(1, 255)])
    assert texts(WANT, bytes(got)) == ()


cells = st.lists(st.tuples(st.integers(0, 3), st.integers(0, 3), st.booleans()), min_size=1, max_size=300)


@given(cells)
def test_numbers_of_a_cause_are_true(drawn: list[tuple[int, int, bool]]) -> None:
    """Whatever is compared, poor images too: no cause explains more than differs, or less than nine of ten."""
    want, got, mask = (bytes(column) for column in zip(*drawn, strict=True))
    result: Comparison = compare(want, got, mask)
    assert len(result.causes) <= TOLD
    for cause in result.causes:
        assert EVIDENCE <= cause.of <= result.differing
        assert cause.explained * 10 >= cause.of * 9
