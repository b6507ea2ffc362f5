"""Reading old chips: bytes that turn with VCC, passes, and what verify says of a mismatch, from the pins up."""

from __future__ import annotations

from pathlib import Path

from tests.end_to_end.bench_kit import Bench, bench

__all__ = ["bench"]


def test_a_fading_0_is_told_with_the_vcc_at_which_it_turns(bench: Bench) -> None:
    """Exit 1, the byte with its value at each VCC, what that means; no file is written."""
    bench.new("27c256", contents="noise", options=("--fault", "weak=0x40,0xFF,5100"))
    out = bench.folder / "old.bin"
    answer = bench.job("read", "27c256", "-o", str(out), "--margins", "--passes", "2", "--range", "0..0xFF")
    assert (answer["exit"], answer["unsteady_bytes"]) == (1, 1)
    (byte,) = answer["unsteady"]
    assert (byte["address"], byte["kind"]) == (0x40, "fading")
    assert any(read["vcc_mv"] > 5_100 and read["values"] == ["FF", "FF"] for read in byte["reads"])
    assert any("burn a new chip soon" in fact for fact in answer["facts"])
    assert not out.exists()


def test_an_under_erased_1_is_told_as_one(bench: Bench) -> None:
    """It reads 0 at the low margin that its maker names."""
    bench.new("27c256", contents="noise", options=("--fault", "under-erased=0x40,0xFF,4400"))
    answer = bench.job("read", "27c256", "-o", str(bench.folder / "old.bin"), "--margins", "--range", "0..0xFF")
    assert answer["exit"] == 1
    assert [byte["kind"] for byte in answer["unsteady"]] == ["under-erased"]


def test_a_steady_chip_reads_the_same_at_every_margin(bench: Bench) -> None:
    """Exit 0, each margin named, the file written."""
    bench.new("27c256", contents="noise")
    out = bench.folder / "old.bin"
    answer = bench.job("read", "27c256", "-o", str(out), "--margins", "--passes", "2")
    assert answer["exit"] == 0
    assert len(answer["margins"]) == 2
    assert out.read_bytes() == bench.contents()


def test_verify_says_what_a_mismatch_looks_like(bench: Bench) -> None:
    """A chip whose A13 pin has no contact: counts of each class, the first words, the line that explains all."""
    bench.new("28c256", contents="noise", options=("--fault", "lifted=26"))
    image = bench.folder / "image.bin"
    image.write_bytes(bench.contents())
    answer = bench.job("verify", "28c256", str(image))
    assert answer["exit"] == 1
    facts = "\n".join(answer["facts"])
    assert "a burn is missing (chip 1, image 0) in" in facts
    assert "A13 (pin 26) reads as if always high" in facts


def test_readings_at_the_outer_vccs_hold_what_has_faded(bench: Bench) -> None:
    """A fading 0 and a slow 1: the lowest VCC has the one right, the highest the other; a file that was there stays."""
    faults = ("--fault", "weak=0x40,0xFF,5100", "--fault", "under-erased=0x60,0x0F,4500")
    bench.new("27c256", contents="noise:3", options=faults)
    right = bench.contents()[:0x100]
    out = bench.folder / "old.bin"
    out.write_bytes(b"kept")
    answer = bench.job("read", "27c256", "-o", str(out), "--margins", "--passes", "3", "--range", "0..0xFF")
    assert answer["exit"] == 1
    assert {byte["address"]: byte["kind"] for byte in answer["unsteady"]} == {0x40: "fading", 0x60: "under-erased"}
    low, usual, high = (Path(reading["file"]).read_bytes() for reading in answer["readings"])
    assert [reading["vcc_mv"] for reading in answer["readings"]] == [4_200, 5_000, 6_000]
    assert usual == right
    assert (low[0x40], high[0x60]) == (right[0x40], right[0x60])
    assert (low[0x60], high[0x40]) != (right[0x60], right[0x40])
    assert out.read_bytes() == b"kept"


def test_a_rig_without_a_margin_says_that_none_was_read(bench: Bench) -> None:
    """27e512 on the reference rig: only 5.0 V lies within VCC.read, so a byte that turns at 5.1 V is not seen."""
    bench.new("27e512", contents="noise", options=("--fault", "weak=0x40,0xFF,5100"))
    answer = bench.job("read", "27e512", "-o", str(bench.folder / "old.bin"), "--margins", "--range", "0..0xFF")
    assert (answer["exit"], answer["margins_vcc_mv"]) == (0, [])
    assert any("no margin was read" in line for line in answer["margins"])


def test_an_open_address_pin_is_told_from_a_part_of_the_chip(bench: Bench) -> None:
    """Pin 8 (A2) lifted: a read of 512 words names it, and nothing of a sound chip."""
    for options, lines in ((("--fault", "lifted=8"), ["A2"]), ((), [])):
        bench.new("27c256", contents="noise", options=options)
        out = bench.folder / "part.hex"
        answer = bench.job("read", "27c256", "-o", str(out), "--range", "0x4100..0x42FF")
        assert (answer["exit"], answer["unchanging_lines"]) == (0, lines)


def test_verify_names_lines_that_a_board_has_crossed(bench: Bench) -> None:
    """An image with A3 and A4 exchanged against the chip: the pins, and every byte that differs explained."""
    bench.new("28c256", contents="noise")
    chip = bench.contents()
    crossed = bytes(chip[at & ~0x18 | (at >> 3 & 1) << 4 | (at >> 4 & 1) << 3] for at in range(len(chip)))
    image = bench.folder / "crossed.bin"
    image.write_bytes(crossed)
    answer = bench.job("verify", "28c256", str(image))
    assert answer["exit"] == 1
    (cause,) = answer["mismatch"]["causes"]
    assert cause["text"] == "A3 (pin 7) and A4 (pin 6) look exchanged"
    assert cause["explained"] == answer["mismatch"]["differing"]


def test_a_blank_check_counts_from_the_pins_up(bench: Bench) -> None:
    """Three words burnt into a blank chip: exit 1, their number and their values."""
    image = bench.folder / "three.bin"
    image.write_bytes(b"\xff" * 16 + b"\x12\x34\x56" + b"\xff" * (65536 - 19))
    bench.new("27e512", contents=str(image))
    answer = bench.job("blank-check", "27e512")
    assert (answer["exit"], answer["not_blank_words"]) == (1, 3)
    assert [(word["address"], word["got"]) for word in answer["not_blank"]] == [(16, "12"), (17, "34"), (18, "56")]
    assert bench.clean()
