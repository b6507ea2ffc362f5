"""What a definition file says, as plain values: no reading, no checking, no rig.

Loading (load.py) and checking (check.py) make these; the compiler and the proof read them. Times are integers of
picoseconds, voltages of millivolts, currents of microamperes. Every piece carries the place in the file it came from.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from pulsewright.errors import Where

PACKAGE_PINS = {"DIP-24": 24, "DIP-28": 28, "DIP-32": 32, "DIP-40": 40}


@dataclass(frozen=True)
class SupplyStep:
    """A named voltage of a supply, e.g. `VPP.program`; a source without limits gives typ ±5 % (common practice)."""

    name: str  # "VPP.program"
    typ_mv: int
    min_mv: int
    max_mv: int
    limits_known: bool = True
    current_ua: int | None = None  # what the part may draw; None: the source does not say
    settle_ps: int = 0  # wait after the supply is good
    source: str = ""  # "" = the chip's own source; "from memory" counts for H10
    where: Where = field(default_factory=Where)

    @property
    def supply(self) -> str:
        """The supply's name: "VPP" of "VPP.program"."""
        return self.name.split(".", 1)[0]


@dataclass(frozen=True)
class Maximum:
    """An absolute maximum of a pin: `mv`, or `mv` above whatever VCC is when `above_vcc`."""

    mv: int
    above_vcc: bool = False
    source: str = ""
    where: Where = field(default_factory=Where)
    min_mv: int | None = None  # deepest undershoot, where the sheet gives it


@dataclass(frozen=True)
class Window:
    """A timing parameter; a limit the source does not give is None."""

    name: str
    min_ps: int | None = None
    typ_ps: int | None = None
    max_ps: int | None = None
    source: str = ""
    where: Where = field(default_factory=Where)


@dataclass(frozen=True)
class Mode:
    """A row of the mode table.

    `levels`: by pin role or pin alias ("CE", "OE", "VPP", "A9", "A" for all other address pins): "L", "H", "X", "Z", a
    supply step ("VPP.program"), or "VCC" (whatever VCC is). `VCC` always names a step. Address pins not named carry the
    address. `data`: "in", "out", "Z", or the constant the rig drives.
    """

    name: str
    levels: Mapping[str, str]
    vcc: str  # a step of VCC: "VCC.read"
    data: str | int
    access: str = ""  # timing parameter that bounds "D valid after mode or address changed"; "" = tACC, tCE, tOE
    where: Where = field(default_factory=Where)


@dataclass(frozen=True)
class IdCell:
    """One ID byte: read at word address `at`, it `is_` this; `what` says which."""

    at: int
    is_: int
    what: str = ""
    where: Where = field(default_factory=Where)
    source: str = ""  # of this very cell; "": the row's or the chip's


@dataclass(frozen=True)
class MakerRow:
    """A maker's ID (several alternatives are allowed) and the leaves that differ from the rest of the file."""

    maker: str
    ids: tuple[tuple[IdCell, ...], ...] = ()
    overrides: Mapping[str, object] = field(default_factory=dict)  # dotted key -> raw TOML value
    source: str = ""
    where: Where = field(default_factory=Where)


# ---- the algorithm: a small vocabulary of steps -------------------------------------------------


@dataclass(frozen=True)
class ModeStep:
    """{ mode = "program", D = "image" }: pins into a mode; `data` "image", a constant, or None (as the mode says)."""

    mode: str
    data: str | int | None = None
    where: Where = field(default_factory=Where)


@dataclass(frozen=True)
class WaitStep:
    """{ wait = "tAS" } or { wait = "2 us" }: at least this long; `timing` is the parameter's name or ""."""

    timing: str
    ps: int
    where: Where = field(default_factory=Where)


@dataclass(frozen=True)
class PulseStep:
    """{ pulse = "CE", to = "L", time = "tPW" }: from the pin's idle level to `to` for the parameter's typ, and back."""

    pin: str
    to: str  # "L" or "H"
    timing: str  # name of a Window with min and max
    where: Where = field(default_factory=Where)


@dataclass(frozen=True)
class ExpectStep:
    """{ expect = "image" } or { expect = 0xFF, mask = 0x80 }: D, in the mode in force, compared.

    In a repeat, at its top level: equal ends the repeat at the end of the turn. With `else_`: unequal runs these steps,
    which begin and must end in the mode in force at the expect; equal goes on behind. Anywhere else unequal fails.
    """

    value: str | int
    mask: int = 0xFF
    where: Where = field(default_factory=Where)
    else_: tuple[Step, ...] = ()


@dataclass(frozen=True)
class Cycle:
    """One bus write cycle: `word` at address `at`; both None for "image", the word in hand at its own address."""

    at: int | None
    word: int | None
    where: Where = field(default_factory=Where)


@dataclass(frozen=True)
class WriteStep:
    """{ write = "protect_on" } or { write = ["AA@5555", "55@2AAA", "image"] }: bus write cycles, back to back.

    In the mode and with the strobe of `[write]`; `command` is the name in `[commands]` or "". "image" only as the last
    cycle, inside a loop over words.
    """

    cycles: tuple[Cycle, ...]
    command: str = ""
    where: Where = field(default_factory=Where)


@dataclass(frozen=True)
class LoadStep:
    """{ load = "page" }: the words of the page in hand that are to be written, back to back, as bus write cycles.

    Directly behind a WriteStep the cycles belong to one load: nothing longer than the load gap comes between.
    """

    where: Where = field(default_factory=Where)


@dataclass(frozen=True)
class PollStep:
    """{ poll = "DQ7", mode = "read", within = "tWC" }: reads the chip in `mode` until it has done its work.

    `bit`: "DQ7" (data polling: equals bit 7 of the word last written) or "DQ6" (stops toggling). Not done within the
    maximum of `timing`: failed.
    """

    bit: str
    mode: str
    timing: str
    where: Where = field(default_factory=Where)


@dataclass(frozen=True)
class EveryWord:
    """until = { every = "word", mode = "erase_verify", is = 0xFF }: the whole range is read in `mode` and compared."""

    mode: str
    is_: int
    where: Where = field(default_factory=Where)


@dataclass(frozen=True)
class RepeatStep:
    """{ repeat = [steps], max = 25, until = "match" | { every = "word", ... } }: up to `max` times, then failed."""

    steps: tuple[Step, ...]
    max: int
    until: EveryWord | None  # None: until the `expect` inside matches
    where: Where = field(default_factory=Where)


@dataclass(frozen=True)
class EachStep:
    """{ each = "word", steps = [...] }: once for each word of the image that is to be written.

    Each = "page": once for each page that has such words; an each = "word" inside it: once for each word of that page.
    """

    unit: str  # "word" or "page"
    steps: tuple[Step, ...]
    where: Where = field(default_factory=Where)


Step = ModeStep | WaitStep | PulseStep | ExpectStep | RepeatStep | EachStep | WriteStep | LoadStep | PollStep


@dataclass(frozen=True)
class BusWrite:
    """[write]: how a bus write cycle is made: in `mode`, `pin` goes to `to` for `timing` and back.

    Set-ups are the timing parameters tAS, tDS, tOES, tCS, holds tAH, tDH, tOEH, tCH, pause tWPH, tWPH2 (after the last
    cycle of a command, before a load), as far as the definition has them, by their minima. `gap`: the window from load
    to load of one page ("tBLC") or "". `busy`: the longest time the part works by itself after a write ("tWC").
    """

    mode: str
    pin: str
    to: str  # "L" or "H"
    timing: str  # name of a Window with a min; a max binds where there is one
    gap: str = ""
    busy: str = ""
    where: Where = field(default_factory=Where)
    begin_ps: int = 0  # so long after the last load the part has surely begun: the gap's longest maximum over all rows


@dataclass(frozen=True)
class CommandIdentify:
    """[identify] command: the ID is read in `mode` between the cycles `enter` and `leave`, `settle_ps` after each."""

    enter: tuple[Cycle, ...]
    leave: tuple[Cycle, ...]
    mode: str
    settle_ps: int = 0
    where: Where = field(default_factory=Where)


@dataclass(frozen=True)
class Protect:
    """[protect]: software data protection: the steps that switch it on and off, from standby to standby."""

    on: tuple[Step, ...]
    off: tuple[Step, ...]
    where: Where = field(default_factory=Where)


@dataclass(frozen=True)
class Method:
    """[program] or [erase]: which way bits change, the unit, the steps, and what to do at the end whatever happened."""

    bits: str  # "1 to 0" | "both" | "to blank"
    unit: str  # "word" | "page" | "sector" | "chip"
    steps: tuple[Step, ...]
    finally_: tuple[Step, ...] = ()
    where: Where = field(default_factory=Where)
    unloaded: str = ""  # unit "page": what becomes of words that are not loaded: "kept", "undefined", "blank"


@dataclass(frozen=True)
class VerifyPass:
    """A margin pass: the whole chip read in `mode` (a step of VCC of the read kind)."""

    mode: str
    where: Where = field(default_factory=Where)


@dataclass(frozen=True)
class Definition:
    """One part for one maker row (or for the tightest over all rows), everything resolved."""

    path: str
    name: str
    about: str
    words: int
    width: int  # 8 or 16
    package: str
    source: str
    blank: int  # a word in the erased state
    erase_kind: str  # "electrical" | "uv" | "none"
    pins: Mapping[str, tuple[int, ...]]  # role -> package pins; A and D from bit 0 up
    supplies: Mapping[str, SupplyStep]  # by full name
    maxima: Mapping[str, Maximum]  # by role or alias; "other" for the rest
    modes: Mapping[str, Mode]
    timing: Mapping[str, Window]
    identify: str  # "mode" (A9 level) | "command" | "none"
    identify_mode: str  # name of the mode when identify == "mode"
    makers: tuple[MakerRow, ...]
    row: MakerRow | None  # the row this is resolved for; None: tightest over all
    program: Method | None
    erase: Method | None
    verify: tuple[VerifyPass, ...]
    notes: tuple[str, ...] = ()
    page: int = 0  # words of a page; 0: the part has none
    write: BusWrite | None = None
    commands: Mapping[str, tuple[Cycle, ...]] = field(default_factory=dict)
    identify_command: CommandIdentify | None = None  # when identify == "command"
    protect: Protect | None = None
    protected: Method | None = None  # [program.protected]: how a part with protection on is written
    technology: str = ""  # "eprom" | "eeprom" | "flash"; "": the file does not say
    apart: tuple[str, ...] = ()  # row None: what differs between rows and no common value serves, by dotted key
    digest: str = ""  # sha-256 of the resolved definition (file, methods, row), hex
    raw: Mapping[str, object] = field(default_factory=dict)  # the resolved TOML tree

    def pin_of(self, name: str) -> tuple[int, ...]:
        """Package pins of a role ("CE") or of an alias of one address or data bit ("A9", "D0"); () if there is none."""
        if name in self.pins:
            return self.pins[name]
        if len(name) > 1 and name[0] in "AD" and name[1:].isdigit():
            bits = self.pins.get(name[0], ())
            index = int(name[1:])
            return (bits[index],) if index < len(bits) else ()
        return ()

    def role_of(self, pin: int) -> str:
        """The role of a package pin as text: "A9", "D0", "CE", "VCC"; "" for a pin that is not named."""
        for role, pins in self.pins.items():
            if pin in pins:
                return f"{role}{pins.index(pin)}" if role in ("A", "D") else role
        return ""

    def maximum_of(self, name: str) -> Maximum | None:
        """The absolute maximum in force for a role or alias: its own, else `other`."""
        return self.maxima.get(name) or self.maxima.get("other")
