"""Makes the Python tables, the C header and the protocol page from firmware/wire.toml.

Run `python -m pulsewright.wire.generate` in a checkout after a change of wire.toml and commit what it wrote;
`--check` writes nothing and exits 1 when a file is stale.
"""

from __future__ import annotations

import json
import sys
import tomllib
import zlib
from pathlib import Path
from typing import Any

Table = dict[str, Any]
_SKIP = {"about"}  # wording has no part in the fingerprint


def meaning(value: Any) -> Any:
    """The table without its wording: what two ends must agree on."""
    if isinstance(value, dict):
        return {key: meaning(inner) for key, inner in value.items() if key not in _SKIP}
    if isinstance(value, list):
        return [meaning(inner) for inner in value]
    return value


def fingerprint(table: Table) -> int:
    """CRC-32/ISO-HDLC of the canonical JSON of the table's meaning."""
    return zlib.crc32(json.dumps(meaning(table), sort_keys=True, separators=(",", ":")).encode())


def _enum(name: str, about: str, members: dict[str, int]) -> list[str]:
    rows = [f"    {key.upper()} = {value}" for key, value in members.items()]
    return [f"class {name}(IntEnum):", f'    """{about}"""', "", *rows, "", ""]


def _enums(table: Table) -> list[str]:
    ops = {name: op["code"] for name, op in table["ops"].items()}
    frames = {name: frame["kind"] for name, frame in table["frames"].items()}
    line = {key: table["line"][key] for key in ("low", "high", "released")}
    bias = {key: table["bias"][key] for key in ("off", "down", "up")}
    groups = {key: table["bias"][key] for key in ("data", "address", "power")}
    text = _enum("Op", "Code byte of each op.", ops)
    text += _enum("Frame", "Kind byte of each frame.", frames)
    text += _enum("Outcome", "How a command ended.", table["outcomes"])
    text += _enum("State", "State of the rig.", table["states"])
    text += _enum("Fault", "Code of a trip or a refusal.", table["faults"])
    text += _enum("Fail", "Why a `fail` op ended the sequence.", table["fails"])
    text += _enum("Identity", "What the gate wants.", table["permit"]["identity"])
    text += _enum("Flow", "What the blocks of a sequence carry.", table["header"]["flow"])
    text += _enum("Level", "State of a line.", line)
    text += _enum("Rail", "The rails.", table["rails"])
    text += _enum("Range", "VCC's way to the socket.", table["ranges"])
    text += _enum("Bias", "A weak pull.", bias)
    text += _enum("Group", "Line groups of a bias, one bit each.", groups)
    text += _enum("Channel", "Converter inputs; POSITION + n is raised switch n.", table["channels"])
    return text + _enum("PollKind", "What a poll waits for.", table["poll_kinds"])


def _pairs(fields: list[list[Any]]) -> str:
    return repr(tuple((name, kind if isinstance(kind, str) else _nested(kind)) for name, kind in fields))


def _nested(fields: list[list[Any]]) -> tuple[Any, ...]:
    return tuple((name, kind if isinstance(kind, str) else _nested(kind)) for name, kind in fields)


def python_text(table: Table) -> str:
    """The source of host/pulsewright/wire/tables.py."""
    text = [
        '"""Numbers of the wire, made from firmware/wire.toml by generate.py: do not edit."""',
        "",
        "# ruff: noqa: E501  # generated rows are as long as their data",
        "# fmt: off",
        "from __future__ import annotations",
        "",
        "from enum import IntEnum",
        "from typing import Any, Final",
        "",
        "Fields = tuple[tuple[str, Any], ...]",
        "",
        "",
        *_enums(table),
        f"FINGERPRINT: Final = 0x{fingerprint(table):08X}",
        f"LAYOUT: Final = {table['layout']}",
        f"ABORT_RUN: Final = {table['framing']['abort_run']}",
        f"HELLO_BAUD: Final = {table['hello']['baud']}",
        f"HELLO_REQUEST: Final = {bytes(table['hello']['request'])!r}",
        f"HELLO_MAGIC: Final = {bytes(table['hello']['magic'])!r}",
        f"HELLO_LENGTH: Final = {table['hello']['length']}",
        f"HELLO_FIELDS: Final[Fields] = {_pairs(table['hello']['fields'])}",
        f"HEADER_VERSION: Final = {table['header']['version']}",
        f"HEADER_LAYOUT: Final[Fields] = {_pairs(table['header']['layout'])}",
        f"PERMIT_LAYOUT: Final[Fields] = {_pairs(table['permit']['layout'])}",
    ]
    text += [f"{key.upper()}: Final = {value}" for key, value in table["limits"].items()]
    text += [f"{key.upper()}_MS: Final = {value}" for key, value in table["times_ms"].items()]
    text += ["", "OP_ARGS: Final[dict[Op, Fields]] = {"]
    text += [f"    Op.{name.upper()}: {_pairs(op['args'])}," for name, op in table["ops"].items()]
    text += ["}", "OP_COST: Final[dict[Op, int]] = {"]
    text += [f"    Op.{name.upper()}: {op['cost']}," for name, op in table["ops"].items()]
    text += ["}", "FRAME_FIELDS: Final[dict[Frame, Fields]] = {"]
    text += [f"    Frame.{name.upper()}: {_pairs(frame['fields'])}," for name, frame in table["frames"].items()]
    text += ["}", "BLOBS: Final[dict[str, Fields]] = {"]
    text += [f"    {name!r}: {_pairs(fields)}," for name, fields in table["blob"].items()]
    return "\n".join([*text, "}", ""])


def _defines(prefix: str, members: dict[str, Any]) -> list[str]:
    rows = [f"#define PW_{prefix}_{key.upper()} {value}u" for key, value in members.items() if isinstance(value, int)]
    return [*rows, ""]


def c_text(table: Table) -> str:
    """The source of firmware/wire.h."""
    text = [
        "/* Numbers of the wire, made from wire.toml by `python -m pulsewright.wire.generate`: do not edit. */",
        "#ifndef PW_WIRE_H",
        "#define PW_WIRE_H",
        "",
        f"#define PW_FINGERPRINT 0x{fingerprint(table):08X}ul",
        f"#define PW_LAYOUT {table['layout']}u",
        f"#define PW_ABORT_RUN {table['framing']['abort_run']}u",
        f"#define PW_HELLO_BAUD {table['hello']['baud']}ul",
        f"#define PW_HEADER_VERSION {table['header']['version']}u",
        "",
    ]
    text += _defines("LIMIT", table["limits"]) + _defines("MS", table["times_ms"])
    text += _defines("FRAME", {name: frame["kind"] for name, frame in table["frames"].items()})
    text += _defines("OP", {name: op["code"] for name, op in table["ops"].items()})
    text += _defines("SEMANTICS", {name: op["semantics"] for name, op in table["ops"].items()})
    sections = (
        ("OUTCOME", table["outcomes"]),
        ("STATE", table["states"]),
        ("FAULT", table["faults"]),
        ("FAIL", table["fails"]),
        ("IDENTITY", table["permit"]["identity"]),
        ("FLOW", table["header"]["flow"]),
        ("LINE", table["line"]),
        ("RAIL", table["rails"]),
        ("RANGE", table["ranges"]),
        ("BIAS", table["bias"]),
        ("CHANNEL", table["channels"]),
        ("POLL", table["poll_kinds"]),
    )
    for prefix, members in sections:
        text += _defines(prefix, members)
    return "\n".join([*text, "#endif", ""])


def _field_text(fields: list[list[Any]]) -> str:
    parts = [f"{name} {kind}" if isinstance(kind, str) else f"{name}×({_field_text(kind)})" for name, kind in fields]
    return ", ".join(parts) or "-"


def page_text(table: Table) -> str:
    """The protocol page firmware/WIRE.md."""
    framing, hello = table["framing"], table["hello"]
    text = [
        "# The wire",
        "",
        "Made from `wire.toml` by `python -m pulsewright.wire.generate`; do not edit. Numbers are little-endian;",
        "times are 62.5 ns ticks; voltages are raw converter counts. `u8*` is a count byte and that many bytes.",
        "",
        f"Fingerprint `{fingerprint(table):08X}`, layout {table['layout']}.",
        "",
        "## Framing",
        "",
        f"Body, then {framing['crc']} (low byte first), stuffed with {framing['encoding']},",
        f"ended by a zero byte. {framing['abort_run']} zero bytes in a row, or a line break, are the abort.",
        "",
        f"Hello, at {hello['baud']} baud and outside the framing: request `{bytes(hello['request']).hex(' ')}`;",
        f"answer of {hello['length']} bytes: magic `{bytes(hello['magic']).hex(' ')}`,",
        f"{_field_text(hello['fields'])}, zeros, CRC-16.",
        "",
        "## Frames",
        "",
        "Each body: kind u8, permit u16 (0 before one is sealed), index u16, then:",
        "",
        "| kind | frame | from | fields | meaning |",
        "| --- | --- | --- | --- | --- |",
    ]
    for name, frame in table["frames"].items():
        fields = _field_text(frame["fields"])
        text.append(f"| {frame['kind']:02X} | {name} | {frame['from']} | {fields} | {frame['about']} |")
    text += ["", "Permit: " + _field_text(table["permit"]["layout"]) + "."]
    text += ["", "Routine header: " + _field_text(table["header"]["layout"]) + ".", ""]
    text += [f"{name}: {_field_text(fields)}.\n" for name, fields in table["blob"].items()]
    text += ["## Ops", "", "| code | op | arguments | cost (ticks) | meaning |", "| --- | --- | --- | --- | --- |"]
    for name, op in table["ops"].items():
        text.append(f"| {op['code']:02X} | {name} | {_field_text(op['args'])} | {op['cost']} | {op['about']} |")
    for title in ("outcomes", "states", "fails", "faults", "limits", "times_ms"):
        text += ["", f"## {title}", ""]
        text += [f"{value} {key}  " for key, value in table[title].items()]
    return "\n".join([*text, ""])


def outputs(repository: Path) -> dict[Path, str]:
    """Every generated file of a checkout with the text it should hold."""
    table = tomllib.loads((repository / "firmware" / "wire.toml").read_text())
    return {
        repository / "host/pulsewright/wire/tables.py": python_text(table),
        repository / "firmware/wire.h": c_text(table),
        repository / "firmware/WIRE.md": page_text(table),
    }


def main(argv: list[str] | None = None) -> int:
    """Writes the files, or with --check tells which are stale."""
    arguments = sys.argv[1:] if argv is None else argv
    stale = 0
    for path, text in outputs(Path(__file__).resolve().parents[3]).items():
        if path.exists() and path.read_text() == text:
            continue
        stale += 1
        print(f"{'stale' if '--check' in arguments else 'wrote'}: {path}")
        if "--check" not in arguments:
            path.write_text(text)
    return 1 if stale and "--check" in arguments else 0


if __name__ == "__main__":
    sys.exit(main())
