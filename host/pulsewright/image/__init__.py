"""Image files: formats, shaping, checksums, comparing."""
