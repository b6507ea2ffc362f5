"""Numbers of permits and commands: none that the rig has had, none that an earlier boot's frames carry."""

from __future__ import annotations

import pytest

from pulsewright.chip.load import load
from pulsewright.errors import RigFault
from pulsewright.link.inprocess import InProcess
from pulsewright.link.session import Session
from pulsewright.rig.file import load_rig
from pulsewright.sequence.compile import compile_read
from pulsewright.sequence.types import Sequence
from pulsewright.virtual.bench import Bench
from pulsewright.wire.fields import WireMistake
from pulsewright.wire.frames import Message, decode_frame
from pulsewright.wire.tables import Frame, Outcome

PART = "27e512"


@pytest.fixture(scope="module")
def read() -> Sequence:
    """A read of four words."""
    return compile_read(load(PART), load_rig(), 0, 3)


class Written(InProcess):
    """A line that keeps what the host sends."""

    frames: list[Message]

    def write(self, data: bytes) -> None:
        """Kept, and on."""
        for stretch in data.split(b"\0"):
            try:
                self.frames.append(decode_frame(stretch))
            except WireMistake:
                continue  # a greeting, or nothing between two zeros
        super().write(data)


def _numbers(boot: int, read: Sequence) -> tuple[set[int], set[int]]:
    """Indexes of commands and numbers of permits of a session that begins as the rig starts."""
    line = Written(Bench.fresh(PART, "blank").rig(boot))
    line.frames = []
    session = Session(line)
    session.connect()
    for _ in range(3):
        assert session.run(read).outcome is Outcome.DONE
    commands = [frame for frame in line.frames if frame.kind not in (Frame.BLOCK, Frame.KEEP_ALIVE)]
    return {frame.index for frame in commands}, {frame.permit for frame in line.frames if frame.permit}


def test_boots_have_no_numbers_in_common(read: Sequence) -> None:
    """Host and rig that are switched on together begin at the same clock: still no frame of the boot before fits."""
    first, *others = [_numbers(boot, read) for boot in (1, 2, 3, 17)]
    assert len(first[1]) == 3
    for indexes, permits in others:
        assert not indexes & first[0]
        assert not permits & first[1]


def test_a_permit_number_that_this_boot_has_had_is_passed_over(read: Sequence) -> None:
    """An earlier session may have used the very next numbers: the sequence goes under another one."""
    bench = Bench.fresh(PART, "blank")
    rig = bench.rig()
    session = Session(InProcess(rig))
    session.connect()
    used = rig.commands._used
    used.update(range(session._permit_number, session._permit_number + 40))
    assert session.run(read).outcome is Outcome.DONE
    assert len(used) == 41


def test_a_rig_that_takes_no_number_at_all_is_told(read: Sequence) -> None:
    """After some numbers the refusal itself is the error; nothing is tried for ever."""
    rig = Bench.fresh(PART, "blank").rig()
    session = Session(InProcess(rig))
    session.connect()
    rig.commands._used.update(range(1 << 16))
    with pytest.raises(RigFault, match="refuses the permit: wrong permit"):
        session.run(read)
