"""A 27C256 in the virtual socket: VPP fed from VCC through a diode in read, raised over it for a whole program job."""

from __future__ import annotations

import pytest

from pulsewright.virtual.bench import Bench
from pulsewright.virtual.contacts import HIGH, LOW
from pulsewright.virtual.judge import Judge
from pulsewright.virtual.socket import Socket
from pulsewright.wire.tables import Range
from tests.virtual.waveform import MS, US, A

CE, OE, VPP, VCC = 22, 24, 3, 30  # positions: pin + 2
ADDRESS = tuple(pin + 2 for pin in A[:15])


class Job:
    """What a rig does with the socket, op by op, as a program job has it."""

    def __init__(self, maker: str, vcc_at: tuple[int, ...] = (VCC, VPP)) -> None:
        self.bench = Bench.fresh("27c256", "blank", maker=maker)
        self.socket: Socket = self.bench.rig().socket
        judge = self.bench.judge
        assert judge is not None
        self.judge: Judge = judge
        self.t = 1_000
        self.socket.set_address_lines(ADDRESS)
        self.socket.release(self.t)
        self.rail(5_000)
        self.socket.set_range(self.t, Range.FULL, vcc_at)
        self.wait(10 * MS)
        self.socket.set_high(self.t, driven=True)
        self.lines(HIGH, HIGH)

    def wait(self, ticks: int) -> None:
        self.t += ticks
        self.socket.end_ramps(self.t)

    def rail(self, mv: int) -> None:
        self.socket.set_rail(self.t, mv)
        self.wait(10 * MS)

    def lines(self, ce: int, oe: int) -> None:
        self.socket.set_lines(self.t, ((CE, ce), (OE, oe)))
        self.wait(8)

    def raised(self, mv: int) -> None:
        self.socket.set_raised_rail(self.t, mv)
        self.wait(30 * MS)
        self.socket.set_raised(self.t, (VPP,) if mv else ())
        self.wait(20 * US)

    def write(self, at: int, word: int) -> None:
        self.socket.set_address(self.t, at)
        self.socket.drive(self.t, word)
        self.wait(2 * US)
        self.socket.set_line(self.t, CE, LOW)
        self.wait(100 * US)
        self.socket.set_line(self.t, CE, HIGH)
        self.wait(2 * US)
        self.socket.release(self.t)
        self.wait(2 * US)

    def sample(self, at: int, ce: int) -> int:
        self.socket.set_address(self.t, at)
        self.lines(ce, LOW)
        word = self.socket.sample(self.t)
        self.lines(HIGH, HIGH)
        return word

    def down(self) -> None:
        self.socket.set_raised(self.t, ())
        self.wait(MS)
        self.rail(5_000)
        self.socket.set_address(self.t, 0)
        self.socket.set_high(self.t, driven=False)
        self.socket.set_range(self.t, Range.OFF, ())
        self.wait(MS)
        self.socket.all_low(self.t)


@pytest.mark.parametrize(("maker", "vcc", "vpp"), [("st", 6_250, 12_750), ("atmel", 6_500, 13_000)])
def test_a_program_job_is_clean_to_the_judge(maker: str, vcc: int, vpp: int) -> None:
    """Read, VCC and VPP up, words with verify, VPP and VCC down, read again, power off: nothing to report."""
    job = Job(maker)
    assert job.sample(0x1234, LOW) == 0xFF
    job.rail(vcc)
    job.raised(vpp)
    for at in (0x1234, 0x7FFF):
        job.write(at, at & 0xFF)
        assert job.sample(at, HIGH) == at & 0xFF
    job.raised(0)
    job.rail(5_000)
    assert job.sample(0x1234, LOW) == 0x34
    job.down()
    assert job.judge.violations == []
    assert not job.bench.report()["damaged"]


def test_a_read_without_a_supply_at_vpp_is_found() -> None:
    """With VCC at pin 28 only, VPP is a low line: the chip answers wrong, and the judge says why."""
    job = Job("st", (VCC,))
    assert job.sample(0x1234, LOW) != 0xFF
    assert [violation.rule for violation in job.judge.violations] == ["supply at rest"]
