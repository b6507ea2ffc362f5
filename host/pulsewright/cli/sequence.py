"""sequence: what a job would send, op by op, each with its origin, the permit in volts, and what the proof says."""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING

from pulsewright.cli.desk import HIGH_VOLTAGE, Desk, Parser, add, address, address_range, byte

if TYPE_CHECKING:
    from pulsewright.chip.model import Definition

JOBS = ("identify", "read", "blank-check", "erase", "burn", "protect", "verify")


def add_commands(commands: argparse._SubParsersAction[Parser]) -> None:
    """The commands of this group."""
    parser = add(
        commands,
        "sequence",
        _sequence,
        what="show the compiled sequences of a job and their proof; nothing is sent",
        example="pulsewright sequence 27e512 burn image.hex",
        cautions=[HIGH_VOLTAGE],
    )
    parser.add_argument("chip", metavar="CHIP", help="a shipped part (see `chips`) or the path of a definition")
    parser.add_argument("job", metavar="JOB", choices=JOBS, help=", ".join(JOBS))
    parser.add_argument("image", metavar="IMAGE", nargs="*", help="for burn and verify: names the data by its hash")
    parser.add_argument("--maker", metavar="NAME", help="the maker row")
    parser.add_argument("--range", metavar="FIRST..LAST", type=address_range, help="the words to work on")
    parser.add_argument("--origin", metavar="ADDR", type=address, default=0, help="as in `burn`")
    parser.add_argument("--fill", metavar="BYTE", type=byte, help="as in `burn`")


def _sequence(args: argparse.Namespace, desk: Desk) -> int:
    from pulsewright.chip.load import load
    from pulsewright.jobs.outline import outline
    from pulsewright.report.sequences import sequence_facts, sequence_lines
    from pulsewright.rig.file import load_rig
    from pulsewright.sequence.proof import prove
    from pulsewright.units import show_count

    definition, rig = load(args.chip, maker=args.maker), load_rig()
    first, last = args.range or (0, definition.words - 1)
    sequences = outline(definition, rig, args.job, first, last, _hash(args, definition))
    lines: list[str] = []
    rows = []
    findings = 0
    for one in sequences:
        proof = prove(one.code, one.permit, definition, rig)
        findings += len(proof.findings)
        lines += [*sequence_lines(one, proof, definition, rig), ""]
        rows.append(sequence_facts(one, proof, definition, rig))
    summary = (
        f"{args.job} on {definition.name}: {show_count(len(sequences), 'sequence')}, "
        f"{show_count(findings, 'finding') + ' of the proof' if findings else 'accepted by the proof'}"
    )
    exit_code = 3 if findings else 0
    if desk.as_json:
        return desk.answer([summary], {"sequences": rows}, exit_code)
    return desk.answer([*lines, summary], exit_code=exit_code)


def _hash(args: argparse.Namespace, definition: Definition) -> str:
    from pulsewright.image.memory import fit
    from pulsewright.image.several import load_files
    from pulsewright.jobs.plan import sha256

    if not args.image:
        return ""
    first, last = args.range or (0, None)
    fitted = fit(
        load_files(args.image)[0],
        definition.words,
        origin=args.origin,
        fill=args.fill,
        first=first,
        last=last,
        blank=definition.blank,
        name=definition.name,
    )
    return sha256(fitted.data[first : definition.words if last is None else last + 1])
