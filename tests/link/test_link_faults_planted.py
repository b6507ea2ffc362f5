"""The sweeps of a bad line can fail: each mistake planted in the session or in the rig is found by one of them."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from itertools import islice

import pytest
from cobs import cobs

from pulsewright.link.blocks import Window
from pulsewright.link.exactly_once import Exchange
from pulsewright.virtual import safe
from pulsewright.virtual.blocks import Blocks
from pulsewright.virtual.commands import Commands
from pulsewright.virtual.rig import VirtualRig
from pulsewright.wire import frames
from pulsewright.wire.fields import WireMistake, unpack
from pulsewright.wire.frames import Message
from pulsewright.wire.tables import FRAME_FIELDS, Fault, Frame
from tests.link.frame_line import Wrong
from tests.link.line_cases import (
    Case,
    bad_order,
    cut_in_frames,
    many_harms,
    one_harm_a_part,
    reset_inside_pulses,
)
from tests.link.line_map import stretches_of
from tests.link.small_blocks import small_blocks
from tests.link.whole_job import QUICK, SLOW, Work, pulses_us, undisturbed

Patch = pytest.MonkeyPatch
Plant = Callable[[Patch], None]


@pytest.fixture(autouse=True, scope="module")
def small() -> Iterator[None]:
    """Small blocks; and what is true of a job that nobody disturbs is found out before anything is planted."""
    with small_blocks():
        for work in (QUICK, SLOW):
            undisturbed(work)
            stretches_of(work)
            pulses_us(work)
        yield


def keep_alives_lost(patch: Patch) -> None:
    """The host thinks that it has sent them."""
    patch.setattr(Exchange, "keep_alive", lambda self: self._line.write(b""))


def window_one_too_large(patch: Patch) -> None:
    """One block more under way than the rig keeps replies."""
    begin = Window.__init__
    patch.setattr(Window, "__init__", lambda self, blocks, header, permit, size: begin(
        self, blocks, header, permit, size + 1))


def any_permit_accepted(patch: Patch) -> None:
    """The rig takes frames of another permit."""
    patch.setattr(Commands, "_is_of_this_permit", lambda self, message: True)


def crc_ignored(patch: Patch) -> None:
    """Both ends take a frame that is damaged but can be read."""

    def decode(stuffed: bytes) -> Message:
        try:
            body = bytes(cobs.decode(stuffed))
            kind = Frame(body[0])
        except (cobs.DecodeError, ValueError, IndexError) as mistake:
            raise WireMistake(str(mistake)) from None
        number, index = int.from_bytes(body[1:3], "little"), int.from_bytes(body[3:5], "little")
        return Message(kind, number, index, unpack(FRAME_FIELDS[kind], body[5:-2]))

    patch.setattr(frames, "decode_frame", decode)


def repeated_command_run_twice(patch: Patch) -> None:
    """The rig forgets which command it did last."""
    command = Commands._command

    def forgetting(self: Commands, message: Message) -> None:
        if self.running is None:
            self._last = None
        command(self, message)

    patch.setattr(Commands, "_command", forgetting)


def repeated_block_applied_twice(patch: Patch) -> None:
    """The rig queues the block before the one it wants."""
    receive = Blocks.receive

    def twice(self: Blocks, message: Message) -> None:
        if message.index == self._wanted - 1 and len(self.queue) < self._window:
            self.queue.append(self._checked(message))
        else:
            receive(self, message)

    patch.setattr(Blocks, "receive", twice)


def higher_block_applied(patch: Patch) -> None:
    """The rig goes on with a block although one before it is missing."""
    receive = Blocks.receive

    def skipping(self: Blocks, message: Message) -> None:
        if message.index > self._wanted and len(self.queue) < self._window and self._passes:
            self._wanted = message.index
        receive(self, message)

    patch.setattr(Blocks, "receive", skipping)


def replies_not_kept(patch: Patch) -> None:
    """The rig has no reply for a block that comes again."""
    receive = Blocks.receive

    def forgetting(self: Blocks, message: Message) -> None:
        self._kept.clear()
        receive(self, message)

    patch.setattr(Blocks, "receive", forgetting)


def answer_not_kept(patch: Patch) -> None:
    """The rig has no answer for a command that comes again."""
    command = Commands._command

    def forgetting(self: Commands, message: Message) -> None:
        if message.index != self._last or self.running is not None:
            command(self, message)

    patch.setattr(Commands, "_command", forgetting)


def commands_not_repeated(patch: Patch) -> None:
    """The host waits until it gives up."""
    patch.setattr(Exchange, "deadline_us", lambda self: self._heard_us + self._line.timing.give_up_us)


def refusals_ignored(patch: Patch) -> None:
    """The host does not go back to the block that the rig wants; only the heartbeats' repeats do."""
    patch.setattr(Window, "refused", lambda self, message: [])


def oldest_block_not_repeated(patch: Patch) -> None:
    """A block that was lost with all behind it is not sent again."""
    patch.setattr(Window, "beat", lambda self: [])


def no_dead_man(patch: Patch) -> None:
    """The rig works on without a host."""
    trip = VirtualRig.trip
    patch.setattr(VirtualRig, "trip", lambda self, why: None if why.code is Fault.DEAD_MAN else trip(self, why))


def switches_left_closed(patch: Patch) -> None:
    """Making safe forgets the raised levels."""
    patch.setattr(safe, "_open_switches", lambda machine: None)


def boot_does_not_count(patch: Patch) -> None:
    """A reset rig greets with the number it had."""
    restart = VirtualRig.restart

    def same(self: VirtualRig) -> None:
        restart(self)
        self.boot -= 1

    patch.setattr(VirtualRig, "restart", same)


def _nothing() -> Iterable[Case]:
    return [Case("nothing")]


def _replies_lost() -> Iterable[Case]:
    """Five replies of a burn's blocks in a row."""
    done = next(one for one in stretches_of(QUICK) if one.kind == "block_done")
    return [Case("five replies lost", wrongs=(Wrong(done.part, "from rig", done.number, "lose", 4),))]


def _every(
    cases: Callable[[Work], Iterator[Case]], step: int, begin: int = 0, work: Work = QUICK
) -> Callable[[], Iterable[Case]]:
    """Every so manyth case; from `begin` on, where only some later ones can show the mistake."""
    return lambda: islice(cases(work), begin, None, step)


def _many(begin: int = 0) -> Callable[[], Iterable[Case]]:
    return lambda: many_harms(QUICK, range(begin, 40), 80)


PLANTED: dict[Plant, tuple[Work, Callable[[], Iterable[Case]]]] = {
    keep_alives_lost: (SLOW, _nothing),
    window_one_too_large: (QUICK, _replies_lost),
    any_permit_accepted: (QUICK, _every(bad_order, 4, 320)),
    crc_ignored: (QUICK, _every(one_harm_a_part, 5)),
    repeated_command_run_twice: (QUICK, _every(one_harm_a_part, 5, 200)),
    repeated_block_applied_twice: (QUICK, _many()),
    higher_block_applied: (QUICK, _many()),
    replies_not_kept: (QUICK, _many()),
    answer_not_kept: (QUICK, _every(one_harm_a_part, 5, 200)),
    commands_not_repeated: (QUICK, _every(one_harm_a_part, 5)),
    refusals_ignored: (QUICK, _many(30)),
    oldest_block_not_repeated: (QUICK, _many()),
    no_dead_man: (QUICK, _every(cut_in_frames, 1, 30)),
    switches_left_closed: (SLOW, _every(cut_in_frames, 2, 80, SLOW)),
    boot_does_not_count: (QUICK, lambda: reset_inside_pulses(QUICK, 3, 1)),
}


@pytest.mark.parametrize("plant", PLANTED, ids=lambda plant: plant.__name__)
def test_a_planted_mistake_is_found(plant: Plant, monkeypatch: pytest.MonkeyPatch) -> None:
    """Some job of a sweep is not as it must be."""
    work, cases = PLANTED[plant]
    plant(monkeypatch)
    assert any(case.run(work)[1] for case in cases())
