"""Random sparse images for exchange and round trips, drawn so that a failing one shrinks to a small one."""

from __future__ import annotations

from hypothesis import strategies as st

from pulsewright.image.memory import Image, Segment

TOPS = {2: 0x1_0000, 3: 0x100_0000, 4: 0x1_0000_0000}  # the address after the highest, by bytes of an address


@st.composite
def sparse_images(draw: st.DrawFn, *, address_bytes: int | None = None) -> Image:
    """A few runs with gaps, in 16, 24 or 32 bits of address (or `address_bytes` of them), near the borders as well."""
    top = TOPS[address_bytes or draw(st.sampled_from(sorted(TOPS)))]
    borders = [at for at in (0, 0xFFF0, 0x1_0000, 0xF_FFF8, 0xFF_FFF0, 0x100_0000, top - 300) if at < top]
    starts = draw(st.lists(st.sampled_from(borders) | st.integers(0, top - 1), min_size=1, max_size=6, unique=True))
    segments: list[Segment] = []
    for start in sorted(starts):
        data = draw(st.binary(min_size=1, max_size=min(300, top - start)))
        if not segments or start > segments[-1].end:
            segments.append(Segment(start, data))
    return Image(tuple(segments))
