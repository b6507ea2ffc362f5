"""Checksums a bench technician meets: plain sums, catalogue CRCs, and the option-ROM rule.

CRC parameters are those of the RevEng catalogue as mirrored in crc-catalog (src/algorithm.rs, commit ed4ad63). A CRC of
0000 does not mean "no data": 64K of FF gives exactly that under IBM-3740.
"""

from __future__ import annotations

import zlib
from dataclasses import dataclass
from functools import cache
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Callable


@dataclass(frozen=True)
class CrcModel:
    """One row of the catalogue; `reflected` stands for refin and refout, which agree in every row here."""

    name: str
    width: int
    poly: int
    init: int
    reflected: bool
    xorout: int


CRC_MODELS = {
    model.name: model
    for model in (
        CrcModel("CRC-16/IBM-3740", 16, 0x1021, 0xFFFF, False, 0x0000),
        CrcModel("CRC-16/XMODEM", 16, 0x1021, 0x0000, False, 0x0000),
        CrcModel("CRC-16/KERMIT", 16, 0x1021, 0x0000, True, 0x0000),
        CrcModel("CRC-16/ARC", 16, 0x8005, 0x0000, True, 0x0000),
        CrcModel("CRC-16/MODBUS", 16, 0x8005, 0xFFFF, True, 0x0000),
        CrcModel("CRC-32/ISO-HDLC", 32, 0x04C11DB7, 0xFFFFFFFF, True, 0xFFFFFFFF),
        CrcModel("CRC-32/MPEG-2", 32, 0x04C11DB7, 0xFFFFFFFF, False, 0x00000000),
    )
}


def sum8(data: bytes) -> int:
    """The sum of all bytes, modulo 2^8."""
    return sum(data) & 0xFF


def sum16(data: bytes) -> int:
    """The sum of all bytes, modulo 2^16."""
    return sum(data) & 0xFFFF


def sum32(data: bytes) -> int:
    """The sum of all bytes, modulo 2^32."""
    return sum(data) & 0xFFFF_FFFF


def crc32(data: bytes) -> int:
    """CRC-32/ISO-HDLC, the one most tools print; by zlib, quick and always at hand."""
    return zlib.crc32(data)


def crc(name: str, data: bytes) -> int:
    """The CRC `name` (a key of CRC_MODELS) of the bytes; KeyError for another name."""
    return _function(name)(data)


@cache
def _function(name: str) -> Callable[[bytes], int]:
    import crcmod  # late: only some commands want a CRC other than zlib's

    model = CRC_MODELS[name]
    # crcmod keeps its register with the final exclusive-or undone, and wants the start value in the same form.
    function: Callable[[bytes], int] = crcmod.mkCrcFun(
        model.poly | 1 << model.width, initCrc=model.init ^ model.xorout, rev=model.reflected, xorOut=model.xorout
    )
    return function


X86, OPEN_FIRMWARE, PA_RISC, EFI = range(4)
CODE_TYPES = {X86: "x86", OPEN_FIRMWARE: "Open Firmware", PA_RISC: "PA-RISC", EFI: "EFI"}
_BLOCK_BYTES = 512


@dataclass(frozen=True)
class OptionRom:
    """The header of an option ROM: `length_bytes` and `sum8` are None where the rule of code type x86 does not hold.

    `complete` is False where the data is shorter than the header says; `sum8` is then None too.
    """

    code_type: int
    length_bytes: int | None
    sum8: int | None
    complete: bool = True

    @property
    def sum_is_right(self) -> bool | None:
        """True if all bytes sum to 00, as the rule wants; None where the rule says nothing."""
        return None if self.sum8 is None else self.sum8 == 0

    def text(self) -> str:
        """One line for a person."""
        kind = CODE_TYPES.get(self.code_type, f"code type {self.code_type:02X}")
        if self.length_bytes is None:
            return f"option ROM for {kind}; no length and sum rule holds for it"
        if not self.complete:
            return f"option ROM for {kind}, cut off: its header says {self.length_bytes} bytes"
        verdict = "right" if self.sum_is_right else "should be 00"
        return f"option ROM for {kind}, {self.length_bytes} bytes, sum {self.sum8:02X} ({verdict})"


def option_rom(data: bytes) -> OptionRom | None:
    """The option-ROM header at the start of `data`, judged by its own rule; None if there is none.

    Rule: 55 AA, length in 512-byte units at 02, all of it sums to 00. Only an x86 image (code type 0, or none given)
    follows it: Open Firmware keeps a pointer at 02, not a length. Sources: Plug and Play BIOS Specification 1.0A, pages
    16 and 53; openfirmware tokenizer/readme.pci; the sum rule from memory.
    """
    if data[:2] != b"\x55\xaa" or len(data) < 0x1A:
        return None
    code_type = _code_type(data)
    if code_type != X86 or data[2] == 0:
        return OptionRom(code_type, None, None)
    length = data[2] * _BLOCK_BYTES
    complete = length <= len(data)
    return OptionRom(code_type, length, sum8(data[:length]) if complete else None, complete)


def _code_type(data: bytes) -> int:
    """The code type from the PCI data structure that 18 points to; x86 where there is no such structure."""
    at = int.from_bytes(data[0x18:0x1A], "little")
    if at and data[at : at + 4] == b"PCIR" and at + 0x14 < len(data):
        return data[at + 0x14]
    return X86
