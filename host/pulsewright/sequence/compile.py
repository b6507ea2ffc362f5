"""Definition and rig to sequences: the five kinds of closed work on a chip. Pure: nothing is read, nothing is sent.

Every sequence powers the chip up, checks its seat, passes the gate, works, and ends safe. Compile time does not grow
with the image: data is named by range and hash only. All raise CannotMake where the rig has no step that serves.
"""

from __future__ import annotations

from pulsewright.chip.model import Definition, EachStep, Method, ModeStep
from pulsewright.errors import CannotMake
from pulsewright.rig.model import RailStep, Rig
from pulsewright.sequence import bus
from pulsewright.sequence.build import Builder
from pulsewright.sequence.fuse import fuse
from pulsewright.sequence.identity import pass_gate
from pulsewright.sequence.levels import choose_vcc
from pulsewright.sequence.lower import Lowering, modes_of, writes_bus
from pulsewright.sequence.modes import enter, move_vcc, narrow_vcc, prove_level
from pulsewright.sequence.permits import make_permit, vcc_windows
from pulsewright.sequence.seating import power_up
from pulsewright.sequence.types import Sequence
from pulsewright.units import Rounding, show_address, show_mv, ticks
from pulsewright.wire.ops import Header, Label
from pulsewright.wire.tables import PROGRAM_BYTES, Fail, Flow, Op

BLOCK_BYTES = 256  # a block of this many data bytes: 27 ms of 100 us pulses, or 2.6 ms of line at 1 Mbaud


def _start(definition: Definition, rig: Rig) -> Builder:
    b = Builder(definition, rig)
    power_up(b)
    pass_gate(b)
    return b


def _vcc_used(definition: Definition, rig: Rig, modes: list[str]) -> list[tuple[str, RailStep]]:
    names = ["standby", "read", *modes]
    if definition.identify == "mode":
        names.append(definition.identify_mode)
    used = {}
    for name in names:
        step = definition.supplies[definition.modes[name].vcc]
        used[step.name] = choose_vcc(definition, rig, step)
    return list(used.items())


def _finish(
    b: Builder,
    *,
    kind: str,
    title: str,
    modes: list[str],
    first: int,
    last: int,
    flow: Flow,
    extra_vcc: tuple[tuple[str, RailStep], ...] = (),
    passes: int = 1,
    block_words: int = 0,
    busy: int = 0,
    data_sha256: str = "",
) -> Sequence:
    definition = b.definition
    vcc_mv = b.state.vcc.mv if b.state.vcc else 0
    with b.about("end: everything down in order", part="power"):
        b.emit(Op.END)
    used = [*_vcc_used(definition, b.rig, modes), *extra_vcc]
    narrow_vcc(b, vcc_windows(definition, b.rig, used))
    b.items = fuse(b.items)
    passes = passes if flow is not Flow.NONE else 0
    words = (last - first + 1) * passes
    block_words = block_words or BLOCK_BYTES * 8 // definition.width
    code, origins = b.assemble(Header(definition.width, flow, b.pins.address_lines, words, block_words, passes))
    if len(code) > PROGRAM_BYTES:
        biggest = origins[-1]
        raise CannotMake(
            f"{title}: the program is longer than a board's memory",
            wanted=f"at most {PROGRAM_BYTES} bytes",
            got=f"{len(code)} bytes",
            where=biggest.where,
        )
    raised = [name for name in modes if b.pins.raised_levels(definition.modes[name])]
    permit = make_permit(b, raised, used, code, busy)
    return Sequence(
        kind=kind,
        title=title,
        code=code,
        permit=permit,
        origins=origins,
        first=first,
        last=last,
        vcc_mv=vcc_mv,
        data_sha256=data_sha256,
        notes=_notes(definition),
    )


def _notes(definition: Definition) -> tuple[str, ...]:
    unknown = [step.name for step in definition.supplies.values() if not step.limits_known]
    if not unknown:
        return ()
    return (f"limits of {', '.join(unknown)} are not published: typ ±5 % is taken (common practice)",)


def _span(definition: Definition, first: int, last: int) -> str:
    return f"{show_address(first, definition.words)}..{show_address(last, definition.words)}"


def compile_identify(definition: Definition, rig: Rig) -> Sequence:
    """Seating check and ID bytes, nothing else."""
    b = _start(definition, rig)
    last = definition.words - 1
    return _finish(b, kind="identify", title="identify", modes=[], first=0, last=last, flow=Flow.NONE)


def compile_read(
    definition: Definition,
    rig: Rig,
    first: int,
    last: int,
    *,
    mode: str = "read",
    rail_step: RailStep | None = None,
) -> Sequence:
    """Reads a range to the host, in a mode's VCC or at a rail step that lies inside that step's window."""
    b = _start(definition, rig)
    step = definition.supplies[definition.modes[mode].vcc]
    with b.about(f"read words {_span(definition, first, last)}", part="work", where=definition.modes[mode].where):
        if rail_step is not None:
            move_vcc(b, step, rail_step)
            b.set_lines(b.pins.control_levels(definition.modes[mode]))
            b.state.outputs, b.state.mode = True, mode
        else:
            enter(b, mode)
        b.wait(0)
        b.emit(Op.READ_RUN, wait=ticks(b.line_settle_ps + b.access_ps(mode), Rounding.AT_LEAST))
    at = b.state.vcc.mv if b.state.vcc else step.typ_mv
    title = f"read {_span(definition, first, last)} at {step.name} ({show_mv(at)})"
    extra = ((step.name, rail_step),) if rail_step is not None else ()
    return _finish(b, kind="read", title=title, modes=[mode], first=first, last=last, flow=Flow.READ, extra_vcc=extra)


def compile_blank(definition: Definition, rig: Rig, first: int, last: int) -> Sequence:
    """Every word of a range compared with the erased state, in the firmware."""
    b = _start(definition, rig)
    mode = definition.modes["read"]
    with b.about(f"every word reads {definition.blank:0{definition.width // 4}X}", part="work", where=mode.where):
        enter(b, "read", at=first)
        b.wait(0)
        access = ticks(b.line_settle_ps + b.access_ps("read"), Rounding.AT_LEAST)
        b.emit(Op.SCAN, first=first, count=last - first + 1, word=definition.blank, wait=access)
        b.fail_unless(Fail.NOT_BLANK)
    title = f"blank check {_span(definition, first, last)}"
    return _finish(b, kind="blank", title=title, modes=["read"], first=first, last=last, flow=Flow.NONE)


def _work(b: Builder, method: Method, first: int, last: int, failure: Fail) -> list[str]:
    """A method's steps, its raised rail made and measured first; the modes it goes to."""
    modes = modes_of((*method.steps, *method.finally_))
    top = [b.pins.raised_levels(b.definition.modes[step.mode]) for step in method.steps if isinstance(step, ModeStep)]
    for name in modes:
        levels = b.pins.raised_levels(b.definition.modes[name])
        if levels and levels not in top:  # else it is measured where the steps raise it, before any loop
            with b.about("", part="power"):
                prove_level(b, name)
    enter(b, "standby")
    b.wait(0)
    way_out = b.label() if method.finally_ else None
    Lowering(b, first, last, failure, way_out).run(method.steps)
    if way_out is not None:
        _finally(b, method, way_out, failure)
    return modes


def _finally(b: Builder, method: Method, way_out: Label, failure: Fail) -> None:
    """The steps that end a method, once behind the work that was done and once behind work that failed."""
    done = b.label()
    for ending in (done, way_out):
        with b.about("in the end", part="work", where=method.where):
            if ending is way_out:
                b.place(way_out)
            bus.end_load(b)
            enter(b, "standby")
            b.wait(0)
            begun = b.fork()
            Lowering(b, 0, 0, failure).run(method.finally_)
            bus.end_load(b)
            enter(b, "standby")
            b.wait(0)
            if ending is way_out:
                b.emit(Op.FAIL, why=failure)
                b.place(done)
            else:
                b.emit(Op.BRANCH, when=2, depth=0, to=done.name)
                b.back_to(begun)


def compile_erase(definition: Definition, rig: Rig) -> Sequence:
    """The data sheet's erase, to the last word proven blank; CannotMake for a part without one."""
    if definition.erase is None:
        raise CannotMake(f"{definition.name} has no electrical erase", did="was not asked: nothing was sent")
    b = _start(definition, rig)
    last = definition.words - 1
    modes = _work(b, definition.erase, 0, last, Fail.ERASE)
    busy = _busy(b, definition.erase)
    return _finish(b, kind="erase", title="erase the chip", modes=modes, first=0, last=last, flow=Flow.NONE, busy=busy)


def compile_burn(
    definition: Definition, rig: Rig, first: int, last: int, data_sha256: str, *, protected: bool = False
) -> Sequence:
    """Burns the words of a range that the host marks, each read back; CannotMake for a part that cannot be burnt.

    `protected`: the way of writing a part whose protection is on (or is to be on).
    """
    method = definition.protected if protected else definition.program
    if method is None:
        what = "be programmed with its protection on" if protected else "be programmed"
        raise CannotMake(f"{definition.name} cannot {what}", did="was not asked: nothing was sent")
    b = _start(definition, rig)
    modes = _work(b, method, first, last, Fail.PROGRAM)
    title = f"burn {_span(definition, first, last)}" + (" with protection" if protected else "")
    return _finish(
        b,
        kind="burn",
        title=title,
        modes=modes,
        first=first,
        last=last,
        flow=Flow.WRITE,
        passes=sum(isinstance(step, EachStep) for step in method.steps),
        block_words=definition.page if method.unit == "page" else 0,
        busy=_busy(b, method),
        data_sha256=data_sha256,
    )


def compile_protect(definition: Definition, rig: Rig, *, on: bool) -> Sequence:
    """Software protection switched on or off; CannotMake for a part without."""
    if definition.protect is None:
        raise CannotMake(f"{definition.name} has no software protection", did="was not asked: nothing was sent")
    steps = definition.protect.on if on else definition.protect.off
    method = Method("both", "chip", steps, where=definition.protect.where)
    b = _start(definition, rig)
    last = definition.words - 1
    modes = _work(b, method, 0, last, Fail.PROGRAM)
    title = f"protection {'on' if on else 'off'}"
    busy = _busy(b, method)
    return _finish(b, kind="protect", title=title, modes=modes, first=0, last=last, flow=Flow.NONE, busy=busy)


def _busy(b: Builder, method: Method) -> int:
    """Ticks for which the part may work by itself after the last write of a method; 0 where it writes no command."""
    write = b.definition.write
    if write is None or not writes_bus((*method.steps, *method.finally_)):
        return 0
    return ticks(b.timing_max_ps(write.busy) + write.begin_ps, Rounding.AT_LEAST)
