"""Files appear whole or not at all."""

from __future__ import annotations

import hashlib
import os
import stat
import subprocess
import sys
from pathlib import Path

import pytest

from ladderfit import files
from ladderfit.errors import InputError, LadderfitError


def leftovers(folder: Path, *expected: str) -> set[str]:
    return {path.name for path in folder.iterdir()} - set(expected)


def test_sha256(tmp_path: Path) -> None:
    (tmp_path / "a").write_bytes(b"abc")
    assert files.sha256_of(tmp_path / "a") == hashlib.sha256(b"abc").hexdigest()


def test_why_there_is_no_file(tmp_path: Path) -> None:
    (tmp_path / "a").write_text("a")
    assert files.why_no_file(tmp_path / "a") is None
    assert files.why_no_file(tmp_path) == "a folder"
    assert files.why_no_file(tmp_path / "b") == "no such file"
    assert files.why_no_file(tmp_path / ("c" * 5_000)) == "File name too long"


def test_text_replaces_and_keeps_permissions(tmp_path: Path) -> None:
    path = tmp_path / "a.toml"
    path.write_text("old")
    path.chmod(0o640)
    files.write_text_atomically(path, "new\u2009text\n")
    assert path.read_text(encoding="utf-8") == "new\u2009text\n"
    assert stat.S_IMODE(path.stat().st_mode) == 0o640
    assert not leftovers(tmp_path, "a.toml")


def test_text_follows_a_link(tmp_path: Path) -> None:
    (tmp_path / "real").write_text("old")
    (tmp_path / "link").symlink_to(tmp_path / "real")
    files.write_text_atomically(tmp_path / "link", "new")
    assert (tmp_path / "link").is_symlink()
    assert (tmp_path / "real").read_text() == "new"


def test_failed_text_leaves_the_old_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "a.toml"
    path.write_text("old")

    def full(_: int) -> None:
        raise OSError("no space left")

    monkeypatch.setattr(os, "fsync", full)
    with pytest.raises(OSError, match="no space"):
        files.write_text_atomically(path, "new")
    assert path.read_text() == "old"
    assert not leftovers(tmp_path, "a.toml")


def test_new_folder_is_moved_into_place(tmp_path: Path) -> None:
    with files.new_folder(tmp_path / "deep" / "out") as folder:
        (folder / "x").write_text("1")
        assert not (tmp_path / "deep" / "out").exists()
    assert (tmp_path / "deep" / "out" / "x").read_text() == "1"
    assert not leftovers(tmp_path / "deep", "out")
    assert os.access(tmp_path / "deep" / "out", os.R_OK | os.W_OK | os.X_OK)


def test_new_folder_is_removed_on_failure(tmp_path: Path) -> None:
    with pytest.raises(KeyboardInterrupt), files.new_folder(tmp_path / "out") as folder:
        (folder / "x").write_text("1")
        raise KeyboardInterrupt
    assert not leftovers(tmp_path)


def test_new_folder_never_overwrites(tmp_path: Path) -> None:
    (tmp_path / "out").mkdir()
    with pytest.raises(InputError, match="a name that is free"):
        files.new_folder(tmp_path / "out").__enter__()
    with (
        pytest.raises(InputError, match="nothing is overwritten"),
        files.new_folder(tmp_path / "late"),
    ):
        (tmp_path / "late").mkdir()
    assert not leftovers(tmp_path, "out", "late")


def test_first_free(tmp_path: Path) -> None:
    assert files.first_free(tmp_path / "sample.v2") == tmp_path / "sample.v2-01"
    (tmp_path / "sample.v2-01").mkdir()
    (tmp_path / "sample.v2-02").symlink_to(tmp_path / "nowhere")
    assert files.first_free(tmp_path / "sample.v2") == tmp_path / "sample.v2-03"


def test_lock_excludes_and_says_who(tmp_path: Path) -> None:
    path = tmp_path / "chain.lock"
    with files.lock(path, "the chain is being written"):
        with (
            pytest.raises(LadderfitError, match=f"being written, held by process {os.getpid()}"),
            files.lock(path),
        ):
            pass
        assert path.exists()
    assert not leftovers(tmp_path)


def test_lock_of_a_dead_process_is_taken_over(tmp_path: Path) -> None:
    path = tmp_path / "chain.lock"
    code = (
        "import os, sys; from ladderfit.files import lock\n"
        "held = lock(sys.argv[1]); held.__enter__(); os._exit(0)"
    )
    subprocess.run([sys.executable, "-c", code, str(path)], check=True)
    assert path.exists()
    with files.lock(path):
        assert str(os.getpid()) in path.read_text()
    assert not path.exists()


def test_lock_of_unknown_origin_is_respected(tmp_path: Path) -> None:
    path = tmp_path / "chain.lock"
    path.write_text("?")
    with pytest.raises(LadderfitError, match="unknown holder; delete the file"), files.lock(path):
        pass
    assert path.read_text() == "?"
