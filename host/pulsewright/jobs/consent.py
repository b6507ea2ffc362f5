"""What only the operator can say: consent to the voltages (H10), and the word for a part without electronic ID (H9).

The in-process virtual rig has no chip to harm and does not ask; whatever is reached through a port does.
"""

from __future__ import annotations

from collections.abc import Callable

from pulsewright.chip.load import is_shipped, memory_marked
from pulsewright.chip.model import Definition
from pulsewright.errors import ConsentNeeded, FileMistake, UsageMistake, VouchNeeded, Where
from pulsewright.files import read_whole, write_whole
from pulsewright.jobs.state import consents_file, made
from pulsewright.units import show_mv


def voltages(definition: Definition) -> list[str]:
    """Every voltage of the mode table, in full: level, window, pin, absolute maximum, and where each is from."""
    lines = []
    for row in definition.modes.values():
        for role, level in {**row.levels, "VCC": row.vcc}.items():
            step = definition.supplies.get(level)
            if step is None:
                continue
            maximum = definition.maximum_of(role)
            top = f", absolute maximum {show_mv(maximum.mv)}" if maximum is not None and not maximum.above_vcc else ""
            marks = [f"level {step.source}"] if step.source else []
            if maximum is not None and maximum.source:
                marks.append(f"maximum {maximum.source}")
            if not step.limits_known:
                marks.append("limits not published, typ ±5 % taken")
            pins = ", ".join(str(pin) for pin in definition.pin_of(role))
            line = (
                f"{step.name} {show_mv(step.typ_mv)} ({show_mv(step.min_mv)} to {show_mv(step.max_mv)}) "
                f"at {role}, pin {pins}{top}"
            )
            line += f" [{'; '.join(marks)}]" if marks else ""
            if line not in lines:
                lines.append(line)
    return lines


def remembered() -> set[str]:
    """The digests of the definitions whose voltages the operator has accepted before."""
    try:
        text = read_whole(consents_file())
    except FileMistake:
        return set()
    return {line.split()[0] for line in text.decode("utf-8", "replace").splitlines() if line.strip()}


def remember(definition: Definition) -> None:
    """Keep a consent: the definition's digest, its name behind it for a reader of the file."""
    if definition.digest in remembered():
        return
    path = consents_file()
    made(path.parent)
    old = read_whole(path) if path.exists() else b""
    write_whole(path, old + f"{definition.digest} {definition.name}\n".encode())


def check_consent(
    definition: Definition,
    *,
    in_process: bool,
    accepted: str = "",
    ask: Callable[[list[str]], bool] | None = None,
) -> str:
    """H10: how the voltages were agreed to, as words for the record; ConsentNeeded when they were not.

    `accepted` is the digest the operator gave; `ask` puts the question at a terminal, None where there is none. A
    digest that is not this definition's is a UsageMistake: it was meant for another text.
    """
    rows_follow = definition.row is None and any(row.ids for row in definition.makers)
    mistaken = accepted and accepted.lower() != definition.digest
    if mistaken and not (rows_follow and definition.digest in remembered()):  # else it is meant for a maker row
        raise UsageMistake(
            "--accept-voltages names another definition than this one",
            where=Where(definition.path),
            wanted=definition.digest,
            got=accepted,
            hint="read the voltages of the definition as it is now, then give its own hash",
        )
    reasons = memory_marked(definition)
    if not is_shipped(definition):
        reasons.insert(0, "the definition is not one of the shipped ones")
    if not reasons:
        return "not needed"
    if in_process:
        return "not asked: virtual rig in this process"
    if accepted and not mistaken:
        remember(definition)
        return "given by --accept-voltages"
    if definition.digest in remembered():
        return "remembered"
    facts = [*voltages(definition), "because:", *_grouped(reasons)]
    if ask is not None:
        if ask([f"{definition.name}: this job uses", *facts]):
            remember(definition)
            return "given at the prompt"
        facts = []  # the operator has just seen them
    raise ConsentNeeded(
        f"nobody has agreed yet to the voltages of {definition.name}",
        where=Where(definition.path),
        did="nothing was raised",
        facts=[*facts, f"hash {definition.digest}"],
        hint=f"compare each line with a data sheet, then --accept-voltages {definition.digest}",
    )


def _grouped(reasons: list[str]) -> list[str]:
    """The reasons as few lines: each mark once, with all that bears it."""
    import textwrap

    groups: dict[str, list[str]] = {}
    for reason in reasons:
        name, colon, mark = reason.partition(": ")
        groups.setdefault(mark if colon else name, []).extend([name] if colon else [])
    lines = [f"{mark}: {', '.join(names)}" if names else mark for mark, names in groups.items()]
    return [row for line in lines for row in textwrap.wrap(line, 110, initial_indent="  ", subsequent_indent="    ")]


def check_vouch(definition: Definition, raises: bool, vouch: str) -> None:
    """H9: a raised level without an electronic ID needs the operator's word, and the word never covers an ID."""
    if vouch and definition.identify != "none":
        raise UsageMistake(
            f"--vouch cannot stand in for the ID of {definition.name}",
            where=Where(definition.path),
            wanted="a definition, or maker row, without electronic ID",
            got=f"identify by {'the A9 level' if definition.identify == 'mode' else definition.identify}",
            hint="leave --vouch away: the ID bytes decide",
        )
    if raises and definition.identify == "none" and not vouch.strip():
        raise VouchNeeded(
            f"{definition.name} has no electronic ID: nothing but the print on the chip says what it is",
            where=Where(definition.path),
            wanted='--vouch "what is printed on the chip"',
            did="nothing was raised",
            hint="read the print on the chip, compare it with the definition, then vouch for it",
        )
