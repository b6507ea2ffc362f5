"""How a run can end, in values and in words."""

from __future__ import annotations

from pulsewright.errors import Interrupted, LinkFault, RigFault, RigRestarted
from pulsewright.link import diagnosis
from pulsewright.link.blocks import Window
from pulsewright.link.results import Counters, RunResult, Trouble
from pulsewright.wire.fields import WireMistake, unpack_from
from pulsewright.wire.frames import Hello
from pulsewright.wire.tables import BLOBS, DEAD_MAN_MS, Fault, Outcome

NOTHING_RAISED = "VCC is off and nothing is raised: no sequence was running"
SAFE = "made itself safe: raised levels off, chip in standby, VCC off"
UNKNOWN = f"not known; by itself it makes everything safe {DEAD_MAN_MS} ms after the last frame it heard"
_NO_MATCH = 0xFF


def result_of(outcome: Outcome, trouble: Trouble | None, rest: bytes, window: Window, counters: Counters) -> RunResult:
    """The result of a run from its closing answer; `rest` is what stands behind the fault. RigFault if it is cut."""
    try:
        done, at = unpack_from(BLOBS["run_done"], rest)
        tail, _ = unpack_from(BLOBS["run_tail"], rest, at)
    except WireMistake as mistake:
        raise RigFault("the rig's closing answer cannot be read", got=str(mistake), did=SAFE,
                       hint="flash the rig's firmware anew") from None
    raw = tail["readings"]
    readings = tuple(
        (int.from_bytes(raw[i : i + 2], "little"), int.from_bytes(raw[i + 2 : i + 4], "little"))
        for i in range(0, len(raw) - 3, 4)
    )
    return RunResult(
        outcome=outcome,
        trouble=trouble,
        matched=None if done["matched"] == _NO_MATCH else done["matched"],
        id_bytes=bytes(tail["id"]),
        readings=readings,
        data=window.data,
        blocks=tuple(sorted(window.results, key=lambda block: block.index)),
        counters=counters,
        tries=done["tries"],
    )


def _undefined(trouble: Trouble | None, kind: str) -> list[str]:
    """What a pulse that was cut in a sequence of this kind has left undefined."""
    if trouble is None or not trouble.pulsing:
        return []
    what = "the whole chip" if kind == "erase" else f"word {trouble.address:04X}"
    return [f"{what} is undefined: its pulse was cut"]


def interrupted(result: RunResult, kind: str) -> Interrupted:
    """What the operator is told after Ctrl-C in a sequence of this kind; the rig has said that it is safe."""
    facts = [f"{sum(block.words for block in result.blocks)} words were answered for"]
    trouble = result.trouble
    facts += _undefined(trouble, kind)
    if trouble is not None and trouble.code not in (Fault.ABORTED, Fault.NONE):
        facts.append(f"the rig also says {trouble.name.replace('_', ' ')} ({trouble.numbers()})")
    did = SAFE if result.outcome is not Outcome.DONE else "had just ended the sequence, and is safe"
    return Interrupted("stopped by the operator", did=did, facts=facts, hint="the job can be run again")


def restarted(boot: int, now: int, counters: Counters, *, running: bool = True) -> RigRestarted:
    """The boot number changed under a session; `running`: perhaps under a sequence."""
    if not running:
        return diagnosis.restarted_early(boot, now, counters.facts())
    return RigRestarted(
        "the rig was reset while it worked",
        wanted=f"boot number {boot}",
        got=f"boot number {now}",
        did="its reset opens every raised switch and cuts VCC; nothing of the sequence goes on, "
        "and a word that was being written is undefined",
        hint="look at the rig's supply and cable, then read the chip to see how far it got, and run the job again",
        facts=counters.facts(),
    )


def lost(
    stage: str, running: bool, hello: Hello | None, latched: Trouble | None, kind: str, counters: Counters,
    waited_us: int,
) -> LinkFault:
    """Nothing valid came for too long. `latched`: what the rig tells of it since, where it greets again."""
    facts = list(counters.facts())
    if not running:
        did = NOTHING_RAISED
    elif hello is None:
        did = UNKNOWN
    else:
        did = f"answers greetings again, with the same boot number; {SAFE}"
        if hello.fault:
            name = Fault(hello.fault).name.lower() if hello.fault in Fault._value2member_map_ else str(hello.fault)
            facts.append(f"its latched fault: {name.replace('_', ' ')}, op {hello.fault_op:02X} at {hello.fault_pc}")
            facts += _undefined(latched, kind)
    return LinkFault(
        f"the link was lost while {stage}",
        wanted=f"a valid frame within {waited_us / 1_000_000:g} s",
        got="none",
        did=did,
        hint="keep hands off while the lamp is lit; check cable and supply, then run the job again",
        facts=facts,
    )
