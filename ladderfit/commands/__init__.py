"""One file per command: its options and what it runs; what it needs is imported when it runs."""

from ladderfit.commands import calibrate, compare, distances, draft, mock, review, workbench

COMMANDS = (calibrate, draft, review, distances, compare, mock, workbench)  # in the order of --help
