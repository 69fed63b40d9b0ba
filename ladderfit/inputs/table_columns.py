"""Columns of a large table, decoded one at a time when they are asked for."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping

from ladderfit.inputs.tables import Column


class ColumnsOnDemand(Mapping[str, Column]):
    """A table's columns by name; each is decoded at its first use and kept.

    Columns that no choice names are never decoded, and no two are held in the
    file's own form at the same time.

    Parameters
    ----------
    names : sequence of str
    decode : callable
        Makes the `Column` of a name.
    """

    def __init__(self, names: tuple[str, ...], decode: Callable[[str], Column]) -> None:
        self._names = dict.fromkeys(names)
        self._decode = decode
        self._known: dict[str, Column] = {}

    def __getitem__(self, name: str) -> Column:
        if name not in self._names:
            raise KeyError(name)
        if name not in self._known:
            self._known[name] = self._decode(name)
        return self._known[name]

    def __contains__(self, name: object) -> bool:
        return name in self._names

    def __iter__(self) -> Iterator[str]:
        return iter(self._names)

    def __len__(self) -> int:
        return len(self._names)

    def __reduce__(self) -> tuple[type[dict[str, Column]], tuple[dict[str, Column]]]:
        """All columns, decoded: another process may be without the file."""
        return dict, (dict(self),)
