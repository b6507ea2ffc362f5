"""The gate: what it reads, what it takes for the chip, and what it does with everything else."""

from __future__ import annotations

from itertools import pairwise
from typing import Any

import pytest

from pulsewright.virtual.board import Board
from pulsewright.wire.ops import ins
from pulsewright.wire.tables import Fault, Frame, Identity, Op, Outcome, Range
from tests.virtual.kit import (
    A9,
    BOTH_HIGH,
    BOTH_LOW,
    ID,
    MS,
    PIN_A9,
    PIN_OE,
    End,
    Host,
    PlainChip,
    build,
    end_of,
    past_gate,
    permit_for,
    power_up,
    to_gate,
)


def identified(chip: Any = None, **changes: Any) -> tuple[End, Host]:
    """A run that does nothing but pass the gate."""
    host = Host(chip)
    code = build([*past_gate(), ins(Op.END)])
    return host.run(code, permit_for(code, **changes)), host


def test_the_right_id_opens_the_gate_and_is_reported() -> None:
    """The closing answer carries the bytes read and which alternative they are."""
    end, _ = identified()
    assert (end.outcome, end.id, end.done["matched"]) == (Outcome.DONE, bytes(ID), 0)


def test_any_alternative_opens_the_gate() -> None:
    """The number of the alternative that matched comes back; the bytes are those of the first one's cells."""
    alternatives = (((0, 0x20), (1, 0x0D)), ((0, ID[0]), (1, ID[1])), ((0, 0x29), (1, 0x0D)))
    end, _ = identified(alternatives=alternatives)
    assert (end.outcome, end.id, end.done["matched"]) == (Outcome.DONE, bytes(ID), 1)


def test_a_wrong_id_drops_the_level_before_anything_is_sent() -> None:
    """The switches open in the tick after the last cell was read, long before the answer is on the line."""
    chip = PlainChip()
    chip.id = (0x20, 0x0D)
    end, host = identified(chip)
    assert (end.outcome, end.fault["code"], end.fault["got"]) == (Outcome.TRIPPED, Fault.WRONG_ID, 0x20)
    assert (end.id, end.done["matched"]) == (b"\x20\x0d", 0xFF)
    fell = next(t for t, text in host.trace if text == f"{A9} falls")
    assert fell - host.log.samples[-1] <= 32
    answered = next(at for at, message in zip(host.heard_at, host.heard, strict=True)
                    if message.kind is Frame.ANSWER and message.index == host.index)
    assert answered > fell + MS


@pytest.mark.parametrize("read", [(ID[0], ID[1] ^ 1), (ID[0] ^ 0x80, ID[1])])
def test_an_id_that_is_half_right_is_wrong(read: tuple[int, int]) -> None:
    """Every cell of an alternative must hold: one right byte opens nothing."""
    chip = PlainChip()
    chip.id = read
    end, _ = identified(chip)
    assert (end.outcome, end.fault["code"], end.id) == (Outcome.TRIPPED, Fault.WRONG_ID, bytes(read))


@pytest.mark.parametrize("identity", [Identity.NONE, Identity.VOUCHED_NONE])
def test_a_part_without_id_is_seated_before_its_gate_opens(identity: Identity) -> None:
    """Where no ID is wanted the seating check is all there is, and the gate wants it."""
    host = Host(board=Board(button=True))
    code = build([*power_up(), ins(Op.GATE, wait=8), ins(Op.END)])
    none: dict[str, Any] = {"alternatives": (), "identify_switch": 0xFF, "identify_step": 0, "identify_ceiling": 0}
    end = host.run(code, permit_for(code, identity=identity, raised=(), **none))
    assert (end.outcome, end.fault["code"]) == (Outcome.TRIPPED, Fault.NOT_SEATED)


def test_a_chip_without_id_mode_is_refused_whatever_its_cells_hold() -> None:
    """64 cells that read the same with the level and without mean no ID mode, even where they imitate the ID."""
    for contents in (b"", bytes(ID), bytes(ID) * 700, bytes(range(256)) * 256):
        chip = PlainChip(contents)
        chip.id = None
        end, host = identified(chip)
        assert (end.outcome, end.fault["code"], end.done["matched"]) == (Outcome.TRIPPED, Fault.NO_ID_MODE, 0xFF)
        fell = next(t for t, text in host.trace if text == f"{A9} falls")
        assert fell - host.log.samples[-1] <= 16  # not even make-safe's own op lies between
        assert end.fault["tick"] == fell & 0xFFFFFFFF


def test_one_cell_that_differs_shows_an_id_mode() -> None:
    """An image that imitates the ID in all of the 64 cells but one is told from a chip without ID mode."""
    for odd in (0, 17, 63):
        cells = bytearray(bytes(ID) * 300)
        assert identified(PlainChip(bytes(cells)))[0].fault["code"] == Fault.NO_ID_MODE
        cells[0x200 + odd] ^= 0x10  # the look is taken with A9 high
        assert identified(PlainChip(bytes(cells)))[0].outcome is Outcome.DONE


def test_the_look_walks_the_cells_with_the_identify_line_high() -> None:
    """Cell addresses come one after the other from the first ID cell on; A9 never goes low in look or gate."""
    end, host = identified(alternatives=(((0, ID[0]), (1, ID[1])),))
    assert end.outcome is Outcome.DONE
    assert len(host.log.samples) == 64 + 64 + 2
    walk = [level for t, level in host.log.levels_of(PIN_A9) if host.log.samples[0] < t <= host.log.samples[-1]]
    assert all(level is not None and level >= 5_000 for level in walk)


def test_the_look_begins_at_the_first_id_cell() -> None:
    """A part whose ID stands at another address is looked at there."""
    chip = PlainChip()
    end, host = identified(chip, alternatives=(((0x4010, ID[0]), (0x4011, ID[1])),))
    assert (end.outcome, end.id) == (Outcome.DONE, bytes(ID))
    a14 = [level for t, level in host.log.levels_of(27) if t <= host.log.samples[0]]
    assert a14[-1] == 5_000


@pytest.mark.parametrize("chip_id", [None, (0x20, 0x0D), ID])
def test_the_gate_alone_raises_nothing_but_the_identify_level(chip_id: tuple[int, int] | None) -> None:
    """Whatever the chip answers, OE/VPP stays at or below VCC and A9 below 12.5 V."""
    chip = PlainChip()
    chip.id = chip_id
    _, host = identified(chip)
    assert max(level or 0 for _, level in host.log.levels_of(PIN_OE)) <= 5_250
    assert max(level or 0 for _, level in host.log.levels_of(PIN_A9)) <= 12_500


def test_the_access_time_is_waited_for_at_each_cell() -> None:
    """Two cells are at least `wait` apart, and at most that and the op's cost."""
    host = Host()
    code = build([*power_up(), *to_gate(wait=400), ins(Op.GATE, wait=32), ins(Op.END)])
    assert host.run(code).outcome is Outcome.DONE
    looks = host.log.samples[:64]
    gaps = {later - sooner for sooner, later in pairwise(looks)}
    assert gaps == {400}


def test_an_abort_in_the_walk_drops_the_level() -> None:
    """Four zeros in the middle of the gate end it safely."""
    host = Host()
    host.start(build([*power_up(), *to_gate(), ins(Op.GATE, wait=5 * MS), ins(Op.END)]))
    while f"{A9} stands 11909" not in host.texts():
        host.pass_time(MS)
    host.pass_time(30 * MS)
    host.rig.receive(bytes(4), host.rig.t)
    end = end_of(host.answer(host.index))
    assert (end.outcome, end.done["matched"]) == (Outcome.ABORTED, 0xFF)
    assert f"{A9} falls" in host.texts()
    assert len(host.log.samples) < 100


def test_a_look_from_before_a_power_down_counts_no_more() -> None:
    """Whoever takes VCC away has to look again: the gate stays shut without."""
    looked = [ins(Op.SEATED), ins(Op.LINES, lines=BOTH_LOW), ins(Op.GATE_LOOK, wait=32), ins(Op.LINES, lines=BOTH_HIGH)]
    off = [ins(Op.HIGH, how=0), ins(Op.LINES, lines=BOTH_LOW), ins(Op.RANGE, which=Range.OFF), *power_up()]
    again = [item for item in to_gate() if getattr(item, "op", None) is not Op.GATE_LOOK]
    rest = [*again, ins(Op.GATE, wait=32), ins(Op.SWITCHES, on=0), ins(Op.END)]
    assert Host().run(build([*power_up(), *looked, *rest])).outcome is Outcome.DONE
    assert Host().run(build([*power_up(), *looked, *off, *rest])).fault["code"] == Fault.NO_ID_MODE
