"""The permit against definition and rig: identity (H2, H9), levels and ceilings (H3), patterns (H5, H6), checksum."""

from __future__ import annotations

import zlib

from pulsewright.chip.model import IdCell
from pulsewright.rig.model import Switch
from pulsewright.sequence.proof.modes import Raised, Row
from pulsewright.sequence.proof.tables import RAISED_VCC_MV, Tables
from pulsewright.sequence.proof.timing import at_least
from pulsewright.units import show_mv
from pulsewright.wire.fields import WireMistake
from pulsewright.wire.ops import line_of
from pulsewright.wire.permit import NO_SWITCH
from pulsewright.wire.tables import DRIVE_PATTERNS, ID_ALTERNATIVES, ID_CELLS, Identity, Level, Op

_SHORT = {Level.LOW: "L", Level.HIGH: "H", Level.RELEASED: "Z"}
_WRITING = (Op.PULSE, Op.OVER_PULSE, Op.DRIVE, Op.DRIVE_WORD)
_LONGEST_SETTLE = 2  # times the rig's own settling time: the monitor must not be blinded for longer


def check_permit(t: Tables, code: bytes) -> None:
    """Everything about the permit that no path through the program can change."""
    crc = zlib.crc32(code)
    t.need(
        t.permit.crc32 == crc, "H2", "the permit is not for this program: CRC-32", f"{crc:08X}", f"{t.permit.crc32:08X}"
    )
    _identity(t)
    _identify_level(t)
    _raised(t)
    _vcc(t)
    _drives(t)
    _safe(t)


# ---- identity -------------------------------------------------------------------------------------------------------


def _cells(ids: tuple[IdCell, ...]) -> tuple[tuple[int, int], ...]:
    return tuple(sorted((cell.at, cell.is_) for cell in ids))


def _identity(t: Tables) -> None:
    kind = t.permit.identity
    if t.definition.identify == "none":
        t.need(
            kind is not Identity.WANTED, "H2", "wants an ID of a part that has none", "vouched none or none", kind.name
        )
        t.need(not t.permit.alternatives, "H2", "names ID cells though it wants no identity")
        if kind is Identity.NONE:
            _only_looks(t)
        return
    if not t.need(
        kind is Identity.WANTED,
        "H9",
        "the part has an ID and the permit does not want it",
        "identity wanted",
        kind.name,
    ):
        return
    way = t.definition.identify
    t.need(way in ("mode", "command"), "H2", "this way of identification is not understood", "mode or command", way)
    if way == "command":
        _by_command(t)
    _alternatives(t)


def _by_command(t: Tables) -> None:
    """A command before the gate is a write to a chip that nobody knows yet: only to flash, and only at 5 V."""
    t.need(t.definition.technology == "flash", "H2", "an ID asked by command of a part that is no flash",
           "flash", t.definition.technology or "not stated")  # fmt: skip
    raised = [row.name for row in t.rows if row.raised]
    t.need(not raised, "H2", "an ID asked by command of a part that has raised levels", "", ", ".join(raised))
    t.need(t.command_row is not None, "H2", "the definition has no commands for its ID")


def _only_looks(t: Tables) -> None:
    """Without identity nothing is raised, VCC neither; the identify step, where there is one, allows no write."""
    t.need(not t.permit.raised, "H2", "identity none, yet raised levels past the gate", "none", len(t.permit.raised))
    known = {one.number: one.mv for one in t.rig.vcc.steps}
    high = [one.step for one in t.permit.vcc if known.get(one.step, 0) > RAISED_VCC_MV]
    t.need(not high, "H9", "identity none, yet VCC above 5.5 V", "vouched none", high)
    flat = t.shape.flat if t.shape else ()
    writes = t.permit.identify_switch != NO_SWITCH and any(one.op in _WRITING for _, one in flat)
    t.need(not writes, "H2", "identity none, yet the program can write")


def _alternatives(t: Tables) -> None:
    rows = t.definition.makers if t.definition.row is None else (t.definition.row,)
    wanted = {_cells(one) for row in rows for one in row.ids if one}
    got = {tuple(sorted(one)) for one in t.permit.alternatives}
    right = got == wanted if t.definition.row is not None else got <= wanted
    t.need(right and bool(got), "H2", "ID cells are not the row's", sorted(wanted), sorted(got))
    t.need(len(t.permit.alternatives) <= ID_ALTERNATIVES, "H2", "too many alternatives", ID_ALTERNATIVES, len(got))
    for one in got:
        t.need(0 < len(one) <= ID_CELLS, "H2", "number of ID cells", f"1 to {ID_CELLS}", len(one))
        inside = all(at < t.definition.words and is_ <= t.word_mask for at, is_ in one)
        t.need(inside, "H2", "an ID cell outside the chip", f"below {t.definition.words}", one)


def _ceiling(t: Tables, rule: str, want: Raised, step: int, ceiling: int) -> None:
    scaling = want.switch.scaling
    most = scaling.count_at_most(want.top_mv)
    t.need(
        ceiling <= most, rule, f"ceiling of switch {want.switch.number} above what {want.role} takes",
        f"at most {most} ({show_mv(want.top_mv)})", ceiling,
    )  # fmt: skip
    least = scaling.count_at_most(want.sums[step].high_mv) if step in want.sums else 0
    t.need(ceiling >= least, rule, f"ceiling of switch {want.switch.number} under the step's own reach", least, ceiling)


def check_ceiling(t: Tables, row: Row, number: int, step: int) -> None:
    """The ceiling of a switch that closes past the gate, for the row it serves."""
    t.used_raised.add(number)
    ceilings = dict(t.permit.raised)
    if t.need(number in ceilings, "H3", f"switch {number} is not in the permit", "", sorted(ceilings)):
        _ceiling(t, "H3", row.raised[number], step, ceilings[number])


def _identify_level(t: Tables) -> None:
    permit, row = t.permit, t.identify_row
    wants = [] if row is None or permit.identity is not Identity.WANTED else list(row.raised.values())
    if not wants:
        t.need(permit.identify_switch == NO_SWITCH, "H2", "an identify level that the definition does not want")
        return
    if not t.need(len(wants) == 1 and row is not None and not row.unreachable, "H2", "identify mode cannot be made"):
        return
    want = wants[0]
    if not t.need(
        permit.identify_switch == want.switch.number, "H2", "identify switch is not at the identify pin",
        f"switch {want.switch.number} ({want.role})", permit.identify_switch,
    ):  # fmt: skip
        return
    t.need(want.switch.limiter, "H2", "the identify level does not pass the limiter")
    sums = want.sums.get(permit.identify_step)
    t.need(
        permit.identify_step in want.steps, "H2", f"identify step does not hold {want.supply.name} at {want.role}",
        sums.wanted if sums else "a step of the rig", sums.got if sums else permit.identify_step,
    )  # fmt: skip
    _ceiling(t, "H2", want, permit.identify_step, permit.identify_ceiling)


# ---- levels ---------------------------------------------------------------------------------------------------------


def _board_ceiling(t: Tables, switch: Switch, ceiling: int) -> None:
    most = switch.scaling.count_at_most(switch.ceiling_mv)
    t.need(ceiling <= most, "H3", f"ceiling of switch {switch.number} above the board's", most, ceiling)


def _raised(t: Tables) -> None:
    switches = {one.number: one for one in t.rig.switches}
    wanted = {number for row in t.rows for number in row.raised}
    seen = [number for number, _ in t.permit.raised]
    t.need(len(seen) == len(set(seen)), "H3", "a switch stands twice in the permit", "", seen)
    for number, ceiling in t.permit.raised:
        if t.need(number in switches, "H3", f"the rig has no switch {number}"):
            _board_ceiling(t, switches[number], ceiling)
        t.need(number in wanted, "H3", f"no mode of the definition wants a raised level at switch {number}")


def _vcc(t: Tables) -> None:
    steps = [one.step for one in t.permit.vcc]
    t.need(len(steps) == len(set(steps)) and bool(steps), "H3", "VCC steps of the permit", "each once", steps)
    served: set[int] = set().union(*t.vcc_ok.values()) if t.vcc_ok else set()
    for one in t.permit.vcc:
        if one.step not in served:
            sums = [by_step[one.step] for by_step in t.vcc_sums.values() if one.step in by_step]
            got = f"{sums[0].got if sums else 'no such step'}, counts {one.low}..{one.high}"
            wanted = " or ".join(dict.fromkeys(each.wanted for each in sums))
            t.find("H3", f"VCC step {one.step} with its window serves no supply of the definition", wanted, got)
        settle = at_least(t.rig.vcc.settle_ps)
        within = settle <= one.settle <= _LONGEST_SETTLE * settle
        t.need(within, "H8", f"settling time of VCC step {one.step}", f"{settle} to {2 * settle} ticks", one.settle)
    t.need(
        t.permit.vcc_to == t.pins.vcc_mask,
        "H3",
        "VCC to other positions than the VCC pins",
        t.pins.vcc_mask,
        t.permit.vcc_to,
    )


def check_used(t: Tables) -> None:
    """After the walk: a permit must allow no more than the program uses."""
    t.offset = 0
    spare = {number for number, _ in t.permit.raised} - t.used_raised
    t.need(not spare, "H3", "the permit allows raised levels that the program never uses", "", sorted(spare))
    spare = set(t.vcc_permit) - t.used_vcc
    t.need(not spare, "H3", "the permit allows VCC steps that the program never uses", "", sorted(spare))
    _self_timed(t)
    page, block = t.definition.page, t.shape.header.block_words if t.shape else 0
    t.need(not t.used_load or page == block, "H7", "a page is loaded from blocks of another size", page, block)


# ---- patterns -------------------------------------------------------------------------------------------------------


def _pattern(t: Tables, entries: bytes, what: str) -> dict[int, str] | None:
    pattern: dict[int, str] = {}
    for entry in entries:
        try:
            line, level = line_of(entry)
        except WireMistake as mistake:
            t.find("H5", f"{what}: {mistake}")
            return None
        if line in pattern:
            t.find("H5", f"{what} names line {line} twice")
            return None
        pattern[line] = _SHORT[level]
    return pattern


def _drives(t: Tables) -> None:
    t.need(len(t.permit.drives) <= DRIVE_PATTERNS, "H6", "too many patterns", DRIVE_PATTERNS, len(t.permit.drives))
    named = [_pattern(t, one, "a driving pattern of the permit") for one in t.permit.drives]
    for row in t.rows:
        if not row.drives:
            continue
        covered = any(one is not None and one.items() <= dict(row.pattern).items() for one in named)
        t.need(
            covered, "H6", f"the permit does not know that the chip drives D in {row.name}", dict(row.pattern), named
        )


def _safe(t: Tables) -> None:
    safe = _pattern(t, t.permit.safe, "the safe pattern")
    if safe is None:
        return
    levels = set(safe.values())
    t.need(levels <= {"L", "H"}, "H5", "the safe pattern leaves a line released", "L or H", safe)
    t.need(set(safe) == set(t.pins.control), "H5", "the safe pattern does not set just the control lines",
           sorted(t.pins.control), sorted(safe))  # fmt: skip
    quiet = [row for row in t.rows if row.data == "Z" and all(safe.get(at) == one for at, one in row.pattern.items())]
    t.need(
        bool(quiet),
        "H5",
        "the safe pattern is no row of the mode table in which D floats",
        "",
        safe,
    )
    never_low = [at for at in safe if all("L" not in row.lines.get(at, "L") for row in t.rows) and safe[at] == "L"]
    t.need(not never_low, "H5", "in the safe pattern a line is low that no mode has low", "H", never_low)
    drives = [row.name for row in t.rows if row.drives and row.pattern.items() <= safe.items()]
    t.need(not drives, "H5", "in the safe pattern the chip drives D", "", ", ".join(drives))
    up = {number for number, _ in t.permit.raised} | {t.permit.identify_switch}
    for one in t.actives:
        raised = {number for number in range(8) if one.raised >> number & 1}
        if raised <= up and all(safe.get(at, level) == level for at, level in one.lines.items()):
            t.find("H5", f"with the raised level still up the safe pattern is the pulse of {one.mode}", "", safe)


def _self_timed(t: Tables) -> None:
    """How long the firmware waits before VCC goes: as long as the chip may write by itself, and not for ever."""
    busy = t.timing.busy_ps()
    if busy is None:
        polls = [one.max_ps for one in t.course.polls]
        busy = max([*polls, t.timing.most("tWC")], default=0) + t.timing.begun_ps()
    longest = at_least(busy)
    got = t.permit.self_timed
    t.need(got >= longest or not t.used_busy, "H5", "self-timed wait", f"at least {longest} ticks", got)
    most = max(2 * longest, t.timing.longest_ticks)
    t.need(got <= most, "H5", "self-timed wait", f"at most {most} ticks", got)
