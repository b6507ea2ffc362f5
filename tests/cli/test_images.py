"""Image files as the commands take them: several at once, each told in the answer and the record."""

from __future__ import annotations

from pathlib import Path

from tests.end_to_end.bench_kit import Bench, bench

__all__ = ["bench"]


def files(folder: Path) -> list[str]:
    """A HEX file, S-records and raw bytes that fit together."""
    (folder / "tune.hex").write_text(":04003000902BB4FD60\n:00000001FF\n")
    (folder / "bell.s19").write_text("S1090100010203040506E0\nS9030000FC\n")
    (folder / "strike.bin").write_bytes(b"\x10\x20\x30")
    return [str(folder / "tune.hex"), str(folder / "bell.s19"), f"{folder / 'strike.bin'}@0x200"]


def test_several_files_are_burnt_and_verified_as_one_image(bench: Bench) -> None:
    """Each lands at its own place; answer and record name file, format, place and CRC-32 of each."""
    bench.new("27e512")
    names = files(bench.folder)
    answer = bench.job("burn", "27e512", *names)
    assert answer["exit"] == 0, answer
    assert [(one["format"], one["first"], one["bytes"]) for one in answer["images"]] == [
        ("intel-hex", 0x30, 4), ("s-record", 0x100, 6), ("raw", 0x200, 3),
    ]  # fmt: skip
    held = bench.contents()
    assert (held[0x30:0x34], held[0x100:0x106], held[0x200:0x203]) == (
        bytes.fromhex("902BB4FD"), bytes(range(1, 7)), b"\x10\x20\x30",
    )  # fmt: skip
    assert held.count(0xFF) == 65_536 - 13
    assert bench.call("record", "show", "last")["record"]["images"] == answer["images"]
    assert bench.job("verify", "27e512", *names)["exit"] == 0


def test_files_that_overlap_are_refused_before_the_rig_is_touched(bench: Bench) -> None:
    """Exit 2, both names, and no pin has seen a level."""
    bench.new("27e512")
    names = files(bench.folder)
    answer = bench.job("burn", "27e512", *names, f"{bench.folder / 'strike.bin'}@0x105")
    assert answer["exit"] == 2
    assert "bell.s19" in answer["result"]
    assert "strike.bin" in answer["result"]
    assert all(pin["max_mv"] == 0 for pin in bench.seen()["pins"].values())


def test_a_dump_is_saved_as_s_records_by_its_name(bench: Bench) -> None:
    """Read -o chime.s19 writes records that the verify reads back."""
    bench.new("27e512", contents="noise")
    out = str(bench.folder / "chime.s19")
    assert bench.job("read", "27e512", "-o", out)["exit"] == 0
    assert Path(out).read_text()[:2] == "S0"
    assert bench.job("verify", "27e512", out)["exit"] == 0
