"""Benches: contents, faults, how a chip sits, and the file in which all of it is kept."""

from __future__ import annotations

import json
import zlib
from pathlib import Path

import pytest

from pulsewright.errors import FileMistake, RigFileMistake, UsageMistake
from pulsewright.virtual.bench import Bench
from pulsewright.virtual.judge import KEPT, Judge
from pulsewright.virtual.seat import wiring
from tests.virtual.test_models import example
from tests.virtual.waveform import A9, CE, OE, US, VCC, Bus

WORDS = 65_536


def used(bench: Bench) -> Judge:
    """The judge at the pins of a rig made of the bench."""
    bench.rig()
    assert bench.judge is not None
    return bench.judge


# ---- contents ----


def test_blank_noise_and_bytes_are_contents() -> None:
    """Blank is all erased, noise differs by its seed and repeats with it, bytes lie at the bottom of an erased chip."""
    assert bytes(Bench.fresh("27e512", "blank").chip.cells) == b"\xff" * WORDS
    first, again, other = (bytes(Bench.fresh("27e512", f"noise:{seed}").chip.cells) for seed in (3, 3, 4))
    assert first == again != other
    assert len(set(first)) == 256
    assert bytes(Bench.fresh("27e512", b"\x01\x02").chip.cells) == b"\x01\x02" + b"\xff" * (WORDS - 2)


@pytest.mark.parametrize("contents", ["nois", "noise:x", "noise:", "blank:1", b"\0" * (WORDS + 1)])
def test_other_contents_are_refused(contents: str | bytes) -> None:
    """A word that is none of them, a seed that is no number, more bytes than the chip holds."""
    with pytest.raises(UsageMistake):
        Bench.fresh("27e512", contents)


# ---- faults ----


def test_the_chips_own_faults_reach_the_chip() -> None:
    """wrong-id and stuck change what the chip on the bench answers."""
    bench = Bench.fresh("27e512", "blank", faults=["wrong-id=C2,07", "stuck=7,0x0F,0x03"])
    bus = Bus(chip=bench.chip)
    bus.up()
    assert bus.identify() == (0xC2, 0x07)
    assert bus.read(7) == 0xF3


def test_a_stuck_address_outside_the_chip_is_refused() -> None:
    """The chip has no such word."""
    with pytest.raises(UsageMistake, match="outside"):
        Bench.fresh("27e512", "blank", faults=["stuck=0x10000,1,1"])


def test_a_model_that_cannot_be_faulty_says_so(tmp_path: Path) -> None:
    """A model without take_faults cannot have a fault of its own, and can sit in any way."""
    model = tmp_path / "tiny.py"
    model.write_text(example(), "utf-8")
    Bench.new(tmp_path / "a.bench", "tiny", model=model, faults=["reversed"])
    with pytest.raises(UsageMistake, match="slow"):
        Bench.new(tmp_path / "b.bench", "tiny", model=model, faults=["slow=1,2"])
    assert not (tmp_path / "b.bench").exists()


def test_rail_sag_limits_the_rigs_raised_rail() -> None:
    """The fault lowers what the board's raised rail can give, and nothing else."""
    assert Bench.fresh("27e512", faults=["rail-sag=20"]).rig().board.raised_limit_ua == 20_000
    assert Bench.fresh("27e512").rig().board.raised_limit_ua == 50_000


# ---- how it sits ----


@pytest.mark.parametrize(
    ("package", "seat", "pairs"),
    [
        ("DIP-28", "", {3: 1, 16: 14, 17: 15, 30: 28}),
        ("DIP-24", "", {5: 1, 16: 12, 28: 24}),
        ("DIP-32", "", {1: 1, 16: 16, 32: 32}),
        ("DIP-28", "reversed", {3: 15, 16: 28, 17: 1, 30: 14}),
        ("DIP-28", "shifted", {2: 1, 15: 14, 18: 15, 31: 28}),
    ],
)
def test_pins_meet_their_positions(package: str, seat: str, pairs: dict[int, int]) -> None:
    """Bottom-aligned in 32 positions (common practice); turned, or one row up, the same pins meet others."""
    table = wiring(package, seat)
    assert {position: table[position] for position in pairs} == pairs
    assert sorted(table.values()) == list(range(1, int(package[4:]) + 1))


def test_a_chip_that_fills_the_socket_cannot_be_shifted() -> None:
    """There is no row left above a 32-pin chip."""
    with pytest.raises(UsageMistake, match="cannot sit shifted"):
        wiring("DIP-32", "shifted")


def test_an_empty_socket_drives_nothing_and_still_sees_its_pins() -> None:
    """With `absent` D shows only the rig's own pulls, and the report tells what the pins would have seen."""
    bench = Bench.fresh("27e512", b"\x00" * WORDS, faults=["absent"])
    socket = bench.rig().socket
    socket.release(100)
    socket.set_rail(100, 5_000)
    socket.set_range(100, 2, [30])
    socket.end_ramps(200_000)
    assert socket.data(200_000) != 0
    assert bench.report()["pins"][str(VCC)] == {"max_mv": 5_000}
    assert bench.report()["violations"] == []


# ---- history and file ----


def test_history_adds_up_over_rigs() -> None:
    """Pins keep the highest level of all jobs, violations are listed one job after the other and counted."""
    bench = Bench.fresh("27e512", "blank")
    for level in (12_000, 14_000, 13_000):
        bus = Bus(used(bench))
        bus.up()
        bus.raise_to({A9: level})
    report = bench.report()
    assert report["pins"][str(A9)] == {"max_mv": 14_000}
    assert [violation["rule"] for violation in report["violations"]] == ["raised window"]
    assert report["violation_count"] == 1
    assert bench.boots == 3


def test_a_second_rig_finds_the_chip_as_the_first_left_it() -> None:
    """Cells and half-done work stay, and what the chip knew of the first rig's clock does not reach the second."""
    bench = Bench.fresh("27e512", b"\x12" * WORDS, faults=["slow=100,2"])
    bus = Bus(used(bench), chip=bench.chip)
    bus.up()
    bus.erase()
    bus.set({CE: 0, OE: 0})
    bus = Bus(used(bench), chip=bench.chip)
    bus.up()
    assert bus.read(7) == 0xFF
    bus.power(3_750)
    assert bus.read(7, access=US) == 0x12
    bus.power()
    bus.erase()
    assert bench.chip.cells.count(0xFF) == WORDS


def test_a_long_history_is_cut_and_counted() -> None:
    """Over several jobs, too, the first violations are kept and all are counted."""
    bench = Bench.fresh("27e512", "blank")
    for _ in range(3):
        bus = Bus(used(bench))
        for level in range(1, 101):
            bus.set({CE: 6_000 + level})
    assert len(bench.report()["violations"]) == KEPT
    assert bench.report()["violation_count"] == 300


def test_the_report_is_what_the_command_promises() -> None:
    """Exactly the facts of `bench show --json`: hex CRC-32, pins by number as text, lists and a bool."""
    bench = Bench.fresh("27e512", b"\x00" * WORDS)
    bus = Bus(used(bench), chip=bench.chip)
    bus.up()
    bus.program(0, 0, 200 * US)
    bus.set({OE: 15_000})
    report = json.loads(json.dumps(bench.report()))
    assert report["chip"] == "27e512"
    assert report["crc32"] == f"{zlib.crc32(bytes(WORDS)):08x}"
    assert report["pins"]["22"] == {"max_mv": 15_000}
    assert set(report["violations"][0]) == {"rule", "pin", "at_us", "wanted", "got"}
    assert report["violations"][0]["rule"] == "pulse width"
    assert report["probe_wrote"] == []
    assert report["damaged"] is True
    assert any("longer than 105 us" in text for text in report["stressed"])


def test_a_bench_comes_back_as_it_was_saved(tmp_path: Path) -> None:
    """Cells, state, faults, history and the boot number survive the file."""
    path = tmp_path / "a.bench"
    bench = Bench.new(path, "27e512", contents="noise:9", faults=["slow=100,2", "rail-sag=25"])
    bus = Bus(used(bench), chip=bench.chip)
    bus.up()
    bus.program(0, 0, 200 * US)
    bus.erase()
    bench.save()
    again = Bench.load(path)
    assert again.report() == bench.report()
    assert bytes(again.chip.cells) == bytes(bench.chip.cells)
    assert again.chip.state() == bench.chip.state()
    assert (again.faults, again.boots) == (bench.faults, 1)
    bus = Bus(used(again), chip=again.chip)
    bus.up()
    bus.erase()  # the second of the two pulses that this chip needs
    assert again.chip.cells.count(0xFF) == WORDS


def test_a_bench_keeps_whose_chip_it_is(tmp_path: Path) -> None:
    """The maker goes through the file, and the chip that comes back has that maker's limits."""
    path = tmp_path / "a.bench"
    assert Bench.new(path, "27c256", maker="Atmel").chip.limits == Bench.load(path).chip.limits
    assert Bench.load(path).chip.limits.vcc_most_mv == 6_750
    assert Bench.load(path).rig().socket.chip is not None
    assert Bench.fresh("27c256", maker="atmel").chip.limits.vcc_most_mv == 6_750
    assert Bench.fresh("27c256").chip.limits.vcc_most_mv == 6_500


def test_a_bench_from_before_makers_still_loads(tmp_path: Path) -> None:
    """A bench file without the key is one of the first maker."""
    path = tmp_path / "a.bench"
    Bench.new(path, "27e512", contents="noise")
    kept = json.loads(path.read_bytes())
    del kept["maker"]
    path.write_text(json.dumps(kept), "utf-8")
    assert Bench.load(path).maker == ""


@pytest.mark.parametrize(("chip", "maker"), [("27c256", "acme"), ("27e512", "st")])
def test_a_maker_that_has_no_such_chip_is_refused(tmp_path: Path, chip: str, maker: str) -> None:
    """No bench is made of an unknown maker, or where makers make no difference."""
    with pytest.raises(UsageMistake):
        Bench.new(tmp_path / "a.bench", chip, maker=maker)
    assert not (tmp_path / "a.bench").exists()


def test_a_model_of_ones_own_takes_no_maker(tmp_path: Path) -> None:
    """--maker chooses among our models; beside --model it would be ignored, so it is refused."""
    model = tmp_path / "tiny.py"
    model.write_text(example(), "utf-8")
    with pytest.raises(UsageMistake, match="no other maker"):
        Bench.new(tmp_path / "a.bench", "tiny", model=model, maker="st")


def test_a_strangers_model_is_loaded_again(tmp_path: Path) -> None:
    """The bench keeps the path of the model's file; when that is gone, the error names it."""
    model = tmp_path / "tiny.py"
    model.write_text(example(), "utf-8")
    Bench.new(tmp_path / "a.bench", "tiny", contents="noise", model=model)
    assert len(Bench.load(tmp_path / "a.bench").chip.cells) == 16
    model.unlink()
    with pytest.raises(FileMistake, match="tiny.py"):
        Bench.load(tmp_path / "a.bench")


def test_a_new_bench_replaces_a_bench_and_nothing_else(tmp_path: Path) -> None:
    """`new` over a bench starts it afresh; over any other file it refuses and leaves that alone."""
    path = tmp_path / "a.bench"
    Bench.new(path, "27e512", contents="noise")
    Bench.new(path, "27e512", contents="blank")
    assert Bench.load(path).chip.cells.count(0xFF) == WORDS
    dump = tmp_path / "dump.bin"
    dump.write_bytes(b"\x00\xff" * 8)
    with pytest.raises(FileMistake, match="no bench"):
        Bench.new(dump, "27e512")
    assert dump.read_bytes() == b"\x00\xff" * 8


def test_no_bench_is_a_file_mistake(tmp_path: Path) -> None:
    """A path that leads nowhere is said plainly."""
    with pytest.raises(FileMistake, match="there is no bench"):
        Bench.load(tmp_path / "none.bench")


@pytest.mark.parametrize(
    ("key", "value", "named"),
    [
        ("what", "shopping list", "what"),
        ("format", 2, "format"),
        ("crc32", "00000000", "crc32"),
        ("cells", "????", "cells"),
        ("cells", "AAAA", "cells"),
        ("cells", "eJwDAAAAAAE=", "cells"),
        ("pins", {"x": [1, 2]}, "pins"),
        ("pins", {"1": [1]}, "pins"),
        ("violations", [{"rule": "x"}], "violations"),
        ("violations", [1], "violations"),
        ("state", {"begun": {"1": 5}}, "state"),
        ("state", [], "state"),
        ("boots", "one", "boots"),
        ("chip", None, "chip"),
        ("maker", 5, "maker"),
        ("faults", [5], "faults"),
    ],
)
def test_a_damaged_bench_is_one_clear_error(tmp_path: Path, key: str, value: object, named: str) -> None:
    """Whatever key is damaged, one error names the file and the key."""
    path = tmp_path / "a.bench"
    Bench.new(path, "27e512")
    kept = json.loads(path.read_bytes())
    kept[key] = value
    path.write_text(json.dumps(kept), "utf-8")
    with pytest.raises(RigFileMistake) as caught:
        Bench.load(path)
    assert named in caught.value.problems[0].where.key
    assert str(path) in caught.value.problems[0].where.file


@pytest.mark.parametrize("text", [b"", b"{", b"\xff\xfe", b"[]", b"null", b"{}"])
def test_what_is_no_bench_at_all_is_one_clear_error(tmp_path: Path, text: bytes) -> None:
    """Empty, cut, binary, or some other JSON."""
    path = tmp_path / "a.bench"
    path.write_bytes(text)
    with pytest.raises(RigFileMistake):
        Bench.load(path)


def test_all_missing_keys_are_listed_in_one_run(tmp_path: Path) -> None:
    """Two mistakes in a bench file are two problems of one error."""
    path = tmp_path / "a.bench"
    Bench.new(path, "27e512")
    kept = json.loads(path.read_bytes())
    del kept["crc32"], kept["boots"]
    path.write_text(json.dumps(kept), "utf-8")
    with pytest.raises(RigFileMistake) as caught:
        Bench.load(path)
    assert [problem.where.key for problem in caught.value.problems] == ["boots", "crc32"]
