"""How a chip sits in the byte-wide socket: which pin meets which position, in the right way and in the wrong ones."""

from __future__ import annotations

from collections.abc import Mapping

from pulsewright.errors import UsageMistake
from pulsewright.virtual.interface import ChipModel, Levels

POSITIONS = 32
PACKAGES = {"DIP-24": 24, "DIP-28": 28, "DIP-32": 32}  # what fits; bottom-aligned: common practice


def wiring(package: str, seat: str = "") -> dict[int, int]:
    """Position -> pin of a chip that sits as `seat` says: "" as it should, "reversed", "shifted" or "absent".

    "absent" gives the positions of the pins that would be there. UsageMistake for a package that cannot sit so.
    """
    pins = PACKAGES.get(package)
    if pins is None:
        raise UsageMistake(f"{package} does not fit the socket", wanted=", ".join(PACKAGES), got=package)
    above = (POSITIONS - pins) // 2  # free positions on each side, above the chip
    if seat == "shifted":
        if above == 0:
            raise UsageMistake(f"a {package} chip fills the socket and cannot sit shifted", got="shifted")
        return {pin + above + (-1 if pin <= pins // 2 else 1): pin for pin in range(1, pins + 1)}
    if seat == "reversed":
        half = pins // 2  # turned by half a turn, pin 1 is where the first pin of the other row belongs
        return {(pin + half - 1) % pins + 1 + above: pin for pin in range(1, pins + 1)}
    return {pin + above: pin for pin in range(1, pins + 1)}


class EmptySeat:
    """No chip, to the socket: nothing driven, nothing drawn, while the judge sees what the pins would have seen."""

    def __init__(self, chip: ChipModel) -> None:
        self.name = chip.name
        self.pins = chip.pins
        self.outputs = chip.outputs
        self.limits = chip.limits
        self.cells = bytearray()
        self.erased_word = chip.erased_word

    def pins_changed(self, t: int, levels: Levels) -> None:
        """Nobody is there to notice."""

    def drive(self, t: int) -> tuple[int, int]:
        return 0, 0

    def draw_ua(self, t: int, pin: int) -> int:
        return 0

    def state(self) -> dict[str, object]:
        return {}

    def restore(self, state: Mapping[str, object]) -> None:
        """Nothing to restore."""
