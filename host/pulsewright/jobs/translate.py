"""What a rig's answer means at the bench: fault numbers become one of the errors, with volts, pins and file lines."""

from __future__ import annotations

from collections.abc import Callable
from collections.abc import Sequence as Many

from pulsewright.chip.model import Definition, IdCell
from pulsewright.errors import (
    ChipFault,
    Difference,
    IdentityRefused,
    Interrupted,
    PulsewrightError,
    RigFault,
    SeatingRefused,
    Tripped,
    VouchNeeded,
)
from pulsewright.jobs.pulses import has_pulses, tries_of
from pulsewright.jobs.story import MADE_SAFE, Story, measured
from pulsewright.link.results import RunResult
from pulsewright.rig.model import Rig
from pulsewright.sequence.types import Sequence
from pulsewright.units import show_address, show_mv, show_ticks
from pulsewright.wire.tables import Fail, Fault, Op, Outcome

IMITATION = (
    "an image that imitates the ID has the same look: the 64 cells read alike with and without the identify level"
)

_TRIPS = {
    Fault.DEAD_MAN: "no word from this program for 500 ms",
    Fault.MEASURED_OUTSIDE: "a level did not come into its window in time",
    Fault.VCC_OUTSIDE: "VCC left the window of the step in force",
    Fault.RAISED_OUTSIDE: "the raised rail left its bounds",
    Fault.STILL_RAISED: "a raised position did not fall in time",
    Fault.STILL_POWERED: "VCC did not fall in time",
    Fault.GATE_SHUT: "a raised level or work was wanted while the gate was shut",
    Fault.NOT_IN_PERMIT: "something outside the permit was wanted",
    Fault.ABOVE_CEILING: "a level above a ceiling was wanted",
    Fault.NO_VCC: "a raised level was wanted without VCC",
    Fault.BUS_CONFLICT: "data was to be driven while the chip may drive it",
    Fault.LINE_AT_RAISED: "a line at a raised position was at the wrong level",
    Fault.DRIVEN_TOO_LOW: "driven lines were wanted at a low VCC",
    Fault.BIAS_REFUSED: "a weak pull was wanted that this moment does not allow",
    Fault.NOT_SEATED: "work was wanted before the seating check",
    Fault.NOT_MEASURED: "a raised level was wanted before its rail was measured",
}


def translate(
    result: RunResult, sequence: Sequence, definition: Definition, rig: Rig, want: bytes | None = None
) -> PulsewrightError | None:
    """The error a run's outcome stands for; None when it was done."""
    if result.outcome is Outcome.DONE:
        return None
    fault = result.trouble
    if fault is None:
        return RigFault(f"the rig ended with {result.outcome.name.lower()} and gave no reason", did=MADE_SAFE)
    story = Story(sequence, definition, rig, result, fault, want)
    if result.outcome is Outcome.ABORTED or fault.code == Fault.ABORTED:
        return _interrupted(story)
    if result.outcome is Outcome.REFUSED:
        return _refused(story)
    if fault.code == Fault.FAILED:
        return _FAILS.get(fault.got, _unknown_fail)(story)
    if fault.code == Fault.WRONG_ID:
        return _wrong_id(story)
    if fault.code == Fault.NO_ID_MODE:
        return _no_id_mode(story)
    if fault.code == Fault.GATE_SHUT and story.instruction is not None and story.instruction.op is Op.GATE:
        return _no_button(story)
    seating = story.origin is not None and story.origin.part == "seating"
    if seating and fault.code in (Fault.MEASURED_OUTSIDE, Fault.VCC_OUTSIDE):
        return _seat_measure(story)
    return _tripped(story)


def _cut(story: Story) -> str:
    """What a pulse that was cut has left undefined: an erase pulse means every word, not the one it was given at."""
    erase = story.definition.erase
    whole = story.sequence.kind == "erase" and erase is not None and erase.unit == "chip"
    what = "every word" if whole else f"word {story.address()}"
    return f"a pulse was cut: {what} undefined"


def _interrupted(story: Story) -> PulsewrightError:
    facts = []
    if story.fault.pulsing:
        facts.append(_cut(story))
    return Interrupted(
        f"interrupted during {story.sequence.title}",
        step=story.step(),
        did=MADE_SAFE,
        facts=facts,
        hint="the same command again",
    )


def _refused(story: Story) -> PulsewrightError:
    try:
        name = Fault(story.fault.code).name.lower()
    except ValueError:
        name = str(story.fault.code)
    return RigFault(
        f"the rig refused {story.sequence.title}: {name}",
        step=story.step(),
        did="nothing was done",
        hint="rig show tells what the rig is; a rig with other firmware says so when it is opened",
    )


# ---- seating ------------------------------------------------------------------------------------


def _data_pins(story: Story, bits: int) -> str:
    pins = story.definition.pins["D"]
    named = [f"D{bit} (pin {pin})" for bit, pin in enumerate(pins) if bits >> bit & 1]
    return ", ".join(named) if named else "no data line"


def _seating(story: Story, what: str, got: str, hint: str, wanted: str = "") -> PulsewrightError:
    return SeatingRefused(
        what, step=story.step(), wanted=wanted, got=got, did=f"nothing was raised; {MADE_SAFE}", hint=hint
    )


def _stands_up(story: Story) -> PulsewrightError:
    return _seating(
        story,
        "with VCC off a data line stands up",
        _data_pins(story, story.fault.sample),
        "lift the chip and look for a short between contacts, or a chip that is turned round",
        wanted="every line low while VCC is off",
    )


def _data_low(story: Story) -> PulsewrightError:
    return _seating(
        story,
        "with the outputs off and a weak pull up, a data line stays low",
        _data_pins(story, ~story.fault.sample),
        "is the chip turned round or shifted? then a short of a data line, or a CE or OE contact that is lifted",
        wanted="every data line high",
    )


def _data_high(story: Story) -> PulsewrightError:
    return _seating(
        story,
        "with the outputs off and a weak pull down, a data line stays high",
        _data_pins(story, story.fault.sample),
        "is the chip turned round or shifted? then a short of a data line, or a CE or OE contact that is lifted",
        wanted="every data line low",
    )


def _floating(story: Story) -> PulsewrightError:
    moved = story.fault.kept & ~story.fault.sample
    every = (1 << story.definition.width) - 1
    if moved & every == every:
        what = "no chip answers: with the outputs on, every data line still follows the weak pull"
        hint = "is there a chip in the socket? then a lifted CE, OE, GND or VCC contact"
    else:
        what = "with the outputs on, a data line still follows the weak pull"
        hint = "clean and straighten the pins named, seat the chip again"
    return _seating(story, what, _data_pins(story, moved), hint, wanted="the chip drives every data line")


def _other_power(story: Story) -> PulsewrightError:
    return _seating(
        story,
        "a position that is VCC on another package does not stay low",
        "it reads high",
        f"is this a {story.definition.package} part at the bottom of the socket? shift it down to the end",
        wanted="the free power positions low under a weak pull down",
    )


def _seat_measure(story: Story) -> PulsewrightError:
    name, got, wanted = measured(story)
    return _seating(
        story,
        f"{name} is not where it would be with this chip seated",
        got,
        "is the chip turned round, shifted by a row, or another part? then look for a short",
        wanted=wanted,
    )


# ---- identity -----------------------------------------------------------------------------------


def cells_text(cells: Many[IdCell], words: int) -> str:
    """ID cells as text: "DA at 0000 (manufacturer), 08 at 0001 (device)"."""
    return ", ".join(
        f"{cell.is_:02X} at {show_address(cell.at, words)}" + (f" ({cell.what})" if cell.what else "") for cell in cells
    )


def wanted_ids(definition: Definition) -> list[str]:
    """The IDs that would be accepted, with their makers."""
    rows = (definition.row,) if definition.row is not None else definition.makers
    return [f"{cells_text(cells, definition.words)}: maker row {row.maker}" for row in rows for cells in row.ids]


def _id_text(story: Story) -> str:
    cells = [cell for row in story.definition.makers for cells in row.ids for cell in cells]
    places = sorted({cell.at for cell in cells})
    read = story.result.id_bytes
    if len(read) == len(places):
        return ", ".join(
            f"{value:02X} at {show_address(at, story.definition.words)}" for at, value in zip(places, read, strict=True)
        )
    return read.hex(" ").upper() or "nothing"


def _wrong_id(story: Story) -> PulsewrightError:
    return IdentityRefused(
        f"the chip's ID is not that of {story.definition.name}",
        where=story.where(),
        wanted="; ".join(wanted_ids(story.definition)),
        got=_id_text(story),
        did=f"the identify level dropped at once; {MADE_SAFE}",
        hint="read the print on the chip; another maker's version has its own row (--maker) or its own definition",
    )


def _no_id_mode(story: Story) -> PulsewrightError:
    return IdentityRefused(
        "the chip reads the same with and without the identify level: it has no ID mode, or the level did not reach it",
        where=story.where(),
        wanted="; ".join(wanted_ids(story.definition)),
        got=_id_text(story),
        did=f"the identify level dropped at once; {MADE_SAFE}",
        facts=[IMITATION],
        hint="read the print on the chip; a lifted A9 contact looks the same too",
    )


def _no_button(story: Story) -> PulsewrightError:
    return VouchNeeded(
        "the board's button is not held, nor its jumper set",
        step=story.step(),
        wanted="the button or jumper, for a part without electronic ID or a level above 14.5 V",
        did=f"nothing was raised; {MADE_SAFE}",
        hint="read the print on the chip once more, hold the button, run it again",
    )


# ---- the chip -----------------------------------------------------------------------------------


def _vcc(story: Story, supply: str) -> str:
    step = story.definition.supplies.get(supply)
    return f"VCC {show_mv(step.typ_mv)}" if step is not None else f"VCC {show_mv(story.sequence.vcc_mv)}"


def _erase(story: Story) -> PulsewrightError:
    most = tries_of(story.definition.erase) if story.definition.erase is not None else 0
    verify = story.definition.modes.get("erase_verify")
    vcc = _vcc(story, verify.vcc if verify is not None else "")
    return ChipFault(
        f"the chip does not erase: {most} of {most} pulses used up",
        where=story.where(),
        step=story.step(),
        wanted=f"every word {story.word(story.definition.blank)} at {vcc}",
        got=f"word {story.address()} reads {story.word(story.fault.sample)}, the first that is not blank",
        did=MADE_SAFE,
        hint="erase once more; a chip that stays so is worn out or has a dead bit",
    )


def _program(story: Story) -> PulsewrightError:
    method = story.definition.program
    most = tries_of(method) if method is not None else 0
    used_up = f": {most} of {most} pulses used up" if method is not None and has_pulses(method) else ""
    at = story.fault.address
    wanted = story.word(story.want[at]) if story.want is not None and at < len(story.want) else "the image's word"
    return ChipFault(
        f"word {story.address()} does not take its value{used_up}" if not used_up
        else f"word {story.address()} does not program{used_up}",
        where=story.where(),
        step=story.step(),
        wanted=wanted,
        got=story.word(story.fault.sample),
        did=MADE_SAFE,
        hint="the same burn again: a word that stays so is dead; where others fail then, VPP may sag under load"
        if used_up
        else "the same burn again: a word that stays so is dead; a part that takes no word at all may be protected",
    )


def _poll(story: Story) -> PulsewrightError:
    return ChipFault(
        f"the chip did not report done at {story.address()} in time",
        where=story.where(),
        step=story.step(),
        got=story.word(story.fault.sample),
        did=MADE_SAFE,
        hint="the part took longer than its sheet allows: is it another part, or another maker's? else it is worn",
    )


def _not_blank(story: Story) -> PulsewrightError:
    return Difference(
        f"not blank: word {story.address()} reads {story.word(story.fault.sample)}",
        wanted=f"every word {story.word(story.definition.blank)}",
        got=f"{story.word(story.fault.sample)} at {story.address()}, the first that is not blank",
        did=MADE_SAFE,
        hint="erase it, or read it first",
    )


def _unknown_fail(story: Story) -> PulsewrightError:
    return RigFault(f"{story.sequence.title} failed for a reason unknown here: {story.fault.got}", did=MADE_SAFE)


_FAILS: dict[int, Callable[[Story], PulsewrightError]] = {
    Fail.SEAT_STANDS_UP: _stands_up,
    Fail.SEAT_DATA_LOW: _data_low,
    Fail.SEAT_DATA_HIGH: _data_high,
    Fail.SEAT_FLOATING: _floating,
    Fail.SEAT_OTHER_POWER: _other_power,
    Fail.ERASE: _erase,
    Fail.PROGRAM: _program,
    Fail.POLL: _poll,
    Fail.NOT_BLANK: _not_blank,
}


# ---- trips --------------------------------------------------------------------------------------


def _tripped(story: Story) -> PulsewrightError:
    code = story.fault.code
    known = code in list(Fault)
    text = _TRIPS.get(Fault(code), Fault(code).name.lower()) if known else f"reason {code}"
    facts = [f"after {show_ticks(story.fault.tick)} on the rig's clock"]
    if story.fault.pulsing:
        facts.append(_cut(story))
    wanted = got = ""
    if code in (
        Fault.MEASURED_OUTSIDE, Fault.VCC_OUTSIDE, Fault.RAISED_OUTSIDE, Fault.STILL_RAISED, Fault.STILL_POWERED
    ):  # fmt: skip
        name, got, wanted = measured(story)
        text += "" if name in text else f": {name}"
    return Tripped(
        f"the rig tripped: {text}",
        where=story.where(),
        step=story.step(),
        wanted=wanted,
        got=got,
        did=MADE_SAFE,
        facts=facts,
        hint="check the cable to the rig, and that this computer did not sleep; then run the job again"
        if code == Fault.DEAD_MAN
        else "look at supply and wiring; a short on the chip or in the socket pulls a rail down",
    )
