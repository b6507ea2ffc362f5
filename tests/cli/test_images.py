"""Image files as the commands take them: several at once, each told in the answer and the record."""

from __future__ import annotations

from pathlib import Path

import pytest

from pulsewright.cli.main import main
from tests.end_to_end.bench_kit import Bench, bench

__all__ = ["bench"]


def seen_nothing(bench: Bench) -> bool:
    """No pin has been above 0 V."""
    return all(pin["max_mv"] == 0 for pin in bench.seen()["pins"].values())


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
    verified = bench.job("verify", "27e512", *names)
    assert (verified["exit"], verified["images"]) == (0, answer["images"])
    assert bench.call("record", "show", "last")["record"]["images"] == answer["images"]


def test_files_that_overlap_are_refused_before_the_rig_is_touched(bench: Bench) -> None:
    """Exit 2, both names, and no pin has seen a level."""
    bench.new("27e512")
    names = files(bench.folder)
    answer = bench.job("burn", "27e512", *names, f"{bench.folder / 'strike.bin'}@0x105")
    assert answer["exit"] == 2
    assert "bell.s19" in answer["result"]
    assert "strike.bin" in answer["result"]
    assert seen_nothing(bench)


def test_files_may_stand_on_both_sides_of_an_option(bench: Bench) -> None:
    """All of them are images, in their order; a wrong option beside them is still told."""
    bench.new("27e512")
    tune, bell, strike = files(bench.folder)
    answer = bench.job("verify", "27e512", tune, "--range", "0x30..0x33", bell, "--accept-shortfall", strike)
    assert answer["facts"][0].startswith("a burn is missing")  # a blank chip: it came as far as to compare
    record = bench.call("record", "show", "last")["record"]
    assert [one["format"] for one in record["images"]] == ["intel-hex", "s-record", "raw"]
    wrong = bench.job("verify", "27e512", tune, "--origni", bell)
    assert (wrong["exit"], "does not know --origni" in wrong["result"]) == (2, True)
    outline = bench.call("sequence", "27e512", "burn", "--origin", "0", tune)
    assert outline["exit"] == 0


@pytest.mark.parametrize("job", [["read", "27e512", "-o", "out.bin"], ["verify", "27e512", "a.bin"]])
@pytest.mark.parametrize("bounds", ["9..1", "0..0x10000", "5", "a..b"])
def test_a_wrong_range_is_told_with_something_to_try(
    bench: Bench, monkeypatch: pytest.MonkeyPatch, job: list[str], bounds: str
) -> None:
    """Whatever the job and the slip."""
    monkeypatch.chdir(bench.folder)
    (bench.folder / "a.bin").write_bytes(b"\x01")
    bench.new("27e512")
    answer = bench.job(*job, "--range", bounds)
    assert (answer["exit"], bool(answer["hint"])) == (2, True)


@pytest.mark.parametrize(
    ("name", "content", "what"),
    [
        ("keep.toml", "[chip]\nname = 'x'\n", "readable text"),
        ("broken.bin", ":04003000902BB4FD61\n:00000001FF\n", "checksum is wrong"),
        ("broken.hex", ":040030009\n:00000001FF\n", "odd number"),
        ("cut.s19", "S1090100010203040506E0\n", "end record is missing"),
        ("empty.bin", "", "empty"),
        ("far.hex", ":020000040001F9\n:0100000001FE\n:00000001FF\n", "outside the chip"),
    ],
)
def test_what_is_no_image_is_refused_before_the_rig_is_touched(
    bench: Bench, name: str, content: str, what: str
) -> None:
    """Exit 2, the file's name, something to try, and no pin has seen a level."""
    bench.new("27e512")
    (bench.folder / name).write_text(content)
    answer = bench.job("burn", "27e512", str(bench.folder / name))
    assert (answer["exit"], what in answer["result"]) == (2, True), answer
    assert f"/{name}" in answer["where"]
    assert answer["hint"]
    assert seen_nothing(bench)


def test_the_letters_of_a_text_are_burnt_for_who_insists(bench: Bench) -> None:
    """As the refusal says: raw:FILE, for a bench's contents as well."""
    text = bench.folder / "words.txt"
    text.write_text("chimes at noon\nand at six\n")
    bench.new("27e512", contents=f"raw:{text}@0x10")
    assert bench.contents()[0x10:0x1E] == b"chimes at noon"
    answer = bench.job("verify", "27e512", f"raw:{text}@0x10")
    assert (answer["exit"], answer["images"][0]["format"]) == (0, "raw")


def test_the_screen_tells_what_each_file_was_taken_for(bench: Bench, capsys: pytest.CaptureFixture[str]) -> None:
    """A line for each file beside the answer, so that a wrong guess is seen before the job begins."""
    names = files(bench.folder)
    assert main(["verify", "27e512", *names, "--rig", "virtual"]) == 1
    said = capsys.readouterr().err.splitlines()
    assert "no hardware" in said[0]
    assert said[1].endswith("tune.hex: intel-hex, 4 bytes at 0030 to 0033, CRC-32 EBB972A4")
    assert said[3].endswith("strike.bin: raw, 3 bytes at 0200 to 0202, CRC-32 503A6E6C")  # zlib.crc32 of 10 20 30


def test_a_dump_is_saved_as_s_records_by_its_name(bench: Bench) -> None:
    """Read -o chime.s19 writes records that the verify reads back."""
    bench.new("27e512", contents="noise")
    out = str(bench.folder / "chime.s19")
    assert bench.job("read", "27e512", "-o", out)["exit"] == 0
    assert Path(out).read_text()[:2] == "S0"
    assert bench.job("verify", "27e512", out)["exit"] == 0
