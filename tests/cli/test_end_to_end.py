"""Whole jobs through the command line, on the virtual rig with a kept bench; what the pins saw, the bench tells."""

from __future__ import annotations

import json
import signal
import subprocess
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import pexpect
import pytest

from pulsewright.cli.main import main
from pulsewright.link.inprocess import InProcess

WORDS = 65536
READ_MAX_MV = 5_500  # OE/VPP of a chip that is not known to be the part: the read level at most
IDENTIFY_MAX_MV = 12_500  # A9 there: the identify level of the mode table [S37; window from memory]


@pytest.fixture(autouse=True)
def home(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """State and working folder of its own."""
    monkeypatch.setenv("PULSEWRIGHT_HOME", str(tmp_path / "state"))
    monkeypatch.chdir(tmp_path)
    return tmp_path


class Desk:
    """Runs commands and gives their JSON answers."""

    def __init__(self, capsys: pytest.CaptureFixture[str]) -> None:
        self._capsys = capsys
        self.err = ""

    def __call__(self, *words: str) -> dict[str, Any]:
        """The one JSON object of a command; its `exit` is the exit code, and no traceback is shown."""
        code = main([*words, "--json"])
        shown = self._capsys.readouterr()
        self.err = shown.err
        assert "Traceback" not in shown.err
        answer: dict[str, Any] = json.loads(shown.out)
        assert answer["exit"] == code, answer
        assert answer["result"]
        return answer

    def bench(self, *more: str, chip: str = "27e512") -> None:
        """A new bench `b.bench`."""
        assert self("bench", "new", "b.bench", "--chip", chip, *more)["exit"] == 0

    def seen(self, pin: int) -> int:
        """The highest level a pin has seen, mV; 0 for a pin that saw nothing."""
        pins = self("bench", "show", "b.bench")["pins"]
        return int(pins.get(str(pin), {"max_mv": 0})["max_mv"])

    def clean(self) -> None:
        """The bench saw no limit of the data sheet broken, and the chip is whole."""
        report = self("bench", "show", "b.bench")
        assert report["violations"] == []
        assert report["damaged"] is False

    def contents(self) -> bytes:
        """What the chip holds now."""
        assert self("bench", "show", "b.bench", "--save", "now.bin")["exit"] == 0
        return Path("now.bin").read_bytes()


@pytest.fixture
def desk(capsys: pytest.CaptureFixture[str]) -> Desk:
    """A desk."""
    return Desk(capsys)


def image(name: str = "image.bin", words: int = 2048, step: int = 7) -> Path:
    """An image file with every byte value in it."""
    path = Path(name)
    path.write_bytes(bytes((at * step + (at >> 8)) & 0xFF for at in range(words)))
    return path


RIG = ("--rig", "virtual:b.bench")


def test_identify_says_the_maker_and_that_no_hardware_is_touched(desk: Desk) -> None:
    """A good chip: ID bytes, the row, exit 0; the first line on standard error tells of the virtual rig."""
    desk.bench()
    answer = desk("identify", "27e512", *RIG)
    assert (answer["exit"], answer["id"], answer["maker"]) == (0, "DA 08", "DA")
    assert desk.err.splitlines()[0] == "virtual rig: no hardware is touched"
    desk.clean()


def test_read_gives_what_the_bench_holds(desk: Desk) -> None:
    """Two passes agree, and the file is the chip's contents byte for byte."""
    desk.bench("--contents", "noise:5")
    answer = desk("read", "27e512", *RIG, "-o", "saved.bin", "--passes", "2")
    assert answer["exit"] == 0
    assert Path("saved.bin").read_bytes() == desk.contents()
    assert answer["crc32"].lower() == desk("bench", "show", "b.bench")["crc32"].lower()
    desk.clean()


def test_burn_with_erase_then_verify_then_burn_again(desk: Desk) -> None:
    """A chip that was used before: saved, erased, burnt, verified; the second burn finds nothing to do."""
    desk.bench("--contents", "noise:3")
    before = desk.contents()
    path = image()
    answer = desk("burn", "27e512", str(path), *RIG, "--erase")
    assert answer["exit"] == 0
    assert answer["erased"] is True
    assert answer["erase_pulses"] == 1
    assert Path(answer["saved"]).read_bytes() == before
    data = path.read_bytes()
    assert desk.contents() == data + b"\xff" * (WORDS - len(data))
    assert desk("verify", "27e512", str(path), *RIG)["exit"] == 0
    again = desk("burn", "27e512", str(path), *RIG, "--erase")
    assert (again["exit"], again["burnt_words"], again["erased"]) == (0, 0, False)
    desk.clean()


def test_burn_without_the_erase_it_needs_writes_nothing(desk: Desk) -> None:
    """Exit 1, and the chip holds what it held."""
    desk.bench("--contents", "noise:3")
    before = desk.contents()
    assert desk("burn", "27e512", str(image()), *RIG)["exit"] == 1
    assert desk.contents() == before


def test_erase_then_blank_check(desk: Desk) -> None:
    """Erase proves the chip blank at 3.75 V; blank-check agrees, and did not before."""
    desk.bench("--contents", "noise:1")
    assert desk("blank-check", "27e512", *RIG)["exit"] == 1
    answer = desk("erase", "27e512", *RIG)
    assert answer["result"] == "erased in 1 of 20 pulses; 65536 words read FF at VCC 3.75 V"
    assert desk("blank-check", "27e512", *RIG)["exit"] == 0
    desk.clean()


def test_verify_of_another_image_tells_the_classes(desk: Desk) -> None:
    """Exit 1, and counts of missing burns and needed erases."""
    desk.bench("--contents", str(image()))
    answer = desk("verify", "27e512", str(image("other.bin", step=11)), *RIG)
    assert (answer["exit"], answer["error"]) == (1, "Difference")
    assert any("an erase is needed" in fact for fact in answer["facts"])


@pytest.mark.parametrize("fault", ["absent", "reversed", "shifted", "wrong-id=01,02"])
@pytest.mark.parametrize("job", ["identify", "burn", "erase"])
def test_a_chip_that_is_not_what_it_should_be_gets_no_raised_level(desk: Desk, fault: str, job: str) -> None:
    """Exit 3; OE/VPP (pin 22) never above 5.5 V and A9 (pin 24) never above 12.5 V, by the bench's own word."""
    desk.bench("--contents", "noise:2", "--fault", fault)
    before = desk.contents()
    words = {"burn": ["burn", "27e512", str(image()), "--erase"], "erase": ["erase", "27e512"]}
    answer = desk(*words.get(job, [job, "27e512"]), *RIG)
    assert answer["exit"] == 3
    assert answer["error"] == ("IdentityRefused" if fault.startswith("wrong-id") else "SeatingRefused")
    assert desk.seen(22) <= READ_MAX_MV
    assert desk.seen(24) <= (IDENTIFY_MAX_MV if fault.startswith("wrong-id") else READ_MAX_MV)
    assert desk.contents() == before
    assert desk("bench", "show", "b.bench")["damaged"] is False


def test_the_levels_were_measured_at_all(desk: Desk) -> None:
    """The same question on a good chip finds the raised levels, so that a low answer means something."""
    desk.bench("--contents", "noise:2")
    assert desk("erase", "27e512", *RIG)["exit"] == 0
    assert 13_500 < desk.seen(22) <= 14_500
    assert 13_500 < desk.seen(24) <= 14_500


def test_a_slow_chip_takes_more_pulses(desk: Desk) -> None:
    """Half of the cells need three pulses: erased in 3 of 20, burnt with up to 3 tries a word."""
    desk.bench("--contents", "noise:4", "--fault", "slow=50,3")
    answer = desk("burn", "27e512", str(image()), *RIG, "--erase")
    assert answer["exit"] == 0
    assert answer["erase_pulses"] == 3
    assert answer["pulses"]["worst_tries"] == 3
    assert set(answer["pulses"]["by_tries"]) <= {"1", "2", "3"}
    desk.clean()


def test_a_stuck_bit_is_the_chips_fault(desk: Desk) -> None:
    """A bit that reads 0 for ever will not erase: exit 4, the address, and 20 of 20 pulses."""
    desk.bench("--fault", "stuck=0xA123,0x10,0x00")
    answer = desk("erase", "27e512", *RIG)
    assert (answer["exit"], answer["error"]) == (4, "ChipFault")
    assert "A123" in answer["got"]
    assert "20 of 20" in answer["result"]


def test_a_bit_that_will_not_program_is_the_chips_fault(desk: Desk) -> None:
    """A bit that reads 1 for ever: exit 4 with word, wanted, got and tries; it says how far the burn came."""
    desk.bench("--fault", "stuck=0x0123,0x10,0x10")
    Path("zeros.bin").write_bytes(bytes(0x200))
    answer = desk("burn", "27e512", "zeros.bin", *RIG)
    assert (answer["exit"], answer["error"]) == (4, "ChipFault")
    assert "0123" in answer["result"]
    assert "25 of 25" in answer["result"]
    assert (answer["wanted"], answer["got"]) == ("00", "10")
    assert any("words burnt before that" in fact for fact in answer["facts"])
    desk.clean()


def test_a_rail_that_gives_nothing_changes_nothing(desk: Desk) -> None:
    """A raised rail without current trips before the gate: exit 5, the chip is whole and holds what it held."""
    desk.bench("--contents", "noise:4", "--fault", "rail-sag=0")
    before = desk.contents()
    answer = desk("erase", "27e512", *RIG)
    assert (answer["exit"], answer["error"]) == (5, "Tripped")
    assert "raised rail" in answer["result"]
    assert desk.contents() == before
    assert desk("bench", "show", "b.bench")["damaged"] is False


def test_a_job_leaves_a_record_that_can_be_listed_and_shown(desk: Desk) -> None:
    """Rails as measured in mV, times of both clocks, pulses, rig: what the record is for."""
    desk.bench("--contents", "noise:4")
    answer = desk("burn", "27e512", str(image()), *RIG, "--erase")
    listed = desk("record", "list")["records"]
    assert [row["job"] for row in listed] == ["burn"]
    record = desk("record", "show", "last")["record"]
    assert Path(answer["record"]).name == listed[0]["record"]
    assert (record["format"], record["exit"], record["id"]) == (1, 0, "DA 08")
    erase = next(one for one in record["sequences"] if one["title"].startswith("erase"))
    raised = [row["mv"] for row in erase["readings"] if row["what"] == "position 24" and row["mv"] > 6000]
    assert raised
    assert all(13_750 <= mv <= 14_250 for mv in raised)
    assert erase["rig_us"] > 100_000
    assert record["pulses"]["words"] == answer["burnt_words"]


@pytest.mark.parametrize("name", ["virtual"])
def test_a_fresh_virtual_rig_was_used_before(desk: Desk, name: str) -> None:
    """`virtual` has a chip with contents, so a burn needs --erase, and nothing of it is kept."""
    assert desk("burn", "27e512", str(image()), "--rig", name)["exit"] == 1
    assert desk("burn", "27e512", str(image()), "--rig", name, "--erase")["exit"] == 0
    assert desk("burn", "27e512", str(image()), "--rig", name)["exit"] == 1


@contextmanager
def served(bench: str) -> Iterator[str]:
    """`bench serve` in a process of its own; gives the port."""
    code = "import sys; from pulsewright.cli.main import main; sys.exit(main())"
    server = subprocess.Popen(
        [sys.executable, "-c", code, "bench", "serve", bench, "--json"], stdout=subprocess.PIPE, stderr=subprocess.PIPE
    )
    assert server.stdout is not None
    assert server.stderr is not None
    try:
        text = b""
        while not text.rstrip().endswith(b"}"):
            line = server.stdout.readline()
            assert line, server.stderr.read()
            text += line
        yield json.loads(text)["port"]
    finally:
        server.terminate()
        server.communicate(timeout=60)
    assert server.returncode == 0


def interrupt_at(monkeypatch: pytest.MonkeyPatch, turn: int) -> Callable[[], int]:
    """Ctrl-C at the given turn of looking for the rig's bytes; gives a function that tells how many there were."""
    plain = InProcess.read
    turns = [0]

    def read(self: InProcess, until_us: int) -> bytes:
        turns[0] += 1
        if turns[0] == turn:
            signal.raise_signal(signal.SIGINT)
        return plain(self, until_us)

    monkeypatch.setattr(InProcess, "read", read)
    return lambda: turns[0]


def test_ctrl_c_at_any_moment_leaves_the_chip_safe(desk: Desk, monkeypatch: pytest.MonkeyPatch) -> None:
    """At moments spread over a whole burn: exit 130, no damage, and afterwards the burn goes through.

    No limit is broken but the width of a pulse that was cut: its word is then reported as undefined.
    """
    desk.bench("--contents", "noise:6")
    path = image(words=512)
    words = ("burn", "27e512", str(path), *RIG, "--erase")
    with monkeypatch.context() as patch:
        count = interrupt_at(patch, 0)
        assert desk(*words)["exit"] == 0
    total = count()
    assert total > 20
    exits = []
    for turn in range(1, total * 9 // 10, max(1, total // 12)):
        desk.bench("--contents", "noise:6")
        with monkeypatch.context() as patch:
            interrupt_at(patch, turn)
            answer = desk(*words)
        exits.append(answer["exit"])
        assert answer["exit"] == 130, (turn, answer)
        assert answer["error"] == "Interrupted"
        report = desk("bench", "show", "b.bench")
        assert report["damaged"] is False
        broken = {violation["rule"] for violation in report["violations"]}
        undefined = any("undefined" in fact for fact in answer.get("facts", []))
        assert broken <= ({"pulse width"} if undefined else set()), (turn, report)
    assert len(exits) >= 10
    assert desk(*words)["exit"] == 0
    data = path.read_bytes()
    assert desk.contents()[: len(data)] == data


def test_h9_a_word_never_covers_an_id(desk: Desk) -> None:
    """--vouch over a part with an ID is wrong usage, and the chip is not touched."""
    desk.bench()
    answer = desk("erase", "27e512", *RIG, "--vouch", "27E512 on the lid")
    assert (answer["exit"], answer["error"]) == (2, "UsageMistake")
    assert desk("bench", "show", "b.bench")["pins"] == {} or desk.seen(24) == 0


def test_accept_voltages_with_another_hash_is_refused(desk: Desk) -> None:
    """A hash that is not the definition's is wrong usage even where nobody asks."""
    desk.bench()
    assert desk("identify", "27e512", *RIG, "--accept-voltages", "00")["exit"] == 2


def test_h10_behind_a_port_asks_before_anything_is_raised(desk: Desk) -> None:
    """The same virtual rig behind a port: refused with exit 3, voltages and hash shown, no pin has seen a level; with
    the hash the job runs, and after that it is remembered.
    """
    desk.bench()
    with served("b.bench") as port:
        refused = desk("identify", "27e512", "--rig", port)
        assert (refused["exit"], refused["error"]) == (3, "ConsentNeeded")
        facts = "\n".join(refused["facts"])
        assert "VPP.erase 14.0 V" in facts
        digest = desk("chip", "27e512")["hash"]
        assert f"hash {digest}" in facts
    assert max((pin["max_mv"] for pin in desk("bench", "show", "b.bench")["pins"].values()), default=0) == 0
    with served("b.bench") as port:
        assert desk("identify", "27e512", "--rig", port, "--accept-voltages", digest)["exit"] == 0
        assert "no hardware" not in desk.err
        assert desk("identify", "27e512", "--rig", port)["exit"] == 0


def test_h10_at_a_terminal_asks_and_takes_yes_only(desk: Desk) -> None:
    """The prompt shows the voltages; anything but yes refuses, yes lets the job run."""
    desk.bench()
    code = "import sys; from pulsewright.cli.main import main; sys.exit(main())"
    with served("b.bench") as port:
        for answer, exit_code in (("y", 3), ("yes", 0)):
            child = pexpect.spawn(
                sys.executable, ["-c", code, "identify", "27e512", "--rig", port], encoding="utf-8", timeout=60
            )
            child.expect("VPP.erase 14.0 V")
            child.expect('Type "yes": ')
            child.sendline(answer)
            child.expect(pexpect.EOF)
            child.close()
            assert child.exitstatus == exit_code


def test_a_missing_port_is_told_as_such(desk: Desk) -> None:
    """Exit 5, named."""
    answer = desk("identify", "27e512", "--rig", "/dev/does-not-exist")
    assert (answer["exit"], answer["error"], answer["stage"]) == (5, "PortMissing", "missing")
    assert "/dev/does-not-exist" in json.dumps(answer)


def test_rig_show_tells_the_board(desk: Desk) -> None:
    """With --rig the board's own word stands beside the rig file."""
    answer = desk("rig", "show", "--rig", "virtual")
    assert answer["exit"] == 0
    assert answer["board"]["name"]
    assert answer["rails"]["RAISED"][0]["mv"] == 12_000


def test_image_mistakes_come_before_the_rig_is_opened(desk: Desk) -> None:
    """A damaged image is exit 2, and no bench is touched."""
    Path("bad.hex").write_text(":0100000000FE\n")
    desk.bench()
    answer = desk("burn", "27e512", "bad.hex", *RIG)
    assert (answer["exit"], answer["error"]) == (2, "ImageMistake")
    assert "virtual rig" not in desk.err


def test_intel_hex_goes_in_and_comes_back(desk: Desk) -> None:
    """A dump written as HEX burns again to the same chip."""
    desk.bench("--contents", str(image()))
    assert desk("read", "27e512", *RIG, "-o", "dump.hex")["exit"] == 0
    before = desk.contents()
    desk.bench("--contents", "noise:10")
    assert desk("burn", "27e512", "dump.hex", *RIG, "--erase")["exit"] == 0
    assert desk.contents() == before
