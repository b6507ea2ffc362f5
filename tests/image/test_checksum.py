"""Checksums against the catalogue, against zlib, and by a bit-by-bit CRC that knows nothing of the library."""

from __future__ import annotations

import zlib

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pulsewright.image.checksum import CRC_MODELS, CrcModel, crc, crc32, option_rom, sum8, sum16, sum32

# crc-catalog (mirror of the RevEng catalogue), src/algorithm.rs, commit ed4ad63: check is the CRC of "123456789".
# The last three, of nothing, of 00 and of FF, were computed apart from this program.
CATALOGUE = {
    "CRC-16/IBM-3740": (0x29B1, 0xFFFF, 0xE1F0, 0xFF00),
    "CRC-16/XMODEM": (0x31C3, 0x0000, 0x0000, 0x1EF0),
    "CRC-16/KERMIT": (0x2189, 0x0000, 0x0000, 0x0F78),
    "CRC-16/ARC": (0xBB3D, 0x0000, 0x0000, 0x4040),
    "CRC-16/MODBUS": (0x4B37, 0xFFFF, 0x40BF, 0x00FF),
    "CRC-32/ISO-HDLC": (0xCBF43926, 0x00000000, 0xD202EF8D, 0xFF000000),
    "CRC-32/MPEG-2": (0x0376E6E7, 0xFFFFFFFF, 0x4E08BFB4, 0xFFFFFF00),
}

# Blank chips: size, CRC-32/ISO-HDLC of FF and of 00, CRC-16/IBM-3740 of FF, 16-bit sum of FF; computed with zlib and a
# separate script.
BLANK = [
    (2048, 0x3F55D17F, 0xF1E8BA9E, 0x33D7, 0xF800),
    (4096, 0xF154670A, 0xC71C0011, 0x0FE1, 0xF000),
    (8192, 0xB4293435, 0xD8F49994, 0xFFFC, 0xE000),
    (16384, 0x690B37D3, 0xAB54D286, 0xFFF0, 0xC000),
    (32768, 0x1B43EABD, 0x011FFCA6, 0xFF00, 0x8000),
    (65536, 0xDEAB7E4E, 0xD7978EEB, 0x0000, 0x0000),
    (131072, 0x154803CC, 0x7EE8CDCD, 0x1D0F, 0x0000),
    (262144, 0xB7094978, 0xE20EEA22, 0x97DF, 0x0000),
    (524288, 0x504BF849, 0x75660AAC, 0x6A4B, 0x0000),
]


def bit_by_bit(model: CrcModel, data: bytes) -> int:
    """The CRC by its definition: one bit at a time, input and result reflected where the model says."""
    top, mask = 1 << (model.width - 1), (1 << model.width) - 1
    register = model.init
    for byte in data:
        for place in range(8):
            bit = byte >> (place if model.reflected else 7 - place) & 1
            register = (register << 1 ^ (model.poly if bool(register & top) != bool(bit) else 0)) & mask
    if model.reflected:
        register = int(f"{register:0{model.width}b}"[::-1], 2)
    return register ^ model.xorout


def test_every_model_is_in_the_catalogue() -> None:
    """No CRC is offered that the catalogue values below do not cover."""
    assert set(CRC_MODELS) == set(CATALOGUE)


@pytest.mark.parametrize(("name", "values"), CATALOGUE.items())
def test_catalogue_values(name: str, values: tuple[int, int, int, int]) -> None:
    """The check value, and the CRCs of nothing, of 00 and of FF."""
    assert tuple(crc(name, data) for data in (b"123456789", b"", b"\x00", b"\xff")) == values


@pytest.mark.parametrize("name", CATALOGUE)
@given(data=st.binary(max_size=80))
def test_crcs_agree_with_the_definition(name: str, data: bytes) -> None:
    """Each CRC equals the one worked out bit by bit from its catalogue row."""
    assert crc(name, data) == bit_by_bit(CRC_MODELS[name], data)


@given(st.binary(max_size=200))
def test_crc32_agrees_with_zlib_and_the_catalogue(data: bytes) -> None:
    """The quick CRC-32 is the catalogue's ISO-HDLC, and zlib's."""
    assert crc32(data) == zlib.crc32(data) == crc("CRC-32/ISO-HDLC", data)


@pytest.mark.parametrize(("size", "of_ff", "of_00", "ibm_3740", "sum_of_ff"), BLANK)
def test_blank_chips(size: int, of_ff: int, of_00: int, ibm_3740: int, sum_of_ff: int) -> None:
    """CRCs and sum of a blank chip of each size, as a technician would recognise them."""
    blank = b"\xff" * size
    assert (crc32(blank), crc32(bytes(size))) == (of_ff, of_00)
    assert (crc("CRC-16/IBM-3740", blank), sum16(blank)) == (ibm_3740, sum_of_ff)


def test_appended_crcs_give_their_residue() -> None:
    """A message with its CRC behind it gives the published residue, in the byte order of each."""
    assert crc("CRC-16/IBM-3740", b"123456789\x29\xb1") == 0x0000
    assert crc("CRC-32/ISO-HDLC", b"123456789\x26\x39\xf4\xcb") ^ 0xFFFFFFFF == 0xDEBB20E3


def test_sums_wrap_at_their_width() -> None:
    """Each sum is taken modulo its width."""
    data = b"\xff" * 65537
    assert (sum8(data), sum16(data), sum32(data)) == (0xFF, 0x00FF, 0x00FF00FF)


def option_image(code_type: int | None, *, blocks: int = 1, total: int = 0) -> bytes:
    """An option ROM of one 512-byte block with a PCI data structure at 40 (none for None), summing to `total`."""
    rom = bytearray(512)
    rom[0:4] = bytes([0x55, 0xAA, blocks, 0xCB])
    if code_type is not None:
        rom[0x18] = 0x40
        rom[0x40:0x44] = b"PCIR"
        rom[0x54] = code_type
    rom[511] = (total - sum(rom)) & 0xFF
    return bytes(rom)


@pytest.mark.parametrize("code_type", [None, 0])
def test_an_x86_option_rom_sums_to_zero(code_type: int | None) -> None:
    """55 AA, the length in 512-byte units, and a sum of 00: right, and wrong by one."""
    right = option_rom(option_image(code_type))
    wrong = option_rom(option_image(code_type, total=1))
    assert right is not None
    assert wrong is not None
    assert (right.length_bytes, right.sum8, right.sum_is_right) == (512, 0, True)
    assert (wrong.sum8, wrong.sum_is_right) == (1, False)
    assert wrong.text() == "option ROM for x86, 512 bytes, sum 01 (should be 00)"


def test_the_worked_header_ends_in_35() -> None:
    """55 AA 01 CB, zeros, and 35 as the last byte of 512 sum to 00, worked out by hand."""
    rom = option_rom(b"\x55\xaa\x01\xcb" + bytes(507) + b"\x35")
    assert rom is not None
    assert rom.sum_is_right is True


@pytest.mark.parametrize(("code_type", "kind"), [(1, "Open Firmware"), (2, "PA-RISC"), (3, "EFI"), (9, "code type 09")])
def test_other_code_types_have_no_sum_rule(code_type: int, kind: str) -> None:
    """For other code types 02 may not be a length at all, so neither length nor sum is judged."""
    rom = option_rom(option_image(code_type, total=7))
    assert rom is not None
    assert (rom.length_bytes, rom.sum_is_right) == (None, None)
    assert rom.text().startswith(f"option ROM for {kind};")


def test_a_cut_option_rom_is_told() -> None:
    """Data shorter than the header's length is not summed."""
    rom = option_rom(option_image(None, blocks=2))
    assert rom is not None
    assert (rom.complete, rom.sum_is_right, rom.length_bytes) == (False, None, 1024)


@pytest.mark.parametrize("data", [b"", b"\x55\xaa", b"\xaa\x55" + bytes(510), b"\xff" * 512])
def test_other_data_is_no_option_rom(data: bytes) -> None:
    """Without 55 AA and a header there is none."""
    assert option_rom(data) is None
