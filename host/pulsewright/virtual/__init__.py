"""The virtual rig: reference interpreter, bench and the waveform judge."""
