"""One file per command: its options and what it runs; what it needs is imported when it runs."""

from ladderfit.commands import (
    alternatives,
    calibrate,
    compare,
    coverage,
    distances,
    draft,
    mock,
    report,
    review,
    workbench,
)

# in the order of --help
COMMANDS = (
    calibrate,
    alternatives,
    draft,
    review,
    report,
    distances,
    compare,
    mock,
    coverage,
    workbench,
)
