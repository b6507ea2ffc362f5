"""Shipped parts, and three that are nothing but a definition, the whole way: burnt, read back, clean to the judge."""

from __future__ import annotations

import pytest

from tests.end_to_end.bench_kit import MODELS, PARTS, ROOT, Bench, bench

__all__ = ["bench"]

EPROM_MAKERS = ("st", "atmel", "ti", "national", "amd")
EEPROM_MAKERS = ("atmel", "xicor", "catalyst")


@pytest.mark.parametrize("maker", EPROM_MAKERS)
def test_a_27c256_is_burnt_as_its_maker_wants(maker: str, bench: Bench) -> None:
    """The ID tells the maker; voltages, pulses and margins are that maker's, and that chip's judge is content."""
    bench.new("27c256", options=("--maker", maker))
    image = bench.image(600)
    answer = bench.job("burn", "27c256", str(image))
    assert answer["exit"] == 0, answer
    assert answer["maker"].lower() == maker
    assert bench.contents()[:600] == image.read_bytes()
    assert bench.clean()


@pytest.mark.parametrize("maker", EPROM_MAKERS)
def test_slow_cells_get_as_many_pulses_as_they_need(maker: str, bench: Bench) -> None:
    """Cells that want four pulses take them, at every maker's algorithm, the blind first pass counted."""
    bench.new("27c256", options=("--maker", maker, "--fault", "slow=20,4"))
    image = bench.image(300)
    answer = bench.job("burn", "27c256", str(image))
    assert answer["exit"] == 0, answer
    assert answer["pulses"]["worst_tries"] == 4
    assert bench.contents()[:300] == image.read_bytes()
    assert bench.clean()


def test_a_maker_that_is_named_must_be_the_chips(bench: Bench) -> None:
    """--maker Atmel over an ST chip: refused by the ID, with nothing raised but the identify level."""
    bench.new("27c256", options=("--maker", "st"))
    answer = bench.job("burn", "27c256", str(bench.image(10)), "--maker", "Atmel")
    assert (answer["exit"], answer["error"]) == (3, "IdentityRefused")
    assert bench.seen()["pins"]["1"]["max_mv"] < 6_000


def test_a_burn_that_wants_an_erase_is_told_of_the_lamp(bench: Bench) -> None:
    """A 0 that must become a 1: exit 1 without --erase, and --erase explains lamp and dose with exit 2."""
    bench.new("27c256", contents="noise")
    image = bench.image(64)
    assert bench.job("burn", "27c256", str(image))["exit"] == 1
    answer = bench.job("burn", "27c256", str(image), "--erase")
    assert answer["exit"] == 2
    assert any("W·s/cm²" in fact for fact in answer["facts"])


@pytest.mark.parametrize("maker", EEPROM_MAKERS)
def test_a_28c256_is_written_page_by_page(maker: str, bench: Bench) -> None:
    """Whatever was in it is overwritten; no pin ever stands above VCC; the last page's other words stay."""
    bench.new("28c256", contents="noise", options=("--maker", maker))
    before = bench.contents()
    image = bench.image(1_000)
    answer = bench.job("burn", "28c256", str(image), "--maker", maker)
    assert answer["exit"] == 0, answer
    assert answer["pages"] == 16
    assert bench.contents() == image.read_bytes() + before[1_000:]
    assert bench.clean()
    assert max(pin["max_mv"] for pin in bench.seen()["pins"].values()) < 5_600


def test_a_27c64_needs_only_its_definition(bench: Bench) -> None:
    """PGM pulsed behind CE, another size, another row of makers: nothing but TOML."""
    bench.new("27c64", options=("--model", str(MODELS / "m27c64.py")))
    image = bench.image(500)
    answer = bench.job("burn", str(PARTS / "27c64.toml"), str(image))
    assert answer["exit"] == 0, answer
    assert bench.contents()[:500] == image.read_bytes()
    assert bench.clean()


def test_a_39sf020_needs_only_its_definition(bench: Bench) -> None:
    """ID by command, unlock before each byte, erase of the chip, bits polled: nothing but TOML."""
    bench.new("39sf020", contents="noise", options=("--model", str(MODELS / "m39sf020.py")))
    image = bench.image(700)
    answer = bench.job("burn", str(PARTS / "39sf020.toml"), str(image), "--erase", "--no-save")
    assert answer["exit"] == 0, answer
    assert bench.contents()[:700] == image.read_bytes()
    assert set(bench.contents()[700:]) == {0xFF}
    assert bench.clean()


def test_a_2716_needs_only_its_definition(bench: Bench) -> None:
    """25 V, a pulse upwards, no ID: burnt on the operator's word with the jumper set, one pulse of 50 ms a word."""
    bench.new("2716", options=("--model", str(MODELS / "m2716.py"), "--jumper"))
    image = bench.image(20)
    answer = bench.job("burn", str(PARTS / "2716.toml"), str(image), "--vouch", "M2716-1F1 chime 3")
    assert answer["exit"] == 0, answer
    assert bench.contents()[:20] == image.read_bytes()
    assert bench.clean()
    assert 24_000 <= bench.seen()["pins"]["21"]["max_mv"] <= 26_000


def test_a_2716_wants_the_word_and_the_jumper(bench: Bench) -> None:
    """H9: without --vouch the job refuses, without the jumper the board does; VPP never rises."""
    bench.new("2716", options=("--model", str(MODELS / "m2716.py")))
    image = str(bench.image(4))
    assert bench.job("burn", str(PARTS / "2716.toml"), image)["error"] == "VouchNeeded"
    answer = bench.job("burn", str(PARTS / "2716.toml"), image, "--vouch", "M2716")
    assert (answer["exit"], answer["error"]) == (3, "VouchNeeded")
    assert "jumper" in answer["result"]
    assert bench.seen()["pins"]["21"]["max_mv"] < 6_000


def test_a_page_is_waited_for_by_its_toggle_bit_too(bench: Bench) -> None:
    """The same part polled by bit 6 instead of bit 7: written, and clean to the judge."""
    definition = (ROOT / "chipdefs" / "28c256.toml").read_text(encoding="utf-8").replace('"DQ7"', '"DQ6"')
    (bench.folder / "28c256.toml").write_text(definition, encoding="utf-8")
    bench.new("28c256", contents="noise")
    image = bench.image(130)
    answer = bench.job("burn", str(bench.folder / "28c256.toml"), str(image))
    assert (answer["exit"], answer["pages"]) == (0, 3)
    assert bench.contents()[:130] == image.read_bytes()
    assert bench.clean()


def test_a_page_that_never_ends_runs_into_its_limit(bench: Bench) -> None:
    """A chip that is busy for longer than its sheet allows: exit 4, with the page's word and what to try."""
    bench.new("28c256", contents="noise", options=("--fault", "slow=100,9"))
    answer = bench.job("burn", "28c256", str(bench.image(64)))
    assert (answer["exit"], answer["error"]) == (4, "ChipFault")
    assert "003F in time" in answer["result"]
