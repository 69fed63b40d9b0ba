"""Samples cut and joined: every array of a sample, whatever it holds, row by row."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping, Sequence
from typing import Any, TypeVar, cast

import numpy as np

from ladderfit.errors import LadderfitError
from ladderfit.samples import FlowSample, PeakSample, StarSample, VelocitySample, frozen

Sample = TypeVar("Sample", StarSample, PeakSample, FlowSample, VelocitySample)


def taken(sample: Sample, rows: Any) -> Sample:
    """The rows of a sample in the order of `rows`, an index array that may repeat some."""
    return cast("Sample", _each(len(sample), lambda array: array[rows], sample))


def joined(first: Sample, second: Sample) -> Sample:
    """Two samples of one kind, one after the other.

    Raises
    ------
    LadderfitError
        If one of them knows of its objects what the other does not.
    """
    sizes = (len(first), len(second))
    return cast("Sample", _pair(sizes, first, second))


def _each(size: int, take: Any, value: Any) -> Any:
    if isinstance(value, np.ndarray):
        inside = value.ndim > 0 and len(value) == size
        return _kept(take(value)) if inside else value
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        changes = {f.name: _each(size, take, getattr(value, f.name)) for f in _fields(value)}
        return dataclasses.replace(value, **changes)
    if isinstance(value, Mapping):
        return {key: _each(size, take, inner) for key, inner in value.items()}
    return value


def _pair(sizes: tuple[int, int], one: Any, other: Any, what: str = "sample") -> Any:
    if isinstance(one, np.ndarray) and isinstance(other, np.ndarray):
        return _kept(np.concatenate([one, other]))
    if dataclasses.is_dataclass(one) and type(one) is type(other) and not isinstance(one, type):
        changes = {
            f.name: _pair(sizes, getattr(one, f.name), getattr(other, f.name), f.name)
            for f in _fields(one)
        }
        return dataclasses.replace(one, **changes)
    if isinstance(one, Mapping) and isinstance(other, Mapping) and set(one) == set(other):
        return {key: _pair(sizes, one[key], other[key], key) for key in one}
    if one == other:
        return one
    raise LadderfitError(f"two samples cannot be joined: {what} is known of one alone")


def _fields(value: Any) -> Sequence[dataclasses.Field[Any]]:
    return [field for field in dataclasses.fields(value) if field.init]


def _kept(array: Any) -> Any:
    return frozen(array, array.dtype)
