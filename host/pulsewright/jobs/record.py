"""Records: what each job did, one JSON file a job, written whole."""

from __future__ import annotations

import json
import os
import time
from dataclasses import dataclass, field
from datetime import UTC, datetime
from pathlib import Path

from pulsewright.chip.model import Definition
from pulsewright.errors import FileMistake, PulsewrightError, UsageMistake, Where
from pulsewright.files import read_whole, write_whole
from pulsewright.image.checksum import crc32
from pulsewright.image.load import save
from pulsewright.jobs.state import data_folder, made

FORMAT = 1


def crc_text(data: bytes) -> str:
    """CRC-32/ISO-HDLC as everything prints it: 8 hex digits."""
    return f"{crc32(data):08X}"


def source_marks(definition: Definition) -> list[str]:
    """Where the definition's numbers are from, each source once, the chip's own first."""
    sources = [entry.source for entry in definition.supplies.values()]
    sources += [entry.source for entry in definition.maxima.values()]
    sources += [entry.source for entry in definition.timing.values()]
    return list(dict.fromkeys([definition.source, *(source for source in sources if source)]))


@dataclass
class Record:
    """What a job gathers while it runs; `content` are the keys of the file besides those every record has."""

    job: str
    definition: Definition
    content: dict[str, object] = field(default_factory=dict)
    notes: list[str] = field(default_factory=list)
    started: datetime = field(default_factory=lambda: datetime.now(UTC))
    began_s: float = field(default_factory=time.monotonic)

    def note(self, text: str) -> None:
        """A note, once."""
        if text not in self.notes:
            self.notes.append(text)

    def add(self, key: str, entry: object) -> None:
        """One more entry of a list."""
        entries = self.content.setdefault(key, [])
        assert isinstance(entries, list)
        entries.append(entry)

    def document(self, result: str, exit_code: int, error: PulsewrightError | None = None) -> dict[str, object]:
        """The whole record as JSON values."""
        row = self.definition.row
        return {
            "format": FORMAT,
            "job": self.job,
            "time": self.started.isoformat(timespec="seconds"),
            "definition": {
                "name": self.definition.name,
                "file": self.definition.path,
                "digest": self.definition.digest,
                "sources": source_marks(self.definition),
            },
            "maker": row.maker if row is not None else None,
            **self.content,
            "real_us": int((time.monotonic() - self.began_s) * 1_000_000),
            "notes": [*self.definition.notes, *self.notes],
            "result": result,
            "exit": exit_code,
            **({"error": error.facts_json()} if error is not None else {}),
        }

    def write(self, result: str, exit_code: int, error: PulsewrightError | None = None) -> Path:
        """Write the record and return its path; FileMistake if it cannot be written."""
        folder = made(data_folder("records"))
        stamp = self.started.strftime("%Y%m%dT%H%M%S%fZ")
        path = folder / f"{stamp}-{self.job}-{safe_name(self.definition.name)}-{os.urandom(2).hex()}.json"
        text = json.dumps(self.document(result, exit_code, error), indent=1, ensure_ascii=False)
        write_whole(path, text.encode() + b"\n")
        return path


def safe_name(name: str) -> str:
    """A chip's name as a part of a file name."""
    return "".join(letter if letter.isalnum() or letter in "-_" else "_" for letter in name) or "chip"


def save_dump(definition: Definition, data: bytes, first: int, note: str = "") -> Path:
    """Keep what a chip held, under its name, the time, its CRC and a note; FileMistake if that fails.

    Raw for a whole chip; what begins above address 0 as Intel HEX, so that it lands where it was when it is burnt back.
    """
    folder = made(data_folder("saved"))
    stamp = datetime.now(UTC).strftime("%Y%m%dT%H%M%SZ")
    part = (f"-{note}" if note else "") + (f"-from-{first:X}.hex" if first else ".bin")
    path = folder / f"{safe_name(definition.name)}-{stamp}-{crc_text(data)}{part}"
    save(path, data, first=first)
    return path


def record_paths() -> list[Path]:
    """All kept records, oldest first."""
    folder = data_folder("records")
    return sorted(folder.glob("*.json")) if folder.is_dir() else []


def read_record(path: Path) -> dict[str, object]:
    """A record's JSON values; FileMistake for a file that is no record of a known format."""
    try:
        content = json.loads(read_whole(path))
    except (ValueError, UnicodeDecodeError) as error:
        raise FileMistake(f"not a record: {error}", where=Where(str(path)), hint="record list shows them") from error
    if not isinstance(content, dict) or content.get("format") != FORMAT:
        found = content.get("format") if isinstance(content, dict) else type(content).__name__
        raise FileMistake(
            "not a record of a known format", where=Where(str(path)), wanted=f"format {FORMAT}", got=str(found)
        )
    return content


def find_record(name: str) -> Path:
    """The record of a path, a file name or an unambiguous beginning of one; "last" is the newest; else UsageMistake."""
    paths = record_paths()
    if name == "last" and paths:
        return paths[-1]
    found = [path for path in paths if path.name.startswith(name)]
    if len(found) == 1:
        return found[0]
    if Path(name).is_file():
        return Path(name)
    raise UsageMistake(
        f"{len(found)} records begin with {name}" if found else f"no record {name}",
        wanted='a name of `record list`, its beginning, "last", or a path',
        hint="pulsewright record list",
    )
