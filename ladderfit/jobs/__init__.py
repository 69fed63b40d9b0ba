"""Whole jobs that leave a folder, as the commands call them."""
