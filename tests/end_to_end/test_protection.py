"""Software protection of a 28C256: kept, put on, taken off, and put on again when something fails on the way."""

from __future__ import annotations

from intelhex import IntelHex

from tests.end_to_end.bench_kit import Bench, bench

__all__ = ["bench"]


def protected(bench: Bench) -> bool:
    """Whether the chip takes no page without the command: a burn that keeps its protection tells."""
    probe = IntelHex()
    probe[0x7FC0] = bench.contents()[0x7FC0] ^ 0xFF
    probe.write_hex_file(str(bench.folder / "probe.hex"))
    answer = bench.job("burn", "28c256", str(bench.folder / "probe.hex"))
    assert answer["exit"] == 0, answer
    return answer.get("protection") == "on"


def test_keep_leaves_an_open_chip_open(bench: Bench) -> None:
    """No protection command reaches a chip that takes its pages without."""
    bench.new("28c256", contents="noise")
    answer = bench.job("burn", "28c256", str(bench.image(200)))
    assert answer["exit"] == 0, answer
    assert "protection" not in answer
    assert not protected(bench)
    assert bench.clean()


def test_keep_finds_a_protected_chip_and_leaves_it_so(bench: Bench) -> None:
    """The first page does not take; the pages then go behind the command, and the chip is protected in the end."""
    bench.new("28c256", contents="noise", options=("--fault", "protected"))
    image = bench.image(200)
    answer = bench.job("burn", "28c256", str(image))
    assert (answer["exit"], answer["protection"]) == (0, "on")
    assert bench.contents()[:200] == image.read_bytes()
    assert protected(bench)
    assert bench.clean()


def test_off_takes_the_protection_off_first(bench: Bench) -> None:
    """A protected chip is written and open afterwards."""
    bench.new("28c256", contents="noise", options=("--fault", "protected"))
    image = bench.image(200)
    answer = bench.job("burn", "28c256", str(image), "--protect", "off")
    assert answer["exit"] == 0, answer
    assert bench.contents()[:200] == image.read_bytes()
    assert not protected(bench)


def test_on_protects_an_open_chip(bench: Bench) -> None:
    """Written and protected, also where no word had to be written."""
    bench.new("28c256", contents="noise")
    image = str(bench.image(200))
    assert bench.job("burn", "28c256", image)["exit"] == 0
    answer = bench.job("burn", "28c256", image, "--protect", "on")
    assert (answer["exit"], answer["protection"]) == (0, "on")
    assert protected(bench)


def test_a_page_that_fails_still_ends_protected(bench: Bench) -> None:
    """A dead byte ends the burn with exit 4; the steps that come in any case put the protection on."""
    bench.new("28c256", contents="noise", options=("--fault", "dead=0x40"))
    image = bench.folder / "image.bin"
    image.write_bytes(bytes(0x40) + bytes([bench.contents()[0x40] ^ 0xFF]) + bytes(20))
    answer = bench.job("burn", "28c256", str(image), "--protect", "on")
    assert (answer["exit"], answer["error"]) == (4, "ChipFault")
    assert "0040" in answer["result"]
    assert protected(bench)


def test_protect_switches_and_proves_the_contents(bench: Bench) -> None:
    """On and off leave every byte as it was; show says that the part does not tell."""
    bench.new("28c256", contents="noise")
    before = bench.contents()
    for wanted in ("on", "off"):
        answer = bench.job("protect", "28c256", wanted)
        assert (answer["exit"], answer["protection"]) == (0, wanted)
        assert bench.contents() == before
        assert protected(bench) is (wanted == "on")
        before = bench.contents()
    answer = bench.job("protect", "28c256", "show")
    assert (answer["exit"], answer["protection"]) == (0, "unknown")


def test_an_erase_writes_the_erased_state(bench: Bench) -> None:
    """A part without an erase of its own is written with FF, and read blank."""
    bench.new("28c256", contents="noise")
    answer = bench.job("erase", "28c256", "--range", "0x0000..0x01FF")
    assert answer["exit"] == 0, answer
    assert set(bench.contents()[:0x200]) == {0xFF}
    assert bench.contents()[0x200:] != bytes([0xFF]) * (0x8000 - 0x200)
    assert bench.clean()
