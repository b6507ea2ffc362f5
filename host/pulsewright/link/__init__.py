"""Transports and session: the only code that talks to a rig."""
