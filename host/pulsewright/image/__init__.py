"""Images: the file formats, shaping to the chip, checksums, comparing. Knows no chip and no rig."""
