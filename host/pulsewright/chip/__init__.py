"""Definitions of parts: loading, checking, packages and pin maps; knows no rig."""
