"""Write the sample's files: ``python -m ladderfit.mock FOLDER``."""

from __future__ import annotations

import sys
from pathlib import Path

from ladderfit.mock.scenario import write_sample

if __name__ == "__main__":
    if len(sys.argv) != 2:
        sys.exit("usage: python -m ladderfit.mock FOLDER")
    write_sample(Path(sys.argv[1]))
