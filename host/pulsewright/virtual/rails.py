"""Levels that move: a rail, the socket's VCC or a raised position on its way from one level to another."""

from __future__ import annotations


class Ramp:
    """A level in millivolts that goes straight from one value to another between two ticks, and stays there."""

    __slots__ = ("begin", "end", "from_mv", "to_mv")

    def __init__(self, mv: int = 0) -> None:
        self.from_mv = mv
        self.to_mv = mv
        self.begin = 0
        self.end = 0

    def level(self, t: int) -> int:
        """Millivolts at tick `t`."""
        if t >= self.end:
            return self.to_mv
        if t <= self.begin:
            return self.from_mv
        return self.from_mv + (self.to_mv - self.from_mv) * (t - self.begin) // (self.end - self.begin)

    def move(self, t: int, to_mv: int, ticks: int) -> None:
        """From where it is at `t` to another level, there after so many ticks."""
        self.from_mv = self.level(t)
        self.to_mv = to_mv
        self.begin = t
        self.end = t + ticks
