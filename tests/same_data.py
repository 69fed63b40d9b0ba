"""Whether two samples hold the same data, array by array, however deep they lie."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from typing import Any

import numpy as np


def assert_same_sample(mine: Any, theirs: Any) -> None:
    """Every array of `theirs` is in `mine`, entry for entry."""
    if dataclasses.is_dataclass(theirs) and not isinstance(theirs, type):
        assert type(mine) is type(theirs)
        for entry in dataclasses.fields(theirs):
            assert_same_sample(getattr(mine, entry.name), getattr(theirs, entry.name))
    elif isinstance(theirs, Mapping):
        assert mine.keys() == theirs.keys()
        for key, value in theirs.items():
            assert_same_sample(mine[key], value)
    else:
        np.testing.assert_array_equal(mine, theirs)
