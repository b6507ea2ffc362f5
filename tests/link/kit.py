"""What the tests of the link share: small sequences and blocks for the fake rig, and a session on it."""

from __future__ import annotations

import zlib
from collections.abc import Callable, Iterable

from pulsewright.link.faulty import Faulty, Harm
from pulsewright.link.inprocess import InProcess
from pulsewright.link.results import Block, LinkProgress
from pulsewright.link.session import Session
from pulsewright.sequence.types import Sequence
from pulsewright.wire.ops import Header, encode_program, ins
from pulsewright.wire.permit import Permit, VccStep
from pulsewright.wire.tables import Flow, Identity, Op
from tests.link.fake_rig import FakeRig

WORDS = 16
BLOCK_WORDS = 8
IMAGE = bytes(range(0x30, 0x30 + WORDS))


def sequence(flow: Flow, words: int = WORDS, block_words: int = BLOCK_WORDS) -> Sequence:
    """A sequence of which the fake rig only looks at the header."""
    code = encode_program(Header(8, flow, (12, 11), words, block_words), [ins(Op.END)])
    vcc = (VccStep(3, 1, 2, 3),)
    permit = Permit(Identity.NONE, (), 255, 0, 0, (), vcc, 1, (), b"", 0, zlib.crc32(code))
    return Sequence(flow.name.lower(), f"{flow.name.lower()} some words", code, permit, (), 0, words - 1, 5000)


def image_blocks(image: bytes = IMAGE, words: int = BLOCK_WORDS) -> list[Block]:
    """The image as blocks in which every word is written."""
    return [Block(at, len(image[at : at + words]), None, image[at : at + words]) for at in range(0, len(image), words)]


class Desk:
    """A fake rig, the line to it, and a session; `interrupts` are the times in microseconds of Ctrl-C."""

    def __init__(
        self,
        rig: FakeRig | None = None,
        harms: Iterable[Harm] = (),
        interrupts: Iterable[int] = (),
        on_progress: Callable[[LinkProgress], None] | None = None,
    ) -> None:
        self.rig = rig or FakeRig()
        self.line = Faulty(InProcess(self.rig), harms)
        times = tuple(interrupts)
        self.session = Session(
            self.line,
            interrupted=lambda: sum(self.line.now_us() >= at for at in times),
            on_progress=on_progress,
        )
