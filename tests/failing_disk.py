"""A disk that fails at the n-th operation: no room, no right, or a broken device.

Counted are opening for writing, writing through Python, syncing, moving, linking and
making folders.  What HDF5 writes by itself is met by a limit on the size of files.
"""

from __future__ import annotations

import builtins
import errno
import io
import os
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

import pytest

FULL, DENIED, BROKEN = errno.ENOSPC, errno.EACCES, errno.EIO


@dataclass
class Disk:
    """Counts operations; number `fails_at`, from 1, fails; without `once`, all later ones."""

    fails_at: int = 0
    code: int = FULL
    once: bool = False
    count: int = 0

    @property
    def failed(self) -> bool:
        if self.once:
            return self.count == self.fails_at
        return 0 < self.fails_at <= self.count

    def touch(self, what: object) -> None:
        self.count += 1
        if self.failed:
            raise OSError(self.code, os.strerror(self.code), str(what))


class _File:
    """A file whose writes are counted."""

    def __init__(self, file: Any, disk: Disk) -> None:
        self._file, self._disk = file, disk

    def write(self, content: Any) -> int:
        self._disk.touch(self._file.name)
        return int(self._file.write(content))

    def writelines(self, lines: Any) -> None:
        for line in lines:
            self.write(line)

    def __getattr__(self, name: str) -> Any:
        return getattr(self._file, name)

    def __enter__(self) -> _File:
        self._file.__enter__()
        return self

    def __exit__(self, *what: object) -> None:
        self._file.__exit__(*what)

    def __iter__(self) -> Iterator[Any]:
        return iter(self._file)


@contextmanager
def failing(fails_at: int = 0, code: int = FULL, *, once: bool = False) -> Iterator[Disk]:
    """Everything inside writes to a disk that fails at its operation `fails_at`; 0: never."""
    disk, opened = Disk(fails_at, code, once), io.open

    def open_(file: Any, mode: str = "r", *arguments: Any, **named: Any) -> Any:
        if not set(mode) & set("wax+"):
            return opened(file, mode, *arguments, **named)
        disk.touch(file)
        return _File(opened(file, mode, *arguments, **named), disk)

    def counted(original: Callable[..., Any]) -> Callable[..., Any]:
        def call(*arguments: Any, **named: Any) -> Any:
            disk.touch(arguments[0])
            return original(*arguments, **named)

        return call

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(io, "open", open_)
        patch.setattr(builtins, "open", open_)
        for name in ("fsync", "rename", "replace", "link", "mkdir"):
            patch.setattr(os, name, counted(getattr(os, name)))
        yield disk
