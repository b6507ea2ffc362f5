"""Reading old chips: bytes that turn with VCC, passes, and what verify says of a mismatch, from the pins up."""

from __future__ import annotations

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
