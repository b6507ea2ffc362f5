"""Raw binary: the bytes of the chip, from address 0 up, and nothing else."""

from __future__ import annotations

from pulsewright.errors import ImageMistake, Where
from pulsewright.image.memory import Image, image_of


def parse_raw(data: bytes, name: str = "") -> Image:
    """An image of the file's bytes from address 0; ImageMistake if there are none."""
    if not data:
        raise ImageMistake(
            "the image file is empty", where=Where(name), wanted="at least one byte", got="0 bytes", hint="get it again"
        )
    return image_of(data, name=name)
