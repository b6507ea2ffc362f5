"""Packing and unpacking of field lists: the one reader and writer of frame bodies, ops, permits and blobs."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

_INTEGERS = {"u8": (1, False), "u16": (2, False), "u32": (4, False), "i8": (1, True)}
_CYCLE_BYTES = 6


class WireMistake(ValueError):
    """Bytes that do not decode, or a value that does not fit its field."""


def _pack_one(kind: Any, value: Any, name: str) -> bytes:
    if kind in _INTEGERS:
        length, signed = _INTEGERS[kind]
        try:
            return int(value).to_bytes(length, "little", signed=signed)
        except OverflowError:
            raise WireMistake(f"{name} = {value} does not fit {kind}") from None
    if kind == "bytes":
        return bytes(value)
    if len(value) > 255:
        raise WireMistake(f"{name} has {len(value)} entries; 255 fit")
    count = bytes([len(value)])
    if kind == "u8*":
        return count + bytes(value)
    if kind == "cycle*":
        return count + b"".join(at.to_bytes(4, "little") + word.to_bytes(2, "little") for at, word in value)
    return count + b"".join(pack(kind, entry) for entry in value)


def pack(fields: Sequence[tuple[str, Any]], values: Mapping[str, Any]) -> bytes:
    """The bytes of `values` in the order of `fields`; WireMistake if one does not fit."""
    return b"".join(_pack_one(kind, values[name], name) for name, kind in fields)


def _take(data: bytes, at: int, length: int, name: str) -> bytes:
    if at + length > len(data):
        raise WireMistake(f"{name} is cut short")
    return data[at : at + length]


def unpack_from(fields: Sequence[tuple[str, Any]], data: bytes, at: int = 0) -> tuple[dict[str, Any], int]:
    """Values and the offset behind them; WireMistake when the data end too early."""
    values: dict[str, Any] = {}
    for name, kind in fields:
        if kind in _INTEGERS:
            length, signed = _INTEGERS[kind]
            values[name] = int.from_bytes(_take(data, at, length, name), "little", signed=signed)
            at += length
            continue
        if kind == "bytes":
            values[name], at = data[at:], len(data)
            continue
        count = _take(data, at, 1, name)[0]
        at += 1
        if kind == "u8*":
            values[name] = _take(data, at, count, name)
            at += count
        elif kind == "cycle*":
            raw = _take(data, at, count * _CYCLE_BYTES, name)
            values[name] = tuple(
                (int.from_bytes(raw[i : i + 4], "little"), int.from_bytes(raw[i + 4 : i + 6], "little"))
                for i in range(0, len(raw), _CYCLE_BYTES)
            )
            at += len(raw)
        else:
            entries = []
            for _ in range(count):
                entry, at = unpack_from(kind, data, at)
                entries.append(entry)
            values[name] = tuple(entries)
    return values, at


def unpack(fields: Sequence[tuple[str, Any]], data: bytes) -> dict[str, Any]:
    """Values of data that hold exactly these fields; WireMistake otherwise."""
    values, end = unpack_from(fields, data)
    if end != len(data):
        raise WireMistake(f"{len(data) - end} bytes too many")
    return values
