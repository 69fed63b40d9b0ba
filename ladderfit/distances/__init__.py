"""A saved calibration applied to new objects."""
