"""What the direction of a difference says about a chip's margins."""

from __future__ import annotations

from pulsewright.image.compare import Comparison

# A fading 0 shows first at a high VCC, an under-erased or slow 1 at a low one (common practice).
FADING = "0s that read 1 show first at a high VCC: charge fades or the burn was too weak"
UNDER_ERASED = "1s that read 0 show first at a low VCC: under-erased or slow"


def verdicts(comparison: Comparison) -> list[str]:
    """What the direction of the differences says."""
    found = []
    if comparison.burn_missing:
        found.append(FADING)
    if comparison.needs_erase:
        found.append(UNDER_ERASED)
    return found
