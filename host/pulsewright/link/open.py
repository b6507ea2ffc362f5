"""Opens a rig by its name: the one place outside of `virtual` that knows the virtual rig."""

from __future__ import annotations

from typing import TYPE_CHECKING

from pulsewright.errors import UsageMistake
from pulsewright.link.transport import Transport

if TYPE_CHECKING:
    from pulsewright.virtual.bench import Bench

_VIRTUAL = "virtual"


class OpenRig:
    """A rig that is open: its transport, and the bench behind it where it is the virtual rig in this process."""

    def __init__(self, transport: Transport, bench: Bench | None = None) -> None:
        self.transport = transport
        self.bench = bench

    @property
    def in_process(self) -> bool:
        """Whether it is the virtual rig in this process, which has no chip to harm (H10)."""
        return self.bench is not None

    @property
    def banner(self) -> str:
        """The first line of a command that uses it; "" for a rig behind a port."""
        return "virtual rig: no hardware is touched" if self.in_process else ""

    def close(self) -> None:
        """Gives the line back and keeps a kept bench as it now is, whatever happened. FileMistake if that fails."""
        try:
            self.transport.close()
        finally:
            if self.bench is not None:
                self.bench.save()


def open_rig(name: str | None, chip_name: str | None = None, *, maker: str = "") -> OpenRig:
    """The rig called `name`.

    "virtual": a fresh bench with the chip `chip_name` of that maker, used before, kept nowhere. "virtual:BENCH": the
    bench kept in that file. All else: a serial port or pySerial URL. UsageMistake without a name; FileMistake or
    RigFileMistake for a bench, LinkFault for a port.
    """
    if not name:
        raise UsageMistake(
            "no rig is named",
            wanted="a serial port, a pySerial URL, virtual, or virtual:BENCH",
            hint="virtual tries it without hardware",
        )
    kind, colon, bench_file = name.partition(":")
    if kind != _VIRTUAL:
        from pulsewright.link.serial_port import SerialPort

        return OpenRig(SerialPort(name))
    from pulsewright.link.inprocess import InProcess
    from pulsewright.virtual.bench import Bench

    if not colon:
        bench = Bench.fresh(chip_name, maker=_known(chip_name, maker)) if chip_name else Bench.fresh(_any_chip())
    elif bench_file:
        bench = Bench.load(bench_file)
    else:
        raise UsageMistake("virtual: without a bench", wanted="virtual:BENCH", got=name,
                           hint="bench new BENCH --chip CHIP makes one")
    return OpenRig(InProcess(bench.rig(), name), bench)


def _known(chip_name: str, maker: str) -> str:
    """The maker, where the chip's models know it; else "" for the chip that is usual here."""
    from pulsewright.virtual.models import MAKERS

    makers = MAKERS.get(chip_name.lower())
    return maker.lower() if makers is not None and maker.lower() in makers.names else ""


def _any_chip() -> str:
    """A chip for a look at the rig alone."""
    from pulsewright.virtual.models import MODELS

    return next(iter(MODELS))
