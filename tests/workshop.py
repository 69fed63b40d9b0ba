"""A small ladder on disk that tests spoil before it is read."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from builders import choices, tables, write_tables

from ladderfit.choices import Choices
from ladderfit.errors import InputError
from ladderfit.ladder import read_ladder
from ladderfit.ladder_file import write_choices


class Workshop:
    """A small ladder on disk that tests spoil before it is read."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.tables = {key: table.astype(object) for key, table in tables().items()}
        self.choices = choices(tables=True)

    def file(self, name: str) -> str:
        return str(self.folder / name)

    def cell(self, section: str, row: int, column: str, value: Any) -> None:
        self.tables[section].loc[row - 1, column] = value

    def write(self) -> Path:
        write_tables(self.folder, self.tables)
        path = self.folder / "ladder.toml"
        if not path.exists():
            write_choices(Choices.from_mapping(self.choices), path)
        return path

    def complaints(self) -> list[str]:
        path = self.write()
        with pytest.raises(InputError) as caught:
            read_ladder(path)
        return str(caught.value).splitlines()
