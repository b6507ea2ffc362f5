"""A compiled sequence: one closed piece of work on the chip, as data, before any of it happens."""

from __future__ import annotations

from dataclasses import dataclass, field

from pulsewright.errors import Where
from pulsewright.wire.permit import Permit


@dataclass(frozen=True)
class Origin:
    """Where an op comes from: its byte offset, what it is for, the definition's line (empty for the frame of rules).

    `part` groups ops for messages: "seating", "gate", "power", "work".
    """

    offset: int
    part: str
    text: str
    where: Where = field(default_factory=Where)


@dataclass(frozen=True)
class Sequence:
    """`code` is what goes on the wire; `permit` carries its CRC-32; data is referred to by range and hash only."""

    kind: str  # "identify" | "read" | "blank" | "erase" | "burn"
    title: str  # "read 0000..FFFF at VCC.read (5.0 V)"
    code: bytes
    permit: Permit
    origins: tuple[Origin, ...]  # one for each op, by rising offset
    first: int  # first word of the range
    last: int  # last word of the range
    vcc_mv: int  # VCC during the work
    data_sha256: str = ""  # of the words in range, where it writes
    notes: tuple[str, ...] = ()

    def origin_at(self, offset: int) -> Origin | None:
        """The origin of the op at (or holding) a byte offset."""
        found = None
        for origin in self.origins:
            if origin.offset > offset:
                break
            found = origin
        return found


@dataclass(frozen=True)
class Finding:
    """Something the proof will not let pass: the rule, the op, the state in words, numbers wanted and got."""

    rule: str  # "H1" .. "H11"
    offset: int
    text: str
    wanted: str = ""
    got: str = ""

    def __str__(self) -> str:
        parts = [f"{self.rule} at {self.offset}: {self.text}"]
        if self.wanted:
            parts.append(f"wanted {self.wanted}")
        if self.got:
            parts.append(f"got {self.got}")
        return "; ".join(parts)


@dataclass(frozen=True)
class Proof:
    """What the proof did: findings (none: accepted), ops decoded, states visited."""

    findings: tuple[Finding, ...]
    ops: int
    states: int

    @property
    def accepted(self) -> bool:
        """True when nothing was found."""
        return not self.findings
