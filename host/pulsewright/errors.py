"""The whole tree of errors; each carries the facts a person at the bench needs, and its exit code.

PulsewrightError
├── Difference            exit 1   chip and image differ, not blank, a burn that needs an erase
├── UsageMistake          exit 2   wrong usage
│   ├── FileMistake                a file that cannot be read or written
│   ├── ImageMistake               an image file that is damaged or does not fit
│   ├── DefinitionMistake          a definition, with every problem found in it
│   └── RigFileMistake             a rig or bench file, with every problem found in it
├── Refused               exit 3   refused for safety
│   ├── SeatingRefused             no chip, turned, shifted, a lifted or shorted contact
│   ├── IdentityRefused            the ID bytes are not the part's (H2)
│   ├── ProofRefused               the proof found a way in which the sequence is not safe
│   ├── ConsentNeeded              the voltages have not been agreed to (H10)
│   ├── VouchNeeded                a part without electronic ID needs the operator's word (H9)
│   └── ShortfallRefused           a pass that only raises confidence cannot be made
├── ChipFault             exit 4   the chip will not erase or program
├── RigFault              exit 5   link or rig
│   ├── LinkFault                  the link was lost, or damaged past repair
│   │   ├── PortMissing            no such port, or nothing behind it
│   │   ├── PortUnusable           what is named is no serial port, or works as none
│   │   ├── PortNotPermitted       the system does not let this user open it
│   │   ├── PortBusy               another program, or a second Pulsewright, holds it
│   │   ├── RigSilent              it was opened, and nothing came
│   │   └── RigNoise               bytes came, but no greeting
│   ├── OtherFirmware              the rig speaks another wire table
│   ├── RigRestarted               the boot number changed under a job
│   ├── Tripped                    the rig made itself safe, with a reason and numbers
│   └── CannotMake                 the rig has no such step, or not that many at once
└── Interrupted           exit 130 the operator stopped it; made safe
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass


@dataclass(frozen=True)
class Where:
    """A place in a file a user wrote: `line` counts from 1 (0 = whole file), `key` is the dotted key or a column."""

    file: str = ""
    line: int = 0
    key: str = ""

    def __str__(self) -> str:
        place = self.file
        if self.line:
            place += f":{self.line}"
        if self.key:
            place += f" {self.key}" if place else self.key
        return place


@dataclass(frozen=True)
class Problem:
    """One mistake in a file: what stands there, what is wanted, the nearest right word if there is one."""

    where: Where
    what: str
    found: str = ""
    wanted: str = ""
    nearest: str = ""
    warning: bool = False

    def __str__(self) -> str:
        place = f"{self.where}: " if str(self.where) else ""
        parts = [f"{place}{'warning: ' if self.warning else ''}{self.what}"]
        if self.found:
            parts.append(f"found {self.found}")
        if self.wanted:
            parts.append(f"wanted {self.wanted}")
        if self.nearest:
            parts.append(f"did you mean {self.nearest}?")
        return "; ".join(parts)


class PulsewrightError(Exception):
    """Base of all: `what` happened, `where`, numbers `wanted` and `got`, what the rig `did`, one thing to `hint`."""

    exit_code = 5
    stage = ""  # of reaching a rig: where it ended, for `--json`; "" for all that is no matter of the way to a rig

    def __init__(
        self,
        what: str,
        *,
        where: Where | None = None,
        step: str = "",
        wanted: str = "",
        got: str = "",
        did: str = "",
        hint: str = "",
        facts: Sequence[str] = (),
        more: Mapping[str, object] | None = None,
    ) -> None:
        super().__init__(what)
        self.more = dict(more or {})  # values that only `--json` and the record carry
        self.what = what
        self.where = where
        self.step = step
        self.wanted = wanted
        self.got = got
        self.did = did
        self.hint = hint
        self.facts = tuple(facts)

    def lines(self) -> list[str]:
        """The message as lines of text, facts before guesses."""
        text = [self.what]
        if self.where is not None and str(self.where):
            text.append(f"  where: {self.where}")
        for name, value in (("step", self.step), ("wanted", self.wanted), ("got", self.got), ("the rig", self.did)):
            if value:
                text.append(f"  {name}: {value}")
        text.extend(f"  {fact}" for fact in self.facts)
        if self.hint:
            text.append(f"  try: {self.hint}")
        return text

    def facts_json(self) -> dict[str, object]:
        """The same facts for `--json`: only the keys that have a value."""
        facts: dict[str, object] = {"error": type(self).__name__, "what": self.what}
        if self.stage:
            facts["stage"] = self.stage
        if self.where is not None:
            facts["where"] = str(self.where)
        for name in ("step", "wanted", "got", "did", "hint"):
            value = getattr(self, name)
            if value:
                facts[name] = value
        facts |= self.more
        if self.facts:
            facts["facts"] = list(self.facts)
        return facts


class Difference(PulsewrightError):
    """Chip and image differ, the chip is not blank, or a burn needs 0 -> 1 without an erase."""

    exit_code = 1


class UsageMistake(PulsewrightError):
    """Wrong usage; nothing was sent to a rig."""

    exit_code = 2


class FileMistake(UsageMistake):
    """A file that cannot be read or written."""


class ImageMistake(UsageMistake):
    """An image file that is damaged or does not fit the chip."""


class _Listed(UsageMistake):
    """A mistake that lists every problem found in one run."""

    def __init__(self, what: str, problems: Iterable[Problem], *, hint: str = "") -> None:
        self.problems = tuple(problems)
        super().__init__(what, facts=[str(problem) for problem in self.problems], hint=hint)


class DefinitionMistake(_Listed):
    """A definition with one or more problems."""


class RigFileMistake(_Listed):
    """A rig or bench file with one or more problems."""


class Refused(PulsewrightError):
    """Refused for safety; the rig raised nothing, or has dropped it."""

    exit_code = 3


class SeatingRefused(Refused):
    """The seating check found no chip, or one that is turned, shifted, lifted or shorted."""


class IdentityRefused(Refused):
    """The ID bytes read are not the part's (H2)."""


class ProofRefused(Refused):
    """The proof found a path on which the sequence is not safe; it was not sent."""


class ConsentNeeded(Refused):
    """The operator has not agreed to these voltages yet (H10)."""


class VouchNeeded(Refused):
    """A part without electronic ID gets a raised level only on the operator's word (H9)."""


class ShortfallRefused(Refused):
    """The rig cannot make a pass that only raises confidence."""


class ChipFault(PulsewrightError):
    """The chip will not erase or program."""

    exit_code = 4


class RigFault(PulsewrightError):
    """Link or rig."""

    exit_code = 5


class LinkFault(RigFault):
    """The link was lost, or is damaged past repair; the classes below: there never was one."""

    stage = "lost"


class PortMissing(LinkFault):
    """There is no such port, or nothing behind it."""

    stage = "missing"


class PortUnusable(LinkFault):
    """What is named is something else than a serial port, no URL of one, or cannot be used as one."""

    stage = "unusable"


class PortNotPermitted(LinkFault):
    """The system does not let this user open the port."""

    stage = "not_permitted"


class PortBusy(LinkFault):
    """Another program, or a second Pulsewright, holds the port."""

    stage = "busy"


class RigSilent(LinkFault):
    """The port was opened, and nothing came at the rate of greetings."""

    stage = "silent"


class RigNoise(LinkFault):
    """Bytes came, but no greeting."""

    stage = "noise"


class OtherFirmware(RigFault):
    """The rig's wire table is another than this program's."""

    stage = "other_fingerprint"


class RigRestarted(RigFault):
    """The rig's boot number changed under a session: nothing resumes, look again."""

    stage = "restarted"


class Tripped(RigFault):
    """The rig made itself safe."""


class CannotMake(RigFault):
    """The rig has no such step, or not that many at once."""


class Interrupted(PulsewrightError):
    """Stopped by the operator; the rig was made safe."""

    exit_code = 130
