"""Definition steps to ops: mode changes in their safe order, pulses, waits, samples, loops."""

from __future__ import annotations

from pulsewright.chip.model import (
    EachStep,
    EveryWord,
    ExpectStep,
    Mode,
    ModeStep,
    PulseStep,
    RepeatStep,
    Step,
    SupplyStep,
    WaitStep,
)
from pulsewright.errors import CannotMake
from pulsewright.rig.model import RailStep
from pulsewright.sequence.build import US, Builder
from pulsewright.sequence.levels import choose_raised, choose_vcc, top_mv
from pulsewright.units import Rounding, ticks
from pulsewright.wire.ops import line_byte
from pulsewright.wire.tables import Channel, Fail, Level, Op, Rail

_MEASURE_LIMIT_PS = 2_000 * US


def raised_steps(b: Builder, mode: Mode) -> dict[str, SupplyStep]:
    """Pin -> supply step of a mode's raised pins."""
    return {pin: b.definition.supplies[name] for pin, name in b.pins.raised_levels(mode).items()}


def switch_mask(b: Builder, mode: Mode) -> int:
    """Mask of the raised switches a mode wants closed."""
    return sum(1 << b.pins.switch(pin).number for pin in b.pins.raised_levels(mode))


def move_vcc(b: Builder, step: SupplyStep, rail_step: RailStep | None = None) -> None:
    """VCC to another step, with nothing raised and, where H cannot be driven on the way, H released."""
    target = rail_step or choose_vcc(b.definition, b.rig, step)
    if b.state.vcc == target:
        return
    floor = b.rig.driven_from_mv
    if b.state.high_driven and min(target.mv, b.state.vcc.mv if b.state.vcc else 0) < floor:
        b.emit(Op.HIGH, how=0)
        b.state.high_driven = False
        b.edge(b.line_settle_ps)
        b.wait(0)
    b.emit(Op.RAIL, rail=Rail.VCC, step=target.number)
    b.edge(max(b.rig.vcc.settle_ps, step.settle_ps))
    b.wait(0)
    socket = b.rig.socket_vcc
    low, high = socket.count_at_least(step.min_mv), socket.count_at_most(step.max_mv)
    limit = ticks(_MEASURE_LIMIT_PS, Rounding.AT_LEAST)
    b.emit(Op.MEASURE, channel=Channel.SOCKET_VCC, low=low, high=high, limit=limit)
    b.state.vcc = target
    if target.mv >= floor and not b.state.high_driven:
        b.emit(Op.HIGH, how=1)
        b.state.high_driven = True
        b.edge(b.line_settle_ps)


def move_raised_rail(b: Builder, wanted: dict[str, SupplyStep]) -> None:
    """The raised rail to the step that serves these pins, settled; measured in the window it is to be held in."""
    target = choose_raised(b.definition, b.rig, wanted)
    scaling = b.rig.raised.scaling
    low = scaling.count_at_least(max(step.min_mv for step in wanted.values()))
    high = scaling.count_at_most(min(top_mv(b.definition, b.rig, pin, step) for pin, step in wanted.items()))
    if b.state.raised == target and low <= b.state.raised_low and b.state.raised_high <= high:
        return
    open_switches(b, 0)
    if b.state.raised != target:
        b.emit(Op.RAIL, rail=Rail.RAISED, step=target.number)
        b.edge(b.rig.raised.settle_ps)
        b.wait(0)
    limit = ticks(_MEASURE_LIMIT_PS, Rounding.AT_LEAST)
    b.emit(Op.MEASURE, channel=Channel.RAISED_RAIL, low=low, high=high, limit=limit)
    b.state.raised, b.state.raised_low, b.state.raised_high = target, low, high


def measure_raised(b: Builder, wanted: dict[str, SupplyStep]) -> None:
    """Each raised level measured at its position (H8)."""
    for pin, step in wanted.items():
        switch = b.pins.switch(pin)
        low = switch.scaling.count_at_least(step.min_mv)
        high = switch.scaling.count_at_most(top_mv(b.definition, b.rig, pin, step))
        limit = ticks(_MEASURE_LIMIT_PS, Rounding.AT_LEAST)
        b.emit(Op.MEASURE, channel=Channel.POSITION + switch.number, low=low, high=high, limit=limit)


def open_switches(b: Builder, keep: int) -> None:
    """Opens raised switches but those of `keep`; the longest fall passes before anything else."""
    going = b.state.switches & ~keep
    if not going:
        return
    b.emit(Op.SWITCHES, on=b.state.switches & keep)
    b.edge(max(s.fall_ps for s in b.rig.switches if going >> s.number & 1))
    b.wait(0)
    b.state.switches &= keep


def close_switches(b: Builder, mode: Mode) -> None:
    """Closes the raised switches of a mode; what follows waits for the longest rise."""
    mask = switch_mask(b, mode)
    if b.state.switches == mask:
        return
    b.emit(Op.SWITCHES, on=mask)
    b.edge(max(s.rise_ps for s in b.rig.switches if mask >> s.number & 1))
    b.state.switches = mask


def _set_address(b: Builder, mode: Mode, at: int | None) -> None:
    """The address a mode wants: a constant where its row says low, the word in hand in a word loop, else `at`."""
    bits = b.pins.raised_address_bits(mode)
    if mode.levels.get("A") == "L":
        b.address(bits)
    elif at is not None:
        b.address(at | bits)
    elif bits:
        b.address(bits)


def _drive(b: Builder, data: str | int | None) -> None:
    if data == "image":
        b.emit(Op.DRIVE_WORD)
    elif isinstance(data, int):
        b.emit(Op.DRIVE, word=data)
    else:
        return
    b.state.data = "driven"
    b.edge(b.line_settle_ps)


def enter(
    b: Builder,
    name: str,
    *,
    data: str | int | None = None,
    at: int | None = None,
    word: bool = False,
    drive: bool = True,
) -> None:
    """From the mode in force to another, in a fixed order.

    Raised off, D off, outputs off, VCC, rail, address, D, raised on, enables. `data` overrides what the mode row says
    of D; `drive` False leaves D released whatever the row says.
    """
    mode = b.definition.modes[name]
    levels = b.pins.control_levels(mode)
    drives = data if data is not None else (mode.data if isinstance(mode.data, int) else None)
    if not drive:
        drives = None
    open_switches(b, switch_mask(b, mode) if b.state.mode == name else 0)
    if drives is None:
        b.release()
    rising = {role: level for role, level in levels.items() if level is Level.HIGH}
    was_on = b.state.outputs
    b.set_lines(rising)
    if was_on and mode.data != "out":
        b.wait(b.timing_max_ps("tDF"))
    b.state.outputs = mode.data == "out"
    move_vcc(b, b.definition.supplies[mode.vcc])
    wanted = raised_steps(b, mode)
    if wanted:
        move_raised_rail(b, wanted)
    if word:
        b.emit(Op.ADDRESS_WORD)
        b.edge(b.line_settle_ps)
    else:
        _set_address(b, mode, at)
    _drive(b, drives)
    if wanted:
        close_switches(b, mode)
        if not word:
            b.wait(0)
            measure_raised(b, wanted)
    b.set_lines(levels)
    b.state.mode = name


def prove_level(b: Builder, name: str) -> None:
    """Before a word loop: its raised level is made and measured once at its position, with nothing pulsed."""
    mode = b.definition.modes[name]
    wanted = raised_steps(b, mode)
    if not wanted:
        return
    with b.about(f"{', '.join(step.name for step in wanted.values())} measured before its first use", where=mode.where):
        enter(b, name, drive=False)
        enter(b, "standby")
        b.wait(b.definition.timing["tVR"].min_ps or 0 if "tVR" in b.definition.timing else 0)


def step_text(b: Builder, step: Step) -> str:
    """A definition step in words."""
    if isinstance(step, ModeStep):
        return f"mode {step.mode}" + (f", D = {step.data}" if step.data is not None else "")
    if isinstance(step, WaitStep):
        return f"wait {step.timing}".rstrip()
    if isinstance(step, PulseStep):
        return f"pulse {step.pin} to {step.to} for {step.timing}"
    if isinstance(step, ExpectStep):
        return f"expect {step.value}"
    if isinstance(step, RepeatStep):
        return f"repeat up to {step.max} times"
    return f"each {step.unit}"


class Lowering:
    """Walks a method's steps and emits ops; `word` is true inside a loop over the image's words."""

    def __init__(self, b: Builder, first: int, last: int, failure: Fail) -> None:
        self.b = b
        self.first = first
        self.last = last
        self.failure = failure
        self.word = False
        self._pending: ExpectStep | None = None

    def run(self, steps: tuple[Step, ...]) -> None:
        """Emits each step in turn."""
        for step in steps:
            with self.b.about(step_text(self.b, step), part="work", where=step.where):
                self._one(step)

    def _one(self, step: Step) -> None:
        b = self.b
        if isinstance(step, ModeStep):
            mode = b.definition.modes[step.mode]
            in_word = self.word and mode.levels.get("A") != "L" and (step.data == "image")
            enter(b, step.mode, data=step.data, word=in_word)
        elif isinstance(step, WaitStep):
            b.wait(step.ps)
        elif isinstance(step, PulseStep):
            self._pulse(step)
        elif isinstance(step, ExpectStep):
            b.wait(b.access_ps(b.state.mode))
            b.emit(Op.SAMPLE)
            self._pending = step
        elif isinstance(step, RepeatStep):
            self._repeat(step)
        else:
            self._each(step)

    def _pulse(self, step: PulseStep) -> None:
        b = self.b
        window = b.definition.timing[step.timing]
        if window.min_ps is None or window.max_ps is None:
            raise CannotMake(f"{step.timing} has no window: a pulse needs min and max", where=step.where)
        typ_ps = window.typ_ps if window.typ_ps is not None else (window.min_ps + window.max_ps) // 2
        level = Level.LOW if step.to == "L" else Level.HIGH
        b.emit(
            Op.PULSE,
            line=line_byte(b.pins.line(step.pin), level),
            width=ticks(typ_ps, Rounding.NEAREST),
            max=ticks(window.max_ps, Rounding.AT_MOST),
        )
        b.edge(b.line_settle_ps)

    def _compare(self, step: ExpectStep) -> None:
        if step.value == "image":
            self.b.emit(Op.COMPARE_WORD)
        else:
            self.b.emit(Op.COMPARE, word=step.value, mask=step.mask)

    def _every_word(self, until: EveryWord) -> None:
        b = self.b
        back = b.state.mode
        vcc = b.state.vcc
        with b.about(f"every word reads {until.is_:02X} in mode {until.mode}", where=until.where):
            enter(b, until.mode, at=self.first)
            b.wait(0)
            access = b.line_settle_ps + b.access_ps(until.mode)
            b.emit(
                Op.SCAN,
                first=self.first,
                count=self.last - self.first + 1,
                word=until.is_,
                wait=ticks(access, Rounding.AT_LEAST),
            )
            enter(b, back)
            if b.state.vcc != vcc and vcc is not None:
                move_vcc(b, b.definition.supplies[b.definition.modes[back].vcc], vcc)

    def _repeat(self, step: RepeatStep) -> None:
        b = self.b
        done = b.label()
        self._pending = None
        b.wait(0)
        b.emit(Op.LOOP, count=step.max)
        b.depth += 1
        self.run(step.steps)
        if step.until is not None:
            self._every_word(step.until)
        elif self._pending is not None:
            self._compare(self._pending)
        else:
            raise CannotMake("a repeat without a way to end", where=step.where)
        self._pending = None
        b.wait(0)
        b.emit(Op.BRANCH, when=1, depth=b.depth - 1, to=done.name)
        b.emit(Op.NEXT)
        b.depth -= 1
        b.emit(Op.FAIL, why=self.failure)
        b.place(done)

    def _each(self, step: EachStep) -> None:
        b = self.b
        if step.unit != "word":
            raise CannotMake(f"once for each {step.unit}: this program makes loops over words only", where=step.where)
        block_end, end = b.label(), b.label()
        b.wait(0)
        b.emit(Op.EACH_BLOCK, to=end.name)
        b.emit(Op.EACH_WORD, to=block_end.name)
        b.depth += 2
        self.word = True
        self.run(step.steps)
        self.word = False
        b.depth -= 2
        b.emit(Op.NEXT_WORD)
        b.place(block_end)
        b.emit(Op.NEXT_BLOCK)
        b.place(end)


def raised_modes(steps: tuple[Step, ...]) -> list[str]:
    """Names of the modes that steps go to, in order, each once."""
    names: list[str] = []
    for step in steps:
        found = [step.mode] if isinstance(step, ModeStep) else []
        if isinstance(step, RepeatStep | EachStep):
            found = raised_modes(step.steps)
        names += [name for name in found if name not in names]
    return names
