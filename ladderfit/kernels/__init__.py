"""Arithmetic on plain arrays: no names, no units, no files."""
