"""A 27C256 of one of five makers: 32K x 8, UV-erasable, VPP on its own pin, pulsed at CE; numbers in `c256_limits`."""

from __future__ import annotations

from pulsewright.virtual.models.c256_limits import (
    CE,
    IA9,
    ICC_READ,
    ICC_STANDBY,
    MAKERS,
    OE,
    SIZE,
    VPP,
    limits_of,
)
from pulsewright.virtual.models.uv_eprom import UvEprom, UvPart


def make_chip(maker: str = "st") -> UvEprom:
    """A fresh, erased chip of a maker in `MAKERS`."""
    row = MAKERS[maker]
    return UvEprom(
        UvPart(
            name="27c256",
            limits=limits_of(row),
            size=SIZE,
            ce=CE,
            oe=OE,
            vpp=VPP,
            id=row.id,
            icc_program=row.icc,
            icc_read=ICC_READ,
            icc_standby=ICC_STANDBY,
            ipp_pulse=row.ipp,
            ipp_standing=100,  # invented
            ipp_rest=row.ipp_rest,
            ia9=IA9,
        )
    )
