"""The heart: compiles definition steps into ops on the wire; pure functions, no I/O."""
