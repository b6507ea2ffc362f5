"""A watcher of pins for tests."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

from pulsewright.virtual.interface import Levels


@dataclass
class Log:
    """A watcher that writes down what it is told."""

    groups: list[tuple[int, tuple[tuple[int, int | None], ...]]] = field(default_factory=list)
    samples: list[int] = field(default_factory=list)
    driving: list[tuple[int, bool]] = field(default_factory=list)
    fights: list[tuple[int, ...]] = field(default_factory=list)

    def edges(self, t: int, levels: Levels, changed: Sequence[int], driven: Sequence[int] | None = None) -> None:
        self.groups.append((t, tuple((pin, levels[pin]) for pin in changed)))
        if driven:
            self.fights.append(tuple(driven))

    def sampled(self, t: int) -> None:
        self.samples.append(t)

    def rig_drives(self, t: int, driving: bool) -> None:
        self.driving.append((t, driving))

    def levels_of(self, pin: int) -> list[tuple[int, int | None]]:
        """(tick, level) of every group that names the pin."""
        return [(t, level) for t, changed in self.groups for name, level in changed if name == pin]
