"""The words of a definition file: pin roles, timing names with a meaning, patterns of names and values."""

from __future__ import annotations

FORMAT = 1
SUPPLIES = ("VCC", "VPP", "VH")
# Pin roles of the data sheets; a part with several of one kind numbers them (CE1, CE2, CS1 ...).
CONTROL_ROLES = ("CE", "OE", "WE", "PGM", "CS", "BYTE", "RESET", "WP")
ROLES = ("A", "D", *CONTROL_ROLES, "VPP", "VCC", "GND", "BUSY", "NC", "DC")
UNDRIVEN_ROLES = ("VCC", "GND", "BUSY", "NC", "DC")  # a mode never sets these
# Timing parameters the proof gives a meaning to by their name alone; README.md of chipdefs explains each.
MEANT_TIMINGS = (
    *("tAS", "tAH", "tDS", "tDH", "tVCS", "tVS", "tVH", "tVR", "tPRT", "tACC", "tCE", "tOE", "tDF"),
    *("tCS", "tCH", "tOES", "tOEH", "tOEHP", "tWPH", "tWPH2"),  # of bus writes and polls
)
# What the chip takes at most, not what it asks of the rig: over several maker rows the slowest counts.
RESPONSE_TIMINGS = ("tACC", "tCE", "tOE", "tDF", "tWC")
DATA_WORDS = ("in", "out", "Z")
POLL_BITS = ("DQ7", "DQ6")
TECHNOLOGIES = ("eprom", "eeprom", "flash")

IDENT = r"[a-z][a-z0-9_]*"
ROLE_NAME = "|".join(ROLES) + r"|(?:CE|OE|WE|CS)[0-9]"
ALIAS = r"[AD][0-9]{1,2}"
LEVEL = rf"L|H|X|Z|VCC|(?:{'|'.join(SUPPLIES)})\.{IDENT}"
_VOLTAGE = r"\s*[+-]?\d+(?:\.\d+)?\s*(?:V|mV)\s*"
MAXIMUM = rf"{_VOLTAGE}|VCC\s*[+-]{_VOLTAGE}|VCC"
TIMING_NAME = r"t[A-Z][A-Za-z0-9]*"
CYCLE = r"([0-9A-Fa-f]{1,4})@([0-9A-Fa-f]{1,6})"  # a bus write cycle: word, address
