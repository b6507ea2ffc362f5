"""The sequences a job may come to, in their order, without a rig: what `sequence` shows."""

from __future__ import annotations

from pulsewright.chip.model import Definition
from pulsewright.errors import UsageMistake
from pulsewright.jobs.erase import check_erasable
from pulsewright.jobs.plan import verify_steps
from pulsewright.rig.model import Rig
from pulsewright.sequence.compile import compile_blank, compile_burn, compile_erase, compile_identify, compile_read
from pulsewright.sequence.types import Sequence
from pulsewright.units import show_address


def outline(definition: Definition, rig: Rig, job: str, first: int, last: int, data_sha256: str = "") -> list[Sequence]:
    """The sequences of "identify", "read", "blank-check", "erase", "burn" or "verify".

    Saving reads twice with the same sequence: it stands once. CannotMake: the rig has no such step; UsageMistake:
    a range outside the chip, an erase of a UV part.
    """
    if not 0 <= first <= last < definition.words:
        raise UsageMistake(
            f"the range does not lie in {definition.name}",
            wanted=f"FIRST..LAST within 0000..{show_address(definition.words - 1, definition.words)}",
            got=f"{show_address(first, definition.words)}..{show_address(last, definition.words)}",
        )
    if job == "identify":
        return [compile_identify(definition, rig)]
    if job == "read":
        return [compile_read(definition, rig, first, last)]
    if job == "blank-check":
        return [compile_blank(definition, rig, first, last)]
    if job == "erase":
        check_erasable(definition)
        return [compile_read(definition, rig, 0, definition.words - 1), compile_erase(definition, rig)]
    verify = [
        compile_read(definition, rig, first, last, mode=step.mode, rail_step=step.rail_step)
        for step in verify_steps(definition, rig)
    ]
    if job == "verify":
        return verify
    erase = [compile_erase(definition, rig)] if definition.erase is not None else []
    save = compile_read(definition, rig, first, last)
    return [save, *erase, compile_burn(definition, rig, first, last, data_sha256), *verify]
