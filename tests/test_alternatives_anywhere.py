"""One table of alternatives, whoever does the work: this process, a pool, a Dask cluster."""

from __future__ import annotations

import os
import signal
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import builders
import pandas as pd
import pytest
from distributed import Client, LocalCluster
from sweep_jobs import job, tasks

from ladderfit.alternatives import Comparison, run_alternatives
from ladderfit.choices import Choices
from ladderfit.errors import InputError
from ladderfit.ladder import Ladder, read_ladder
from ladderfit.ladder_file import write_choices
from ladderfit.sweep import read_records, sweep
from ladderfit.sweep.job import _STATES

AXES: dict[str, list[Any]] = {
    "cepheids.periods": [[low, high] for low in (5.5, 6.0, 6.5, 7.0) for high in (60.0, 80.0)],
    "anchors.geometric.Orrel.use": [True],
    "anchors.parallaxes.use": [False],
    "relation.metallicity": ["none"],
    "expansion.redshifts": [[0.03, 0.15], [0.0, 0.1]],
    "cepheids.columns.period": ["nowhere"],
    "priors.scatter": [{"half_normal": 0.1}, {"fixed": 0.07}],
}
ROWS = 1 + sum(map(len, AXES.values()))


@pytest.fixture(scope="module")
def ladder(tmp_path_factory: pytest.TempPathFactory) -> Ladder:
    """Read from CSV, whose columns are decoded at their first use."""
    folder = tmp_path_factory.mktemp("ladder")
    builders.write_tables(folder)
    write_choices(Choices.from_mapping(builders.choices(tables=True)), folder / "small.toml")
    return read_ladder(folder / "small.toml")


@pytest.fixture(scope="module")
def alone(ladder: Ladder) -> Comparison:
    return run_alternatives(ladder, AXES, workers=1, draws=400)


@pytest.fixture(scope="module")
def cluster() -> Iterator[LocalCluster]:
    with LocalCluster(
        n_workers=2, threads_per_worker=1, dashboard_address=None, silence_logs=50
    ) as found:
        yield found


def same(one: Comparison, other: Comparison) -> None:
    pd.testing.assert_frame_equal(one.table(), other.table(), check_exact=True)


def test_alone(alone: Comparison) -> None:
    table = alone.table()
    assert len(table) == ROWS
    assert (table["status"] == "done").sum() == ROWS - 1
    assert len(alone.failed) == 1


def test_order_does_not_matter(ladder: Ladder, alone: Comparison) -> None:
    """What was fitted before leaves no trace in the last digit."""
    turned = {key: AXES[key][::-1] for key in reversed(AXES)}
    other = run_alternatives(ladder, turned, workers=1, draws=400).table()
    one = alone.table()
    keys = ["axis", "value"]
    pd.testing.assert_frame_equal(
        one.sort_values(keys, ignore_index=True),
        other.sort_values(keys, ignore_index=True)[list(one.columns)],
        check_exact=True,
    )


def test_processes(ladder: Ladder, alone: Comparison) -> None:
    same(alone, run_alternatives(ladder, AXES, workers=2, draws=400))


def test_cluster_with_a_worker_killed(
    ladder: Ladder, alone: Comparison, cluster: LocalCluster, tmp_path: Path
) -> None:
    """Nothing lost, nothing twice: also on disk."""
    file, killed = tmp_path / "outcomes.jsonl", list[int]()

    def kill_one(words: str, fraction: float) -> None:
        del words
        if fraction > 0.2 and not killed:
            worker = next(iter(cluster.workers.values()))
            killed.append(worker.process.process.pid)
            os.kill(killed[0], signal.SIGKILL)

    address = cluster.scheduler_address
    found = run_alternatives(ladder, AXES, workers=address, draws=400, file=file, progress=kill_one)
    assert killed
    same(alone, found)
    _, kept = read_records(file)
    assert sorted(kept) == sorted(fit.alternative.key for fit in found.fits)


def test_cluster_by_a_client(cluster: LocalCluster) -> None:
    with Client(cluster) as client:
        found = sweep(job(), tasks(30), workers=client)
        assert [outcome.values["sum"] for outcome in found] == [100.0 + i for i in range(30)]
        assert set(client.run(states).values()) == {0}  # all is forgotten


def states() -> int:
    return len(_STATES)


def test_no_cluster_at_the_address(ladder: Ladder, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("ladderfit.sweep.cluster._PATIENCE", 0.3)
    with pytest.raises(InputError, match=r"no Dask scheduler at 'tcp://127\.0\.0\.1:9'"):
        run_alternatives(ladder, AXES, workers="tcp://127.0.0.1:9", draws=400)
