"""The commands: they print, they never compute."""
