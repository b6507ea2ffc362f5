"""The gate: 64 cells looked at with and without the identify level, and the ID compared, all by the firmware itself."""

from __future__ import annotations

from pulsewright.virtual.board import RAISED_FULL_MV, RAISED_POSITIONS, count_of
from pulsewright.virtual.machine import Machine, Trip, Waiting, until
from pulsewright.virtual.ops import Args, Step
from pulsewright.wire.permit import NO_SWITCH
from pulsewright.wire.tables import LOOK_CELLS, OP_COST, Fault, Identity, Op, Range

_CELL_COST = OP_COST[Op.GATE]


def gate_look(m: Machine, a: Args, after: int) -> Step:
    """Keeps the look: the cells as they read without the identify level."""
    wait = a["wait"]

    def step() -> int:
        _ready_to_look(m)
        if m.permit.identify_switch != NO_SWITCH and m.closed >> m.permit.identify_switch & 1:
            raise Trip(Fault.LINE_AT_RAISED, got=m.closed)
        m.slow = _look_on(m, wait, after)
        return -1

    return step


def gate(m: Machine, a: Args, after: int) -> Step:
    """Opens the gate, or trips with the switches open at once."""
    wait = a["wait"]

    def step() -> int:
        if not m.seated:
            raise Trip(Fault.NOT_SEATED)
        _ask_for_button(m)
        if m.permit.identity is not Identity.WANTED:
            m.t += _CELL_COST
            _open(m)
            return after
        _ready_to_look(m)
        if m.look is None:
            raise Trip(Fault.NO_ID_MODE)
        switch = m.permit.identify_switch
        if switch != NO_SWITCH and not m.closed >> switch & 1:
            raise Trip(Fault.GATE_SHUT, got=m.closed)
        m.slow = _gate_on(m, m.look, wait, after)
        return -1

    return step


def _ready_to_look(m: Machine) -> None:
    if not m.seated:
        raise Trip(Fault.NOT_SEATED)
    if m.range is not Range.FULL or not m.vcc_measured:
        raise Trip(Fault.NO_VCC)
    if m.driving:
        raise Trip(Fault.BUS_CONFLICT)
    if not m.permit.alternatives:
        raise Trip(Fault.NOT_IN_PERMIT)
    position = _identify_position(m)
    if position is not None and position not in m.address_lines and m.low >> position & 1:
        raise Trip(Fault.LINE_AT_RAISED)


def _ask_for_button(m: Machine) -> None:
    """A vouched permit, or one above the board's limit, wants the button held or the jumper set."""
    high = max((ceiling for _, ceiling in m.permit.raised), default=0)
    vouched = m.permit.identity is Identity.VOUCHED_NONE
    if (vouched or high > count_of(m.board.button_above_mv, RAISED_FULL_MV)) and not m.board.button:
        raise Trip(Fault.GATE_SHUT, got=high)


def _open(m: Machine) -> None:
    m.gate = True
    m.forget_approval()


def _identify_position(m: Machine) -> int | None:
    switch = m.permit.identify_switch
    return None if switch == NO_SWITCH else RAISED_POSITIONS[switch]


def _held_bit(m: Machine) -> int:
    """The address bit whose line sits at the identify switch: it stays high throughout."""
    position = _identify_position(m)
    return 1 << m.address_lines.index(position) if position in m.address_lines else 0


def _read_cell(m: Machine, at: int, wait: int) -> Waiting:
    """One cell, its address line at the identify position kept high."""
    mask = (1 << len(m.address_lines)) - 1
    m.address = (at | _held_bit(m)) & mask
    begun = m.t
    m.socket.set_address(begun, m.address)
    m.edge = begun
    yield from until(m, begun + max(wait, 1))
    word = m.socket.sample(m.t)
    m.t = max(m.t, begun + _CELL_COST)
    if m.t >= m.next_event:
        yield None
    return word


def _read_look(m: Machine, wait: int) -> Waiting:
    first = m.permit.alternatives[0][0][0]
    m.cells = []
    for at in range(first, first + LOOK_CELLS):
        word = yield from _read_cell(m, at, wait)
        m.cells.append(word)
    return 0


def _look_on(m: Machine, wait: int, after: int) -> Waiting:
    yield from _read_look(m, wait)
    m.look = m.cells
    return after


def _gate_on(m: Machine, look: list[int], wait: int, after: int) -> Waiting:
    yield from _read_look(m, wait)
    same = m.cells == look
    found: dict[int, int] = {}
    for cells in m.permit.alternatives:
        for at, _ in cells:
            if at not in found:
                found[at] = yield from _read_cell(m, at, wait)
    m.id_bytes = bytes(found[at] for at, _ in m.permit.alternatives[0])
    if same:
        _drop_level(m)
        raise Trip(Fault.NO_ID_MODE, got=look[0])
    for number, cells in enumerate(m.permit.alternatives):
        if all(found[at] == word for at, word in cells):
            m.matched = number
            _open(m)
            return after
    _drop_level(m)
    at, word = m.permit.alternatives[0][0]
    raise Trip(Fault.WRONG_ID, got=found[at], low=word, high=word)


def _drop_level(m: Machine) -> None:
    """The identify level goes before anything else happens."""
    m.socket.set_raised(m.t, ())
    m.closed = m.closed_lines = m.closed_bits = 0
    m.edge = m.t
    m.ramps_moved()
