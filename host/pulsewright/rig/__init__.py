"""The rig as data: rig file, calibration, rail arithmetic."""
