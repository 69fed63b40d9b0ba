"""``python -m ladderfit``."""

from __future__ import annotations

import sys

from ladderfit.cli import main

if __name__ == "__main__":
    sys.exit(main())
