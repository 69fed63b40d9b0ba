"""The chain file: what is committed stays, whoever dies, and what is foreign is left alone."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import h5py
import killed_writer
import numpy as np
import pytest

from ladderfit.errors import InputError
from ladderfit.sampling import chain_file
from ladderfit.sampling.chain_file import ChainFile
from ladderfit.sampling.chain_layout import Places
from ladderfit.sampling.chain_reading import read_chain, read_commit, viewed
from ladderfit.sampling.ensemble import advance


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "chain.h5"


def places_of(path: Path) -> Places:
    with viewed(path) as view:
        return view.places


def grown(path: Path, rows: int) -> list[np.ndarray]:
    """Add rows in commits of three; returns all rows as they were drawn."""
    with ChainFile.resume(path) as file:
        drawn = []
        for states in advance(killed_writer.log_density, file.header.plan, file.states):
            file.append(states)
            drawn.append(np.array([state.z for state in states]))
            if len(drawn) % 3 == 0 or len(drawn) == rows:
                file.write_commit(float(len(drawn)))
            if len(drawn) == rows:
                return drawn
    raise AssertionError


def test_what_is_written_is_read(path: Path) -> None:
    killed_writer.new_chain(path).close()
    drawn = grown(path, 20)
    chain = read_chain(path, verify=True)
    np.testing.assert_array_equal(chain.z[1:], np.array(drawn))
    np.testing.assert_array_equal(
        chain.log_density[-1, 0], killed_writer.log_density(chain.z[-1, 0])
    )
    header, commit = read_commit(path)
    assert header.names == ("a", "b")
    assert (commit.rows, commit.kept, commit.warm_up, commit.seconds) == (21, 0, None, 20.0)


def test_other_programs_can_read_it(path: Path) -> None:
    killed_writer.new_chain(path).close()
    grown(path, 4)
    with h5py.File(path, "r") as file:
        rows = int(file["commits"]["rows"].max())
        assert file["z"][:rows].shape == (5, 2, 40, 2)
        assert list(file.attrs["names"]) == ["a", "b"]


def test_structure_never_changes_after_it_is_laid_out(path: Path) -> None:
    """Only numbers inside the arrays change, so that no kill can break the file."""
    killed_writer.new_chain(path).close()
    before = np.frombuffer(path.read_bytes(), np.uint8)
    grown(path, 30)
    after = np.frombuffer(path.read_bytes(), np.uint8)
    assert len(before) == len(after)
    places = places_of(path)
    inside = np.zeros(len(after), bool)
    for first, last in (
        (places.records, places.records + places.record_at(1) - places.record_at(0)),
        (places.record_at(1), 2 * places.record_at(1) - places.record_at(0)),
        (places.z_at(0), places.z_at(places.capacity)),
        (places.density_at(0), places.density_at(places.capacity)),
    ):
        inside[first:last] = True
    changed = before != after
    assert changed.any()
    assert not (changed & ~inside).any()


def test_rows_without_a_commit_do_not_count(path: Path) -> None:
    with killed_writer.new_chain(path) as file:
        before = path.read_bytes()
        for states, _ in zip(
            advance(killed_writer.log_density, file.header.plan, file.states),
            range(5),
            strict=False,
        ):
            file.append(states)
        assert file.rows == 6
        assert path.read_bytes() == before
    assert read_commit(path)[1].rows == 1


def test_a_torn_record_gives_way_to_the_one_before(path: Path) -> None:
    killed_writer.new_chain(path).close()
    grown(path, 6)
    places, commit = places_of(path), read_commit(path)[1]
    with path.open("r+b") as stream:
        stream.seek(places.record_at(commit.number) + 40)
        stream.write(b"half a record")
    chain = read_chain(path, verify=True)
    assert chain.commit.number == commit.number - 1
    assert chain.commit.rows == commit.rows - 3


def test_growing_and_trimming_keep_every_draw(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(chain_file, "_ROOM", 4)
    killed_writer.new_chain(path).close()
    drawn = grown(path, 30)
    assert places_of(path).capacity > 4
    with ChainFile.resume(path) as file:
        file.trim()
    assert places_of(path).capacity == 31
    drawn += grown(path, 2)
    np.testing.assert_array_equal(read_chain(path, verify=True).z[1:], np.array(drawn))
    assert [entry.name for entry in path.parent.iterdir()] == ["chain.h5"]


def test_an_interrupted_chain_equals_an_uninterrupted_one(path: Path, tmp_path: Path) -> None:
    other = tmp_path / "other.h5"
    for chain in (path, other):
        killed_writer.new_chain(chain).close()
    killed_writer.to_the_end(path, 60)
    for rows in (7, 8, 31, 60):
        killed_writer.to_the_end(other, rows, pause=0.01)
    assert_same(path, other)


def test_killed_at_random_moments(path: Path, tmp_path: Path, in_full: bool) -> None:
    """No committed draw is lost, no reader sees half a draw, and the resumed chain is the same."""
    done = subprocess.run(
        [sys.executable, killed_writer.__file__, str(path), "60" if in_full else "20", "5"],
        capture_output=True,
        text=True,
        check=False,
        timeout=250,
    )
    assert done.returncode == 0, done.stderr
    found = json.loads(done.stdout)
    assert (found["lost"], found["torn"]) == (0, 0)
    assert found["reads"] > 20
    assert found["rows"] > 20
    rows = read_commit(path)[1].kept + 10
    killed_writer.to_the_end(path, rows)
    other = tmp_path / "other.h5"
    killed_writer.new_chain(other).close()
    killed_writer.to_the_end(other, rows, pause=1.0)
    assert_same(path, other)


def assert_same(path: Path, other: Path) -> None:
    one, two = read_chain(path, verify=True), read_chain(other, verify=True)
    np.testing.assert_array_equal(one.z, two.z)
    np.testing.assert_array_equal(one.log_density, two.log_density)
    assert (one.commit.rows, one.commit.warm_up) == (two.commit.rows, two.commit.warm_up)
    for mine, theirs in zip(one.generators, two.generators, strict=True):
        np.testing.assert_array_equal(mine[1], theirs[1])
        assert mine[2:] == theirs[2:]


def _not_hdf5(path: Path) -> None:
    path.write_text("star,period\n", encoding="utf-8")


def _empty(path: Path) -> None:
    path.write_bytes(b"")


def _cut(part: float) -> object:
    def make(path: Path) -> None:
        killed_writer.new_chain(path).close()
        content = path.read_bytes()
        path.write_bytes(content[: int(part * len(content))])

    return make


def _foreign(path: Path) -> None:
    with h5py.File(path, "w") as file:
        file["mcmc/chain"] = np.zeros((3, 4))


def _foreign_with_a_head(path: Path) -> None:
    with h5py.File(path, "w", userblock_size=2048) as file:
        file["mcmc/chain"] = np.zeros((3, 4))


def _future(path: Path) -> None:
    killed_writer.new_chain(path).close()
    path.write_bytes(path.read_bytes().replace(b"ladderfit chain 1 ", b"ladderfit chain 9 ", 1))


def _damaged_head(path: Path) -> None:
    killed_writer.new_chain(path).close()
    path.write_bytes(path.read_bytes().replace(b'"walkers": 40', b'"walkers": 41', 1))


def _damaged(path: Path) -> None:
    killed_writer.new_chain(path).close()
    grown(path, 6)
    places = places_of(path)
    with path.open("r+b") as stream:
        stream.seek(places.z_at(2) + 11)
        stream.write(b"\x55")


def _no_record(path: Path) -> None:
    killed_writer.new_chain(path).close()
    places = places_of(path)
    with path.open("r+b") as stream:
        stream.seek(places.records)
        stream.write(bytes(places.record_at(1) - places.record_at(0)) * 2)


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (_not_hdf5, "a file that is not HDF5"),
        (_empty, "a file that is not HDF5"),
        (_cut(0.999), "a file cut short"),
        (_cut(0.5), "a file cut short"),
        (_cut(0.0001), "a file cut short"),
        (_cut(0.00001), "a file cut short"),
        (_foreign, "an HDF5 file of another kind"),
        (_foreign_with_a_head, "an HDF5 file of another kind"),
        (_future, "version 9 of the format, where 1 is known"),
        (_damaged_head, "a damaged head"),
        (_damaged, "draws that do not match their checksum"),
        (_no_record, "no whole record of a commit"),
    ],
)
def test_a_file_that_cannot_be_used_is_named_and_left_alone(path: Path, make, words: str) -> None:
    make(path)
    before, when = path.read_bytes(), path.stat().st_mtime_ns
    with pytest.raises(InputError) as caught:
        ChainFile.resume(path)
    (problem,) = caught.value.problems
    assert problem.found == words
    assert problem.file == str(path)
    assert "\n" not in str(problem)
    with pytest.raises(InputError, match="expected a chain file"):
        read_chain(path, verify=True)
    assert path.read_bytes() == before
    assert path.stat().st_mtime_ns == when
    with pytest.raises(InputError, match="a file of that name"):
        killed_writer.new_chain(path)
    assert path.read_bytes() == before


def test_random_damage_ends_in_words_or_leaves_the_draws_as_they_were(path: Path) -> None:
    killed_writer.new_chain(path).close()
    grown(path, 6)
    with ChainFile.resume(path) as file:
        file.trim()
    whole, good = path.read_bytes(), read_chain(path)
    rng = np.random.default_rng(8)
    refused = 0
    for number in range(200):
        content = bytearray(whole)
        end = 600 if number % 2 else len(whole)  # the head, or anywhere
        for place in rng.integers(0, end, size=2):
            content[place] = rng.integers(256)
        path.write_bytes(bytes(content))
        try:
            seen = read_chain(path, verify=True)
        except InputError as error:
            assert len(error.problems) == 1
            refused += 1
        else:
            np.testing.assert_array_equal(seen.z, good.z[: len(seen.z)])
            assert seen.header == good.header
    assert 100 < refused < 200


def test_a_missing_file_is_named(path: Path) -> None:
    with pytest.raises(InputError, match=r"chain\.h5: found no such file"):
        read_commit(path)
