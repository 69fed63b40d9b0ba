"""One file per command: its options and what it runs; what it needs is imported when it runs."""

from ladderfit.commands import calibrate, draft, mock, workbench

COMMANDS = (calibrate, draft, mock, workbench)  # in the order of --help
