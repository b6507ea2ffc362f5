"""Pulsewright: host program of a home-built EPROM/EEPROM programmer.

Data flows one way: definition + image + rig -> sequence -> link -> rig or virtual rig -> result -> record -> report.
"""

__version__ = "0.1.0"
