"""Identify, read, blank check, erase, burn, verify; the records they leave."""
