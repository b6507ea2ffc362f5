"""The sequences a job may come to, in their order, without a rig: what `sequence` shows."""

from __future__ import annotations

from pulsewright.chip.model import Definition
from pulsewright.errors import UsageMistake, Where
from pulsewright.jobs.erase import check_erasable, overwrites
from pulsewright.jobs.plan import verify_steps
from pulsewright.rig.model import Rig
from pulsewright.sequence.compile import (
    compile_blank,
    compile_burn,
    compile_erase,
    compile_identify,
    compile_protect,
    compile_read,
)
from pulsewright.sequence.types import Sequence
from pulsewright.units import show_address


def outline(definition: Definition, rig: Rig, job: str, first: int, last: int, data_sha256: str = "") -> list[Sequence]:
    """The sequences of "identify", "read", "blank-check", "erase", "burn", "protect" or "verify".

    Saving reads twice with the same sequence: it stands once. CannotMake: the rig has no such step; UsageMistake:
    a range outside the chip, an erase of a UV part, a job that makers do differently without a maker.
    """
    if not 0 <= first <= last < definition.words:
        raise UsageMistake(
            f"the range does not lie in {definition.name}",
            wanted=f"FIRST..LAST within 0000..{show_address(definition.words - 1, definition.words)}",
            got=f"{show_address(first, definition.words)}..{show_address(last, definition.words)}",
            hint="without --range the whole chip is meant",
        )
    if job == "identify":
        return [compile_identify(definition, rig)]
    if job == "read":
        return [compile_read(definition, rig, first, last)]
    if job == "blank-check":
        return [compile_blank(definition, rig, first, last)]
    _check_maker(definition, job)
    save = compile_read(definition, rig, first, last)
    if job == "erase":
        check_erasable(definition)
        if not overwrites(definition):
            return [compile_read(definition, rig, 0, definition.words - 1), compile_erase(definition, rig)]
        blank = compile_blank(definition, rig, first, last)
        return [save, *_writes(definition, rig, first, last, data_sha256), blank]
    if job == "protect":
        return [compile_protect(definition, rig, on=True), compile_protect(definition, rig, on=False)]
    verify = [
        compile_read(definition, rig, first, last, mode=step.mode, rail_step=step.rail_step)
        for step in verify_steps(definition, rig)
    ]
    if job == "verify":
        return verify
    erase = [compile_erase(definition, rig)] if definition.erase is not None else []
    return [save, *erase, *_writes(definition, rig, first, last, data_sha256), *verify]


def _writes(definition: Definition, rig: Rig, first: int, last: int, data_sha256: str) -> list[Sequence]:
    ways = [False] if definition.protected is None else [False, True]
    return [compile_burn(definition, rig, first, last, data_sha256, protected=way) for way in ways]


def _check_maker(definition: Definition, job: str) -> None:
    """UsageMistake where the job differs by maker, the ID would tell, and no maker was named."""
    rows = [row.maker for row in definition.makers if row.ids]
    if definition.row is None and len(rows) > 1:
        raise UsageMistake(
            f"{job} of {definition.name} differs by maker: the job reads the ID first and goes by that",
            where=Where(definition.path, key="makers"),
            wanted=f"--maker and one of {', '.join(rows)}",
            hint="with --maker the sequences of that maker's part are shown",
        )
