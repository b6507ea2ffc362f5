"""For every safety rule a job that is refused while it runs: by the job itself, by its proof, or by the rig.

The rig's refusals are of sequences that no proof was asked about: compiled, bent in one place and sealed by hand, as a
host would send them that ignores its proof.
"""

from __future__ import annotations

import dataclasses
import re
import zlib
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest

from pulsewright.chip.load import load
from pulsewright.errors import ConsentNeeded, Interrupted, ProofRefused, PulsewrightError, VouchNeeded
from pulsewright.image.memory import Fitted, fit, image_of
from pulsewright.jobs.burn import burn
from pulsewright.jobs.erase import erase
from pulsewright.link.inprocess import InProcess
from pulsewright.link.results import Block
from pulsewright.link.session import Session
from pulsewright.rig.file import load_rig
from pulsewright.sequence import compile as compiler
from pulsewright.virtual.bench import Bench as Kept
from pulsewright.wire.ops import assemble, decode_program, ins
from pulsewright.wire.tables import Fault, Op, Rail
from tests.end_to_end.bench_kit import MODELS, PARTS, Bench, bench
from tests.jobs.fake import WORDS, FakeSession, context
from tests.sequence.mutate import labelled
from tests.sequence.proof_bends import Bend, compiled, drop, part_of, put, set_
from tests.sequence.proof_programs import MS, measure
from tests.sequence.test_planted import PLANTED

__all__ = ["bench"]

# ---- refused by what the job finds in the socket, or by what it was not told ----------------------------------------

SEEN: list[tuple[str, str, tuple[str, ...], tuple[str, ...], int, str]] = [
    # rule, part, how the chip is, what the job is told, exit, error
    ("H1", "27e512", ("--fault", "reversed"), (), 3, "SeatingRefused"),
    ("H1", "27e512", ("--fault", "absent"), (), 3, "SeatingRefused"),
    ("H1", "27e512", ("--fault", "vcc-offset=-400"), (), 3, "SeatingRefused"),
    ("H2", "27e512", ("--fault", "wrong-id=5A,A5"), (), 3, "IdentityRefused"),
    ("H2", "27c256", ("--maker", "st"), ("--maker", "Atmel"), 3, "IdentityRefused"),
    ("H5", "27e512", ("--fault", "slow-fall=3000"), (), 5, "Tripped"),
    ("H8", "27e512", ("--fault", "rail-offset=400"), (), 5, "Tripped"),
    ("H9", "2716", ("--model", "m2716.py", "--jumper"), (), 3, "VouchNeeded"),
    ("H9", "2716", ("--model", "m2716.py"), ("--vouch", "M2716"), 3, "VouchNeeded"),
    ("H9", "27e512", ("--jumper",), ("--vouch", "27E512"), 2, "UsageMistake"),
]


@pytest.mark.parametrize(("rule", "part", "chip", "told", "code", "error"), SEEN)
def test_a_job_refuses_what_it_finds(
    rule: str, part: str, chip: tuple[str, ...], told: tuple[str, ...], code: int, error: str, bench: Bench
) -> None:
    """The burn ends with the rule's exit code and error, no word changed, and the judge has nothing to say."""
    options = tuple(str(MODELS / word) if word.endswith(".py") else word for word in chip)
    bench.new(part, options=options)
    before = bench.contents()
    name = str(PARTS / f"{part}.toml") if (PARTS / f"{part}.toml").exists() else part
    answer = bench.job("burn", name, str(bench.image(4)), *told)

    assert (answer["exit"], answer["error"]) == (code, error), answer
    assert bench.contents() == before or rule in ("H5", "H8")
    assert not bench.seen()["damaged"]


def test_a_rail_that_gives_way_trips(bench: Bench) -> None:
    """H8: a rail that sags under the erase is seen by the look once a millisecond: exit 5, and nothing is erased."""
    bench.new("27e512", contents="noise", options=("--fault", "rail-sag=5"))
    before = bench.contents()
    answer = bench.job("erase", "27e512", "--no-save")
    assert (answer["exit"], answer["error"]) == (5, "Tripped"), answer
    assert bench.contents() == before


def test_a_window_that_no_step_meets_is_refused_with_both_sums(bench: Bench, tmp_path: Path) -> None:
    """H3: VPP of 12.75 V +-50 mV is less than the rail's error: exit 5, nothing sent, highest and lowest level told."""
    bench.new("27c64", options=("--model", str(MODELS / "m27c64.py")))
    text = (PARTS / "27c64.toml").read_text(encoding="utf-8")
    narrow = text.replace('min = "12.5 V", max = "13.0 V"', 'min = "12.7 V", max = "12.8 V"')
    assert narrow != text
    path = tmp_path / "narrow.toml"
    path.write_text(narrow, encoding="utf-8")
    answer = bench.job("burn", str(path), str(bench.image(4)))

    assert (answer["exit"], answer["error"]) == (5, "CannotMake")
    assert re.search(r"at most 12\.\d+ V of 12\.8 V, at least 12\.\d+ V of 12\.7 V", answer["got"])
    assert bench.seen()["pins"].get("1", {"max_mv": 0})["max_mv"] < 6_000


def image() -> Fitted:
    """Four bytes that a blank chip takes."""
    return fit(image_of(b"\x12\x34\x56\x78"), WORDS, name="27e512")


def test_a_port_gets_nothing_without_consent() -> None:
    """H10: levels from memory, a rig behind a port, and nobody agreed: exit 3, nothing sent."""
    session = FakeSession()
    with pytest.raises(ConsentNeeded) as refusal:
        burn(context(session, in_process=False), image())
    assert (refusal.value.exit_code, session.kinds) == (3, [])


def test_a_part_without_id_gets_nothing_without_the_word() -> None:
    """H9: no electronic ID and no --vouch: exit 3, no sequence sent that raises."""
    definition = dataclasses.replace(load("27e512"), identify="none", identify_mode="", makers=(), row=None)
    session = FakeSession()
    with pytest.raises(VouchNeeded) as refusal:
        burn(context(session, definition=definition), image())
    assert refusal.value.exit_code == 3
    assert "burn" not in session.kinds


# ---- refused by the proof that the job asks -------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("rule", "plant", "compile_it"), PLANTED, ids=[f"{rule} {plant.__name__}" for rule, plant, _ in PLANTED]
)
def test_a_job_sends_nothing_that_its_proof_refuses(
    rule: str,
    plant: Callable[[pytest.MonkeyPatch], None],
    compile_it: Callable[..., object],
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """A compiler with a fault in it: exit 3, the rule among the facts, and the work itself is never sent."""
    session = FakeSession()
    plant(monkeypatch)

    def job() -> None:
        if compile_it.__name__ == "burn":
            burn(context(session), image())
        else:
            erase(context(session))

    with pytest.raises(ProofRefused) as refusal:
        job()
    assert refusal.value.exit_code == 3
    assert any(rule in fact for fact in refusal.value.facts)
    assert not {"burn", "erase"} & set(session.kinds)


# ---- refused by the rig ---------------------------------------------------------------------------------------------

AT_14_V = (ins(Op.RAIL, rail=Rail.RAISED, step=5), ins(Op.WAIT, ticks=25 * MS), measure(1, 475, 491))
VCC_MOVES = (ins(Op.RAIL, rail=Rail.VCC, step=3), ins(Op.SWITCHES, on=4))
BY_THE_RIG: list[tuple[str, str, str, Bend, Fault]] = [
    ("H1", "27e512", "burn", drop(Op.SEATED), Fault.NOT_SEATED),
    ("H2", "27e512", "burn", drop(Op.GATE), Fault.GATE_SHUT),
    ("H2", "27e512", "burn", set_(Op.SWITCHES, 0, on=4), Fault.GATE_SHUT),
    ("H3", "27e512", "erase", set_(Op.SWITCHES, 2, on=0x15), Fault.NOT_IN_PERMIT),
    ("H3", "27e512", "burn", put(Op.PULSE_VERIFY, 0, *AT_14_V), Fault.ABOVE_CEILING),
    ("H4", "27e512", "burn", put(Op.PULSE_VERIFY, 0, *VCC_MOVES), Fault.NO_VCC),
    ("H6", "27e512", "read", put(Op.READ_RUN, 0, ins(Op.DRIVE, word=1)), Fault.BUS_CONFLICT),
    ("H7", "27e512", "erase", set_(Op.PULSE, 0, max=0), Fault.PULSE_WITHOUT_END),
    ("H8", "27e512", "burn", drop(Op.MEASURE, 9), Fault.NOT_MEASURED),
    ("H11", "27e512", "erase", drop(Op.HIGH, 2), Fault.DRIVEN_TOO_LOW),
]


@pytest.mark.parametrize(("rule", "part", "kind", "bend", "fault"), BY_THE_RIG)
def test_the_rig_refuses_a_sequence_sealed_by_hand(rule: str, part: str, kind: str, bend: Bend, fault: Fault) -> None:
    """What no proof let through is refused by the rig by itself, by number; no cell changes, no pin is hurt."""
    sequence = compiled(part_of(part), kind)
    program = decode_program(sequence.code)
    code, _ = assemble(program.header, bend(labelled(program)))
    sealed = replace(sequence, code=code, permit=replace(sequence.permit, crc32=zlib.crc32(code)))
    kept = Kept.fresh(part, contents="noise:4")
    before = bytes(kept.chip.cells)
    session = Session(InProcess(kept.rig(1)))
    session.connect()
    try:
        result = session.run(sealed, [Block(0, 4, None, bytes(4))] if kind == "burn" else None)
        got = result.trouble.code if result.trouble else 0
    except PulsewrightError as error:
        got = next((one.value for one in Fault if one.name.lower().replace("_", " ") in str(error).lower()), -1)

    assert got == fault, rule
    assert bytes(kept.chip.cells) == before or rule == "H11"  # which comes behind a first, right pulse
    assert not kept.report()["damaged"]


def test_an_abort_in_a_burn_ends_in_the_safe_order() -> None:
    """H5: interrupted while words are pulsed: the pulsed pin idle, the level down, D let go, then VCC, then all low."""
    kept = Kept.fresh("27e512", contents="blank")
    rig = kept.rig(1)
    trace: list[tuple[int, str]] = []
    rig.trace = trace
    pulsed = ("22L", "24 rises 11985")

    def interrupted() -> int:
        return int(any("24 rises" in text for _, text in trace) and len(trace) > 200)

    session = Session(InProcess(rig), interrupted=interrupted)
    session.connect()
    part = load("27e512")
    sequence = compiler.compile_burn(part, load_rig(), 0, 255, "")
    with pytest.raises(Interrupted) as end:
        session.run(sequence, [Block(0, 256, None, bytes(256))])
    texts = [text for _, text in trace]
    last = max(at for at, text in enumerate(texts) if text == pulsed[0])
    tail = texts[last:]
    order = [r"22H", r"24 falls", r"D=Z", r"VCC off 0", r"VCC stands 0", r"all L"]
    found = [next((at for at, text in enumerate(tail) if re.fullmatch(step, text)), -1) for step in order]

    assert end.value.exit_code == 130
    cut = {one["rule"] for one in kept.report()["violations"]}
    assert cut <= {"pulse width"}  # a pulse that was cut is shorter than its window, never longer
    assert -1 not in found, tail
    assert found == sorted(found), tail


def _at_run_time() -> dict[str, list[str]]:
    """Rule -> who refuses at run time, and how it is called."""
    seen = [(one[0], f"job: {one[-1]}") for one in SEEN]
    seen += [
        ("H3", "job: CannotMake"),
        ("H5", "job: Interrupted"),
        ("H8", "job: Tripped"),
        ("H10", "job: ConsentNeeded"),
    ]
    seen += [(one[0], "job: ProofRefused") for one in PLANTED]
    seen += [(one[0], f"rig: {one[-1].name}") for one in BY_THE_RIG]
    found: dict[str, list[str]] = {}
    for rule, what in dict.fromkeys(seen):
        found.setdefault(rule, []).append(what)
    return found


AT_RUN_TIME = _at_run_time()
