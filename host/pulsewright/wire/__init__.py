"""Tables made from firmware/wire.toml; encoding and decoding of frames and ops."""
