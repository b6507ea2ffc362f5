"""The permit: what a sequence may raise, where and how high, the ID that must be read first, the safe pattern."""

from __future__ import annotations

from dataclasses import dataclass, replace

from pulsewright.wire.fields import WireMistake, pack, unpack
from pulsewright.wire.tables import PERMIT_LAYOUT, Identity

NO_SWITCH = 0xFF


@dataclass(frozen=True)
class VccStep:
    """A step of VCC the sequence may use: window in raw counts of the socket converter, settling in ticks."""

    step: int
    low: int
    high: int
    settle: int


@dataclass(frozen=True)
class Permit:
    """See firmware/WIRE.md. Counts are the board's raw converter counts; line bytes as in `ops.line_byte`."""

    identity: Identity
    alternatives: tuple[tuple[tuple[int, int], ...], ...]  # each a list of (address, word)
    identify_switch: int  # NO_SWITCH: no identify level
    identify_step: int
    identify_ceiling: int
    raised: tuple[tuple[int, int], ...]  # (switch, ceiling) past the gate
    vcc: tuple[VccStep, ...]
    vcc_to: int  # mask of VCC switches
    drives: tuple[bytes, ...]  # line patterns in which the chip may drive D
    safe: bytes  # the chip's safe pattern
    self_timed: int  # longest self-timed write or erase, ticks
    crc32: int  # CRC-32/ISO-HDLC of the whole encoded program
    number: int = 0
    boot: int = 0

    def sealed_for(self, number: int, boot: int) -> Permit:
        """The same permit with the number and boot it is sent under."""
        return replace(self, number=number, boot=boot)

    def encode(self) -> bytes:
        """The permit's bytes; WireMistake if a value does not fit."""
        return pack(
            PERMIT_LAYOUT,
            {
                "number": self.number,
                "boot": self.boot,
                "identity": self.identity,
                "alternatives": [{"cells": [{"at": at, "is": is_} for at, is_ in a]} for a in self.alternatives],
                "identify_switch": self.identify_switch,
                "identify_step": self.identify_step,
                "identify_ceiling": self.identify_ceiling,
                "raised": [{"switch": switch, "ceiling": ceiling} for switch, ceiling in self.raised],
                "vcc": [{"step": v.step, "low": v.low, "high": v.high, "settle": v.settle} for v in self.vcc],
                "vcc_to": self.vcc_to,
                "drives": [{"lines": lines} for lines in self.drives],
                "safe": self.safe,
                "self_timed": self.self_timed,
                "crc32": self.crc32,
            },
        )


def decode_permit(data: bytes) -> Permit:
    """A permit from its bytes; WireMistake for anything that does not decode."""
    v = unpack(PERMIT_LAYOUT, data)
    try:
        identity = Identity(v["identity"])
    except ValueError:
        raise WireMistake(f"unknown identity {v['identity']}") from None
    return Permit(
        identity=identity,
        alternatives=tuple(tuple((c["at"], c["is"]) for c in a["cells"]) for a in v["alternatives"]),
        identify_switch=v["identify_switch"],
        identify_step=v["identify_step"],
        identify_ceiling=v["identify_ceiling"],
        raised=tuple((r["switch"], r["ceiling"]) for r in v["raised"]),
        vcc=tuple(VccStep(s["step"], s["low"], s["high"], s["settle"]) for s in v["vcc"]),
        vcc_to=v["vcc_to"],
        drives=tuple(d["lines"] for d in v["drives"]),
        safe=v["safe"],
        self_timed=v["self_timed"],
        crc32=v["crc32"],
        number=v["number"],
        boot=v["boot"],
    )
