"""What data may not do: reach out, swell, run, leave their place, or be read by others."""

from __future__ import annotations

import bz2
import gzip
import json
import lzma
import os
import stat
import subprocess
import sys
import time
import urllib.error
import urllib.request
import zipfile
from html.parser import HTMLParser
from pathlib import Path

import hostile
import numpy as np
import pyarrow
import pyarrow.parquet
import pytest
from astropy.io import fits
from astropy.table import Table
from killed_jobs import ladder_in_files

import ladderfit as lf
from ladderfit.alternatives.folder import write_comparison
from ladderfit.alternatives.run import run_alternatives
from ladderfit.cli import main
from ladderfit.errors import InputError
from ladderfit.inputs.covariances import read_covariance
from ladderfit.inputs.table_files import read_table
from ladderfit.launcher import command, environment, with_file
from ladderfit.report.write import write_report
from ladderfit.sensitivity.error_budget import error_budget
from ladderfit.store import write_result

ADDRESS = b'href="http://127.0.0.1:9/x"'
HEAD = b'<?xml version="1.0"?>'
PUT_TOGETHER = (
    HEAD + b'<!DOCTYPE V [<!ENTITY x "&#60;STREAM hre&#102;=&#34;file:///x&#34;/>">]><V>&x;</V>'
)


def votable(stream: bytes, head: bytes = HEAD) -> bytes:
    return (
        head + b'<VOTABLE version="1.3"><RESOURCE><TABLE><FIELD name="P" datatype="double"/>'
        b"<DATA><BINARY>" + stream + b"</BINARY></DATA></TABLE></RESOURCE></VOTABLE>"
    )


@pytest.mark.parametrize(
    ("name", "content"),
    [
        ("plain", votable(b"<STREAM " + ADDRESS + b"/>")),
        ("bracket", votable(b'<STREAM rights=">" ' + ADDRESS + b"/>")),
        ("prefix", votable(b"<a-b:STREAM " + ADDRESS + b"/>")),
        ("lines", votable(b"<STREAM\n\t" + ADDRESS + b"/>")),
        ("packed", gzip.compress(votable(b"<STREAM " + ADDRESS + b"/>"))),
        ("utf-16", votable(b"<STREAM " + ADDRESS + b"/>", b"").decode().encode("utf-16")),
        ("entities", PUT_TOGETHER),
    ],
)
def test_a_table_does_not_reach_out(
    name: str, content: bytes, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    asked: list[object] = []
    monkeypatch.setattr(urllib.request, "urlopen", lambda *a, **_: asked.append(a))
    path = tmp_path / f"{name}.vot"
    path.write_bytes(content)
    with pytest.raises(InputError, match=r"in another file or on a server|not in UTF-8|entities"):
        read_table(path, "cepheids.table")
    assert not asked


def test_a_stream_inside_the_table_is_read(tmp_path: Path) -> None:
    """The control: the usual binary table, with a link elsewhere in its head."""
    Table({"P": [1.0, 2.0]}).write(tmp_path / "a.vot", format="votable", tabledata_format="binary")
    text = (tmp_path / "a.vot").read_text()
    assert "<STREAM" in text
    (tmp_path / "a.vot").write_text(text.replace("<TABLE>", '<LINK href="http://x/"/><TABLE>'))
    assert read_table(tmp_path / "a.vot", "cepheids.table").rows == 2


def bombs(folder: Path) -> list[Path]:
    """Files of at most some MB that would unpack to some GB."""
    row = b"1.0,2.0,3.0\n" * 1_000_000
    for name, pack in (("a.csv", gzip.compress), ("b.csv", bz2.compress)):
        (folder / name).write_bytes(pack(b"P,W,e\n") + pack(row) * 250)
    (folder / "c.csv").write_bytes(lzma.compress(b"P,W,e\n") + lzma.compress(row) * 250)
    (folder / "d.csv.gz").write_bytes((folder / "a.csv").read_bytes())
    card = fits.Header([("SIMPLE", True), ("BITPIX", 8), ("NAXIS", 1), ("NAXIS1", 3 * 10**9)])
    (folder / "e.fits").write_bytes(gzip.compress(card.tostring().encode()) + _zeros() * 30)
    with zipfile.ZipFile(folder / "f.fits", "w", zipfile.ZIP_DEFLATED) as archive:
        archive.writestr("f.fits", card.tostring().encode() + bytes(250_000_000))
    many = b"".join(
        b"  - &a%d [%s]\n" % (i, b"*a%d, " % (i - 1) * 9 if i else b"1") for i in range(12)
    )
    (folder / "g.ecsv").write_bytes(
        b"# %ECSV 1.0\n# ---\n# meta:\n#"
        + many.rstrip().replace(b"\n", b"\n#")
        + b"\n# datatype: *a11\nP\n1\n"
    )
    _repeating(folder / "h.parquet", pyarrow.array(["A" * 1000]))
    _repeating(folder / "i.parquet", pyarrow.array([1.0]), 300)
    return sorted(folder.iterdir())


def _repeating(path: Path, words: pyarrow.Array, groups: int = 25) -> None:
    """The same value 200,000 times in each group, which Parquet says once."""
    column = pyarrow.DictionaryArray.from_arrays(np.zeros(200_000, np.int32), words)
    table = pyarrow.table({"P": column.cast(words.type)})
    with pyarrow.parquet.ParquetWriter(path, table.schema, compression="zstd") as writer:
        for _ in range(groups):
            writer.write_table(table)


def _zeros() -> bytes:
    return gzip.compress(bytes(100_000_000), 1)


_READ = """
import json, resource, sys, time
from pathlib import Path
from ladderfit.errors import InputError
from ladderfit.inputs.table_files import read_table
resource.setrlimit(resource.RLIMIT_AS, (6 * 10**9,) * 2)
for name in sys.argv[1:]:
    start = time.process_time()
    try:
        read_table(Path(name), "cepheids.table")
        words = "read"
    except InputError as error:
        words = str(error)
    status = dict(line.split(":", 1) for line in Path("/proc/self/status").open())
    most = int(status["VmHWM"].split()[0]) / 1024
    print(json.dumps([Path(name).name, words, time.process_time() - start, most]))
"""


def test_bombs_are_refused(tmp_path: Path) -> None:
    """Below 1 GB and 10 s each, in one line."""
    files = bombs(tmp_path)
    done = subprocess.run(
        [sys.executable, "-c", _READ, *map(str, files)], capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stderr
    found = [json.loads(line) for line in done.stdout.splitlines()]
    assert len(found) == len(files)
    for name, words, seconds, megabytes in found:
        assert "expected a readable table" in words, name
        assert len(words.splitlines()) == 1
        assert seconds < 10.0, name
        assert megabytes < 1_000.0, name


def test_an_image_that_swells_inside(tmp_path: Path) -> None:
    """A compressed image of FITS says its true size in its head."""
    image = fits.CompImageHDU(np.zeros((1, 3_000_000), np.int16), compression_type="RICE_1")
    image.writeto(tmp_path / "matrix.fits")
    with pytest.raises(InputError, match="pixels in a row"):
        read_covariance(tmp_path / "matrix.fits", None, "supernovae.covariance")


@pytest.mark.parametrize("pack", [gzip.compress, bz2.compress, lzma.compress])
def test_compressed_tables_are_read(pack, tmp_path: Path) -> None:
    (tmp_path / "a.csv.gz").write_bytes(pack(b"# from a survey\nP,W\n1,2\n3,4\n"))
    assert read_table(tmp_path / "a.csv.gz", "cepheids.table").rows == 2


def test_files_are_for_whom_the_user_says(tmp_path: Path) -> None:
    """With a mask of 077, nothing is for others: results, reports, drafts, chains."""
    from samplers import by_ensemble

    from ladderfit.sampling.convergence import Goal
    from ladderfit.sampling.live import lay_out

    assert lay_out is not None
    before = os.umask(0o077)
    try:
        ladder = ladder_in_files(tmp_path / "data")
        result = by_ensemble(ladder, tmp_path / "run", goal=Goal(total=200))
        (tmp_path / "run" / "figures").mkdir()
        write_report(result, tmp_path / "run")
        main(["draft", str(tmp_path / "data" / "flow.csv"), "--out", str(tmp_path / "d.toml")])
    finally:
        os.umask(before)
    paths = list(tmp_path.rglob("*"))
    assert {"chain.h5", "posterior.nc", "report.html", "run.json"} <= {path.name for path in paths}
    open_to_others = [path for path in paths if stat.S_IMODE(path.stat().st_mode) & 0o077]
    assert not open_to_others


def test_inputs_outside_the_folder_are_told(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    ladder_in_files(tmp_path / "data")
    text = (tmp_path / "data" / "small.toml").read_text()
    (tmp_path / "data" / "flow.csv").rename(tmp_path / "flow.csv")
    (tmp_path / "data" / "small.toml").write_text(text.replace("flow.csv", "../flow.csv"))
    (tmp_path / "data" / "cepheids.csv").rename(tmp_path / "stars.csv")
    (tmp_path / "data" / "cepheids.csv").symlink_to(tmp_path / "stars.csv")
    main(["calibrate", str(tmp_path / "data" / "small.toml"), "--out", str(tmp_path / "data")])
    said = capsys.readouterr().err.splitlines()[0]
    assert said == "ladderfit: outside the folder of the ladder file: cepheids.csv, ../flow.csv"


class _Tags(HTMLParser):
    def __init__(self) -> None:
        super().__init__()
        self.tags: set[str] = set()
        self.faults: list[str] = []
        self.policy = ""

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.add(tag)
        given = dict(attrs)
        if given.get("http-equiv") == "Content-Security-Policy":
            self.policy = given.get("content") or ""
        for name, value in attrs:
            away = name in ("src", "href") and not (value or "").startswith(("data:image/png", "#"))
            if name.startswith("on") or away:
                self.faults.append(f"{tag} {name}={value}")


def test_a_report_of_hostile_names_runs_nothing(tmp_path: Path) -> None:
    result = lf.draw(hostile.ladder(), seed=1, draws=100)
    write_result(result, tmp_path)
    (tmp_path / "figures").mkdir()
    write_report(result, tmp_path)
    page = _Tags()
    page.feed((tmp_path / "report.html").read_text(encoding="utf-8"))
    assert "default-src 'none'" in page.policy
    assert not page.tags & {"script", "iframe", "object", "embed", "form", "link", "base"}
    assert not page.faults


def test_tables_of_alternatives_hold_no_formulas(tmp_path: Path) -> None:
    ladder = hostile.ladder()
    drop = [{"star": hostile.NAMES[3], "host": hostile.SCRIPT, "reason": "=cmd()"}]
    found = run_alternatives(ladder, {"cepheids.set_aside": [drop]}, draws=50, workers=1)
    write_comparison(found, error_budget(found.result), tmp_path)
    cells = [
        cell.strip('"')
        for path in tmp_path.glob("*.csv")
        for line in path.read_text().splitlines()
        for cell in line.split(",")
    ]
    starts = [cell for cell in cells if cell.startswith(("=", "@", "+"))]
    assert not starts


def test_a_notebook_names_any_file() -> None:
    cell = {"cell_type": "code", "source": ["FILE = None"]}
    for name in ("\N{TELESCOPE}.toml", 'a"; import os #.toml', "a\nb.toml", "\udcff.toml"):
        made = json.loads(with_file(json.dumps({"cells": [cell]}), name))
        source = made["cells"][0]["source"][0]
        scope: dict[str, str] = {}
        exec(compile(source, "cell", "exec"), scope)
        assert scope["FILE"] == name


def test_the_server_asks_for_its_token(tmp_path: Path) -> None:
    """A real JupyterLab as the launcher starts it: on the loopback address, with a token."""
    runtime = tmp_path / "runtime"
    variables = environment() | {"JUPYTER_RUNTIME_DIR": str(runtime), "HOME": str(tmp_path)}
    variables.pop("JUPYTER_TOKEN", None)
    words = command(tmp_path, browser=False)
    server = subprocess.Popen(words, env=variables, stderr=subprocess.DEVNULL)
    try:
        end = time.monotonic() + 90.0
        while not (found := list(runtime.glob("jpserver-*.json"))) or not found[0].stat().st_size:
            assert time.monotonic() < end
            time.sleep(0.1)
        said = json.loads(found[0].read_text())
        assert said["hostname"] == "127.0.0.1"
        assert len(said["token"]) >= 32
        assert not stat.S_IMODE(found[0].stat().st_mode) & 0o077
        address = f"http://127.0.0.1:{said['port']}/api/contents"
        assert _status(address) == 403
        assert _status(f"{address}?token=wrong") == 403
        assert _status(f"{address}?token={said['token']}") == 200
        assert _listening(said["port"]) == {"0100007F"}
    finally:
        server.terminate()
        server.wait(30.0)


def _status(address: str) -> int:
    end = time.monotonic() + 30.0
    while True:
        try:
            with urllib.request.urlopen(address, timeout=20.0) as answer:
                return int(answer.status)
        except urllib.error.HTTPError as error:
            return error.code
        except OSError:
            assert time.monotonic() < end
            time.sleep(0.1)


def _listening(port: int) -> set[str]:
    """Addresses, as the kernel writes them, at which somebody listens on a port (Linux)."""
    lines = Path("/proc/net/tcp").read_text().splitlines()[1:]
    sockets = [line.split()[1].split(":") for line in lines if line.split()[3] == "0A"]
    return {address for address, number in sockets if int(number, 16) == port}
