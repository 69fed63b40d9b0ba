"""Results side by side, and ladders resampled together."""
