"""Each class of error that the jobs can meet, once through the command line: exit, class, and one form."""

from __future__ import annotations

import dataclasses
import json
import re
from pathlib import Path
from typing import Any

import pytest

from pulsewright.chip.load import find
from pulsewright.cli.main import main
from pulsewright.jobs import context
from pulsewright.link import greeting
from pulsewright.sequence.types import Finding, Proof
from pulsewright.virtual.bench import Bench
from pulsewright.virtual.board import Board


@pytest.fixture(autouse=True)
def home(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """State and working folder of its own."""
    monkeypatch.setenv("PULSEWRIGHT_HOME", str(tmp_path / "state"))
    monkeypatch.chdir(tmp_path)
    return tmp_path


def answer(capsys: pytest.CaptureFixture[str], *words: str) -> dict[str, Any]:
    """The JSON answer of a command; the same facts stand on standard error, without a traceback."""
    code = main([*words, "--json"])
    shown = capsys.readouterr()
    facts: dict[str, Any] = json.loads(shown.out)
    assert facts["exit"] == code
    assert facts["result"] in shown.err
    assert "Traceback" not in shown.err
    return facts


def nameless(path: Path) -> Path:
    """The shipped definition without its ID."""
    text = find("27e512").read_text("utf-8")
    without = re.sub(r"(?ms)^\[identify\].*?(?=^\[program\])", '[identify]\nkind = "none"\n\n', text)
    path.write_text(without, "utf-8")
    return path


def test_a_damaged_bench_is_a_rig_file_mistake(capsys: pytest.CaptureFixture[str]) -> None:
    """Exit 2, with the file and what is wrong in it."""
    Path("b.bench").write_text("{}")
    facts = answer(capsys, "identify", "27e512", "--rig", "virtual:b.bench")
    assert (facts["exit"], facts["error"]) == (2, "RigFileMistake")
    assert "b.bench" in facts["result"]


def test_a_missing_image_is_a_file_mistake(capsys: pytest.CaptureFixture[str]) -> None:
    """Exit 2, with its name."""
    facts = answer(capsys, "burn", "27e512", "missing.hex", "--rig", "virtual")
    assert (facts["exit"], facts["error"]) == (2, "FileMistake")
    assert "missing.hex" in facts["result"]


def test_an_output_that_cannot_be_written_is_a_file_mistake(capsys: pytest.CaptureFixture[str]) -> None:
    """A folder that is not there: exit 2 before the chip is read at all, and no record of a job."""
    facts = answer(capsys, "read", "27e512", "--rig", "virtual", "--range", "0..255", "-o", "nowhere/saved.bin")
    assert (facts["exit"], facts["error"]) == (2, "FileMistake")
    assert not Path("state/records").exists()


def test_h9_a_part_without_id_wants_the_word(capsys: pytest.CaptureFixture[str]) -> None:
    """Exit 3, and the fresh bench's chip has seen no raised level because nothing was sent."""
    path = nameless(Path("mine.toml"))
    Path("image.bin").write_bytes(bytes(16))
    facts = answer(capsys, "burn", str(path), "image.bin", "--rig", "virtual")
    assert (facts["exit"], facts["error"]) == (3, "VouchNeeded")
    assert "--vouch" in facts["wanted"]


def test_h9_the_word_alone_does_not_open_the_gate(capsys: pytest.CaptureFixture[str]) -> None:
    """With the word but without the board's button: exit 3, nothing above the read level at any pin."""
    path = nameless(Path("mine.toml"))
    Path("image.bin").write_bytes(bytes(16))
    assert main(["bench", "new", "b.bench", "--chip", "27e512"]) == 0
    capsys.readouterr()
    facts = answer(capsys, "burn", str(path), "image.bin", "--rig", "virtual:b.bench", "--vouch", "27E512")
    assert (facts["exit"], facts["error"]) == (3, "VouchNeeded")
    assert "button" in facts["result"]
    assert max(pin["max_mv"] for pin in Bench.load("b.bench").report()["pins"].values()) <= 5_500


def test_h9_word_and_button_burn_the_part(capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> None:
    """With both, the part is burnt, and the record keeps the words."""
    monkeypatch.setattr("pulsewright.virtual.bench.Board", lambda **_: dataclasses.replace(Board(), button=True))
    path = nameless(Path("mine.toml"))
    Path("image.bin").write_bytes(bytes(16))
    main(["bench", "new", "b.bench", "--chip", "27e512"])
    words = ["burn", str(path), "image.bin", "--rig", "virtual:b.bench", "--vouch", "27E512 on the lid", "--json"]
    capsys.readouterr()
    assert main(words) == 0
    record = json.loads(Path(json.loads(capsys.readouterr().out)["record"]).read_text("utf-8"))
    assert record["vouch"] == "27E512 on the lid"
    assert bytes(Bench.load("b.bench").chip.cells[:16]) == bytes(16)


def test_a_level_the_rig_cannot_make_is_told_with_both_sums(capsys: pytest.CaptureFixture[str]) -> None:
    """14 V become 18 V, which lies between the rig's steps: exit 5, the definition's line, wanted and got."""
    text = find("27e512").read_text("utf-8")
    text = text.replace('"14.0 V", min = "13.75 V", max = "14.25 V"', '"18.0 V", min = "17.75 V", max = "18.25 V"')
    Path("mine.toml").write_text(text.replace('max = "14.5 V"', 'max = "19 V"'), "utf-8")
    facts = answer(capsys, "erase", "mine.toml", "--rig", "virtual")
    assert (facts["exit"], facts["error"]) == (5, "CannotMake")
    assert "17.75 V" in facts["wanted"]
    assert "mine.toml:" in facts["where"]


def test_a_refused_proof_is_three_with_its_findings(
    capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    """What the proof will not let pass is listed, and nothing is sent."""
    finding = Finding("H4", 200, "VPP stands without VCC", "VCC first", "VPP first")
    monkeypatch.setattr(context, "prove", lambda *_: Proof((finding,), 1, 1))
    facts = answer(capsys, "identify", "27e512", "--rig", "virtual")
    assert (facts["exit"], facts["error"]) == (3, "ProofRefused")
    assert any("H4 at 200" in fact for fact in facts["facts"])


def test_another_wire_table_is_told(capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> None:
    """A board with another fingerprint is refused before anything else: exit 5."""
    monkeypatch.setattr(greeting, "FINGERPRINT", 0x12345678)
    facts = answer(capsys, "identify", "27e512", "--rig", "virtual")
    assert (facts["exit"], facts["error"]) == (5, "OtherFirmware")


def test_a_range_outside_the_chip_is_wrong_usage(capsys: pytest.CaptureFixture[str]) -> None:
    """Exit 2 with the chip's own bounds."""
    facts = answer(capsys, "blank-check", "27e512", "--rig", "virtual", "--range", "0..64K")
    assert (facts["exit"], facts["error"]) == (2, "UsageMistake")
    assert "FFFF" in facts["wanted"]


def test_a_rail_that_stands_too_high_trips(capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> None:
    """0.6 V above its step the raised rail is measured before any switch closes: exit 5, volts wanted and got."""
    high = dataclasses.replace(Board(), raised_offset_mv=600)
    monkeypatch.setattr("pulsewright.virtual.bench.Board", lambda **_: high)
    main(["bench", "new", "b.bench", "--chip", "27e512"])
    capsys.readouterr()
    facts = answer(capsys, "identify", "27e512", "--rig", "virtual:b.bench")
    assert (facts["exit"], facts["error"]) == (5, "Tripped")
    assert "raised rail" in facts["result"]
    assert facts["wanted"] == "11.513 V to 12.499 V"
    assert abs(float(facts["got"].split()[0]) - 12.6) < 0.03  # a step of the converter is 29 mV
    assert "27e512.toml" in facts["where"]
    assert Bench.load("b.bench").report()["pins"]["24"]["max_mv"] <= 5_500
