"""A ladder laid down in a folder reads back as the same one."""

from __future__ import annotations

from pathlib import Path

import astropy.units as u
import builders
import numpy as np
import pytest
from astropy.table import QTable
from same_data import assert_same_sample
from small_ladders import SMALL, small_ladder

from ladderfit import ladder_copy
from ladderfit.errors import LadderfitError
from ladderfit.ladder import Ladder, build_ladder, read_ladder
from ladderfit.ladder_copy import copy_ladder
from ladderfit.sampling.run_folder import fingerprint
from ladderfit.shipped import sample_ladder


def assert_same_data(one: Ladder, two: Ladder) -> None:
    assert one.hosts == two.hosts
    for name in ("cepheids", "parallax_stars", "peaks", "flow", "velocities"):
        mine, theirs = getattr(one, name), getattr(two, name)
        assert (mine is None) == (theirs is None)
        if mine is not None:
            assert_same_sample(mine, theirs)


@pytest.mark.parametrize("name", SMALL)
def test_tables_in_memory_are_written_out(name: str, tmp_path: Path) -> None:
    ladder = small_ladder(name)
    copy = copy_ladder(ladder, tmp_path)
    assert copy.path == tmp_path / "ladder.toml"
    assert_same_data(ladder, copy)
    assert len(list((tmp_path / "tables").iterdir())) == len(ladder.sources)


def test_tables_in_files_stay_where_they_are(tmp_path: Path) -> None:
    ladder = read_ladder(sample_ladder())
    (tmp_path / "deep" / "run").mkdir(parents=True)
    copy = copy_ladder(ladder, tmp_path / "deep" / "run")
    assert_same_data(ladder, copy)
    assert [entry.name for entry in (tmp_path / "deep" / "run").iterdir()] == ["ladder.toml"]
    for section, source in copy.sources.items():
        assert source.sha256 == ladder.sources[section].sha256
        assert not Path(source.path).is_absolute()


def test_empty_cells_units_and_whole_numbers_survive(tmp_path: Path) -> None:
    tables = dict(builders.tables())
    tables["cepheids"].loc[3, "Hmag"] = np.nan
    tables["cepheids"]["ID"] = np.arange(36) + 7_000_000_000_000_000_001
    tables["cepheids"]["Mode"] = ["F"] * 35 + [None]
    stars = QTable.from_pandas(tables["anchors.parallaxes"])
    stars["plx"] = (stars["plx"] * u.mas).to(u.arcsec)
    stars["e_plx"] = stars["e_plx"] * u.mas
    stars["P"] = (stars["P"] * u.d).to(u.h)
    ladder = build_ladder(builders.choices(), {**tables, "anchors.parallaxes": stars})
    copy = copy_ladder(ladder, tmp_path)
    assert_same_data(ladder, copy)
    assert copy.cepheids is not None
    assert "7000000000000000001" in copy.cepheids.star
    assert copy.kept["cepheids"].kept == 34


def test_a_copy_that_reads_back_otherwise_is_refused(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Negative control: a writer that rounds."""
    honest = ladder_copy._cells

    def rounding(column, unit):
        cells = honest(column, unit)
        if cells.dtype.kind == "f":
            cells[:] = np.round(cells, 3)
        return cells

    monkeypatch.setattr(ladder_copy, "_cells", rounding)
    with pytest.raises(LadderfitError, match="does not read back from a file as the same numbers"):
        copy_ladder(small_ladder("anchors"), tmp_path)


def test_the_fingerprint_follows_choices_and_contents() -> None:
    ladder = small_ladder("anchors")
    mark = fingerprint(ladder)
    assert fingerprint(ladder.change({"sampling.seed": 9, "title": "other"})) == mark
    assert fingerprint(ladder.change({"relation.pivot": 9.0})) != mark
    assert fingerprint(ladder.change({"anchors.geometric.Tavin.error": 0.03})) != mark
    assert fingerprint(small_ladder("anchors", seed=1)) != mark
