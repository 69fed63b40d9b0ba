"""The small ladder with two overtones, built with choices changed by dotted key."""

from __future__ import annotations

from typing import Any

import pandas as pd
import pytest
from builders import choices, tables

from ladderfit.errors import InputError
from ladderfit.ladder import Ladder, build_ladder
from ladderfit.samples import StarSample


def given(**changes: Any) -> dict[str, pd.DataFrame]:
    """The small tables with two overtones among the Cepheids, rows 5 and 20."""
    found = tables()
    found["cepheids"].loc[[4, 19], "Mode"] = "1O"
    found["cepheids"].loc[[4, 19], "P"] = [4.0, 6.0]
    return {**found, **changes}


def built(changes: dict[str, Any] | None = None, data: Any = None) -> Ladder:
    """The small ladder with choices changed, by dotted key."""
    plain = choices()
    for dotted, value in (changes or {}).items():
        *parts, last = dotted.split(".")
        section = plain
        for part in parts:
            section = section.setdefault(part, {})
        section[last] = value
    return build_ladder(plain, given() if data is None else data)


def cepheids(ladder: Ladder) -> StarSample:
    assert ladder.cepheids is not None
    return ladder.cepheids


def complaints(changes: dict[str, Any], data: Any = None) -> list[str]:
    with pytest.raises(InputError) as caught:
        built(changes, data)
    return str(caught.value).splitlines()
