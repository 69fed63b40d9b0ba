"""Covariance files: what is read, and what is said of those that do not fit."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from astropy.io import fits
from small_ladders import SMALL, TRUTH

from ladderfit.errors import InputError
from ladderfit.inputs.covariances import read_covariance
from ladderfit.ladder import Ladder, build_ladder, read_ladder
from ladderfit.ladder_copy import copy_ladder

KEY = "supernovae.covariance"


def matrix(n: int, seed: int = 1) -> np.ndarray:
    rng = np.random.default_rng(seed)
    patterns = 0.05 * rng.normal(size=(n, 2))
    return np.diag(rng.uniform(0.05, 0.1, n) ** 2) + patterns @ patterns.T


def text(values: np.ndarray) -> str:
    return "\n".join([str(len(values)), *(repr(float(v)) for v in values.ravel())])


def write(path: Path, values: np.ndarray) -> Path:
    if path.suffix == ".npy":
        np.save(path, values)
    elif path.suffix == ".fits":
        fits.PrimaryHDU(values).writeto(path)
    else:
        path.write_text(text(values))
    return path


def complaint(path: Path, names: Path | None = None) -> str:
    with pytest.raises(InputError) as caught:
        read_covariance(path, names, KEY)
    (problem,) = caught.value.problems
    line = str(problem)
    assert line.startswith(str(path if names is None else names))
    return line.split(": ", 1)[1]


@pytest.mark.parametrize("name", ["c.txt", "c.cov", "c.npy", "c.fits"])
def test_every_format_gives_the_same_numbers(tmp_path: Path, name: str) -> None:
    values = matrix(7)
    found = read_covariance(write(tmp_path / name, values), None, KEY)
    np.testing.assert_allclose(found.values, values, rtol=1e-15)
    assert np.array_equal(found.values, found.values.T)
    assert found.names is None


def test_an_image_in_an_extension(tmp_path: Path) -> None:
    units = fits.HDUList([fits.PrimaryHDU(), fits.ImageHDU(matrix(3))])
    units.writeto(tmp_path / "c.fits")
    assert len(read_covariance(tmp_path / "c.fits", None, KEY)) == 3


def test_rounding_in_a_text_is_no_asymmetry(tmp_path: Path) -> None:
    values = matrix(4)
    values[1, 2] *= 1.0 + 1e-7
    found = read_covariance(write(tmp_path / "c.txt", values), None, KEY)
    assert found.values[1, 2] == found.values[2, 1]


def spoilt(place: tuple[int, int], value: float) -> np.ndarray:
    values = matrix(4)
    values[place] = value
    return values


@pytest.mark.parametrize(
    ("values", "words"),
    [
        (spoilt((0, 1), 0.002), "in row 1, column 2 and"),
        (spoilt((2, 2), -0.01), "found the variance -0.01 in row 3"),
        (spoilt((1, 3), np.nan), "found nan in row 2, column 4; expected numbers"),
        (matrix(4)[:3], "found 3 x 4 numbers; expected as many rows as columns"),
        (np.ones(5), "found 5 numbers; expected as many rows as columns"),
    ],
)
def test_matrices_that_are_no_covariances(tmp_path: Path, values: np.ndarray, words: str) -> None:
    assert words in complaint(write(tmp_path / "c.npy", values))


@pytest.mark.parametrize(
    ("content", "words"),
    [
        ("2\n1 0 0\n", "found '2' at the start, and 3 numbers after it"),
        ("1 0\n0 1\n", "expected the number of rows N, and then N x N numbers"),
        ("", "found 'nothing' at the start, and 0 numbers after it"),
        ("2\n1 0\n0 one\n", "found 'one' in row 2, column 2; expected numbers"),
        ("1.5\n1\n", "found '1.5' at the start"),
    ],
)
def test_texts_that_are_no_matrices(tmp_path: Path, content: str, words: str) -> None:
    (tmp_path / "c.txt").write_text(content)
    assert words in complaint(tmp_path / "c.txt")


def test_files_that_cannot_be_read(tmp_path: Path) -> None:
    assert "found no such file; expected a covariance matrix" in complaint(tmp_path / "c.txt")
    (tmp_path / "c.pkl").write_bytes(b"\x80\x04.")
    assert "found the extension '.pkl'" in complaint(tmp_path / "c.pkl")
    (tmp_path / "c.fits").write_bytes(b"no image")
    assert "expected a covariance matrix" in complaint(tmp_path / "c.fits")
    np.save(tmp_path / "c.npy", np.array([{}], dtype=object), allow_pickle=True)
    assert "allow_pickle=False" in complaint(tmp_path / "c.npy")


def test_lists_of_names_that_do_not_fit(tmp_path: Path) -> None:
    path, names = write(tmp_path / "c.npy", matrix(3)), tmp_path / "names.txt"
    assert "found no such file; expected a list of names" in complaint(path, names)
    names.write_text("a\nb\n")
    assert "found 2 names, where the matrix has 3 rows" in complaint(path, names)
    names.write_bytes(b"\xff\xfe\xff")
    assert "not UTF-8" in complaint(path, names)


# --- in a ladder -------------------------------------------------------------------------


def parts_of(name: str = "no Cepheids") -> tuple[dict[str, Any], dict[str, Any]]:
    return SMALL[name][0](np.random.default_rng(701), TRUTH)


def built(folder: Path, values: np.ndarray, names: list[str] | None = None) -> Ladder:
    """Four peaks and 24 supernovae in the expansion."""
    choices, tables = parts_of()
    choices["supernovae"]["covariance"] = {"adds": False}
    if names is not None:
        (folder / "names.txt").write_text("\n".join(names))
        choices["supernovae"]["covariance"]["names"] = "names.txt"
    return build_ladder(choices, tables | {KEY: values}, folder)


def refused(folder: Path, values: np.ndarray, names: list[str] | None = None) -> list[str]:
    with pytest.raises(InputError) as caught:
        built(folder, values, names)
    return [str(problem) for problem in caught.value.problems]


ALL = [*(f"P{i}" for i in range(4)), *(f"F{i}" for i in range(24))]


def test_variances_are_those_of_the_covariance(tmp_path: Path) -> None:
    values = matrix(28)
    ladder = built(tmp_path, values)
    assert ladder.peaks is not None
    assert ladder.flow is not None
    variance = np.concatenate([ladder.peaks.variance, ladder.flow.variance])
    np.testing.assert_array_equal(variance, np.diag(values))
    assert ladder.peak_covariance is not None
    added = np.diag(ladder.peak_covariance) - variance
    assert np.all(added[:4] == 0.0)
    assert np.all(added[4:] > 0.0)  # peculiar velocities


def test_wrong_size(tmp_path: Path) -> None:
    (line,) = refused(tmp_path, matrix(24))
    assert "key supernovae.covariance.file: found 24 rows; expected 28 rows, one for each" in line
    assert "(4 supernovae in hosts and 24 in the expansion)" in line


def test_names_missing_or_repeated(tmp_path: Path) -> None:
    listed = ["Q1" if name == "P1" else name for name in ALL]
    (line,) = refused(tmp_path, matrix(28), listed)
    assert "key supernovae.covariance.names: found no 'P1'" in line
    (line,) = refused(tmp_path, matrix(29), [*ALL, "F3"])
    assert "found 'F3' 2 times, where the tables have it 1 times" in line


def test_names_of_rows_that_are_cut_may_be_missing(tmp_path: Path) -> None:
    choices, tables = parts_of()
    choices["supernovae"]["covariance"] = {"names": "names.txt"}
    choices["supernovae"]["set_aside"] = [{"name": "P1", "reason": "a test"}]
    (tmp_path / "names.txt").write_text("\n".join(name for name in ALL if name != "P1"))
    ladder = build_ladder(choices, tables | {KEY: matrix(27)}, tmp_path)
    assert ladder.peak_covariance is not None
    assert len(ladder.peak_covariance) == 27


def test_not_positive_definite(tmp_path: Path) -> None:
    values = np.diag(np.full(28, 0.01))
    values[0, 1] = values[1, 0] = 0.02
    (line,) = refused(tmp_path, values)
    assert "found a matrix that is not positive definite (smallest eigenvalue -1 in units" in line
    twins = np.diag(np.full(28, 0.01))
    twins[2, 3] = twins[3, 2] = 0.01  # the same supernova twice
    assert "one of two identical objects" in refused(tmp_path, twins)[0]
    twins[26, 27] = twins[27, 26] = 0.01  # in the expansion peculiar velocities set them apart
    twins[2, 3] = twins[3, 2] = 0.0
    assert built(tmp_path, twins).peak_covariance is not None


def test_one_table_for_both_samples(tmp_path: Path) -> None:
    """Hosts and expansion picked from one table: the matrix has that table's rows."""
    choices, tables = parts_of()
    near = tables["supernovae"].assign(zcmb=0.004, zhel=0.004)
    whole = near.merge(tables["expansion"], how="outer", sort=False)
    whole = whole.set_index("SN").loc[ALL].reset_index()
    whole.to_csv(tmp_path / "all.csv", index=False)
    values = matrix(28)
    np.save(tmp_path / "c.npy", values)
    for section in ("supernovae", "expansion"):
        choices[section]["table"] = "all.csv"
    choices["supernovae"]["covariance"] = {"file": "c.npy"}
    ladder = build_ladder(choices, base=tmp_path)
    assert ladder.peak_covariance is not None
    expected = values.copy()
    expected[4:, 4:] += np.diag(np.diag(ladder.peak_covariance)[4:] - np.diag(values)[4:])
    np.testing.assert_allclose(ladder.peak_covariance, expected, rtol=1e-14)


def test_peak_errors_are_needed_unless_a_covariance_replaces_them() -> None:
    choices, tables = parts_of()
    for section in ("supernovae", "expansion"):
        del choices[section]["columns"]["peak_error"]
    for covariance in (None, {"adds": True}):
        both = {} if covariance is None else {"covariance": covariance}
        choices["supernovae"] |= both
        matrices = {} if covariance is None else {KEY: matrix(28)}
        with pytest.raises(InputError, match=r"columns\.peak_error: found nothing"):
            build_ladder(choices, tables | matrices)
    choices["supernovae"]["covariance"] = {}
    assert build_ladder(choices, tables | {KEY: matrix(28)}).flow is not None


def test_only_the_expansion_lacks_its_errors() -> None:
    choices, tables = parts_of()
    del choices["expansion"]["columns"]["peak_error"]
    with pytest.raises(InputError) as caught:
        build_ladder(choices, tables)
    assert str(caught.value).startswith("key expansion.columns.peak_error: found nothing; expected")


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        (
            {
                "supernovae.covariance": {"file": "a.npy"},
                "expansion.covariance": {"file": "b.npy"},
            },
            "key expansion.covariance: found a second covariance of peak magnitudes",
        ),
        ({"anchors.covariance": {"file": ""}}, "key anchors.covariance.file: found an empty path"),
        ({"supernovae.covariance.fil": "a.npy"}, "did you mean 'file'"),
    ],
)
def test_choices_that_do_not_fit(changes: dict[str, Any], words: str) -> None:
    choices, tables = parts_of()
    ladder = build_ladder(choices, tables)
    with pytest.raises(InputError) as caught:
        ladder.change(changes)
    assert words in str(caught.value)


def test_a_covariance_of_no_table() -> None:
    choices, tables = parts_of("intercept")
    choices["expansion"]["covariance"] = {"file": "c.npy"}
    with pytest.raises(InputError, match="a covariance without a table of peaks and redshifts"):
        build_ladder(choices, tables)


def test_on_disk_and_copied(tmp_path: Path) -> None:
    """A ladder in files with a matrix and names: read, hashed, copied elsewhere, changed."""
    choices, tables = parts_of()
    choices["supernovae"]["covariance"] = {"names": "names.txt"}
    (tmp_path / "names.txt").write_text("\n".join(ALL))
    memory = build_ladder(choices, tables | {KEY: matrix(28)}, tmp_path)
    assert memory.in_memory
    (tmp_path / "one").mkdir()
    (tmp_path / "two").mkdir()
    one = copy_ladder(memory, tmp_path / "one")
    assert not one.in_memory
    two = copy_ladder(one, tmp_path / "two")
    for ladder in (one, two):
        assert np.array_equal(ladder.peak_covariance, memory.peak_covariance)
        assert {KEY, f"{KEY}.names"} <= set(ladder.sources)
    file = tmp_path / "one" / "tables" / f"{KEY}.npy"
    np.save(file, matrix(28, seed=2))
    again = read_ladder(tmp_path / "two" / "ladder.toml")
    assert "supernovae.covariance.file: the contents differ" in again.difference(two)


def test_changes_elsewhere_keep_the_covariance(tmp_path: Path) -> None:
    ladder = built(tmp_path, matrix(28))
    changed = ladder.change({"expansion.q0": -0.5})
    assert changed.peak_covariance is ladder.peak_covariance
    cut = ladder.change({"expansion.redshifts": [0.05, 0.15]})
    assert len(cut.peak_covariance) < 28
