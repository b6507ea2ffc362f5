"""A maker that is named: the fresh virtual chip is that maker's, and the job goes by that row."""

from __future__ import annotations

from pathlib import Path

import pytest

from tests.end_to_end.bench_kit import Bench, bench

__all__ = ["bench"]


@pytest.mark.parametrize("maker", ["Atmel", "amd", "ST"])
def test_a_fresh_virtual_chip_is_the_makers(maker: str, bench: Bench) -> None:
    """--rig virtual --maker NAME seats a chip of that maker, whatever the case of the letters."""
    answer = bench.call("identify", "27c256", "--rig", "virtual", "--maker", maker)
    assert answer["exit"] == 0
    assert answer["maker"].lower() == maker.lower()


def test_a_burn_goes_by_the_makers_own_row(bench: Bench) -> None:
    """A fresh Atmel chip is seated and burnt as Atmel says, and another maker's chip is refused by its ID."""
    zeros = bench.folder / "zeros.bin"
    zeros.write_bytes(bytes(40))
    words = ("burn", "27c256", str(zeros), "--range", "0..39")
    answer = bench.call(*words, "--rig", "virtual", "--maker", "ATMEL")
    assert (answer["exit"], answer["id"], answer["burnt_words"]) == (0, "1E 8C", 40)
    bench.new("27c256", options=("--maker", "ST"))
    answer = bench.job(*words, "--maker", "atmel")
    assert (answer["exit"], answer["error"]) == (3, "IdentityRefused")


def test_sequences_that_differ_by_maker_want_one(bench: Bench) -> None:
    """`sequence 27c256 burn` without a maker is told to name one; with it every sequence is accepted by the proof."""
    answer = bench.call("sequence", "27c256", "burn")
    assert answer["exit"] == 2
    assert "Atmel" in answer["wanted"]
    assert bench.call("sequence", "27c256", "burn", "--maker", "Atmel")["exit"] == 0




def test_a_margin_that_the_rig_cannot_make_is_a_shortfall(bench: Bench) -> None:
    """Refused with exit 3 and the pass named; --accept-shortfall verifies without it, and the record keeps that."""
    definition = Path("chipdefs/28c256.toml").read_text(encoding="utf-8")
    level = 'VCC.margin = { typ = "4.6 V", min = "4.55 V", max = "4.65 V" }'
    mode = 'margin = { CE = "L", OE = "L", WE = "H", VCC = "VCC.margin", D = "out" }'
    definition = definition.replace("[maxima] #", f"{level}\n\n[maxima] #").replace("[timing]", f"{mode}\n\n[timing]")
    definition += '\n[verify]\npasses = [{ mode = "margin" }]\n'
    path = bench.folder / "28c256.toml"
    path.write_text(definition, encoding="utf-8")
    bench.new("28c256")
    image = str(bench.image(70))
    answer = bench.job("burn", str(path), image)
    assert (answer["exit"], answer["error"]) == (3, "ShortfallRefused")
    assert any("margin at VCC.margin 4.6 V" in fact for fact in answer["facts"])
    assert set(bench.contents()) == {0xFF}
    answer = bench.job("burn", str(path), image, "--accept-shortfall")
    assert answer["exit"] == 0, answer
    assert "VCC.margin" in bench.call("record", "show", "last")["record"]["shortfall"][0]
