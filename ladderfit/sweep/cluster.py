"""Work on a Dask cluster; the one file that imports `distributed`, an extra.

The job reaches every worker as a plugin, also those that join later or take the place
of one that died.  A worker that dies has its tasks done by others; a task over
which several die is given up.
"""

from __future__ import annotations

import os
from concurrent.futures import Executor, Future
from typing import Any

from distributed import Client, WorkerPlugin

from ladderfit.errors import InputError, LadderfitError, Problem
from ladderfit.sweep.job import Job, Outcome, Task, install, remove, work

_PATIENCE = 10.0  # s, for a scheduler to answer
_AHEAD = 3  # tasks in flight per thread: the network takes its time
_THREADS = "LADDERFIT_THREADS"


class JobPlugin(WorkerPlugin):  # type: ignore[misc]  # untyped base
    """Has a worker know a job; kernels keep to one thread while it does."""

    def __init__(self, token: str, job: Job) -> None:
        self.name = f"ladderfit-{token}"
        self._token, self._job = token, job
        self._before: str | None = None

    def setup(self, worker: Any) -> None:
        """Called when a worker starts, or when the job comes to it."""
        del worker
        self._before = os.environ.get(_THREADS)
        os.environ[_THREADS] = "1"
        install(self._token, self._job)

    def teardown(self, worker: Any) -> None:
        """Called when the job is done."""
        del worker
        if self._before is None:
            os.environ.pop(_THREADS, None)
        else:
            os.environ[_THREADS] = self._before
        remove(self._token)


def on_cluster(client: Client | str, token: str, job: Job) -> Cluster:
    """Workers of a Dask cluster, by its client or its scheduler's address.

    Raises
    ------
    InputError
        If no scheduler answers at the address.
    """
    if not isinstance(client, str):
        return Cluster(client, token, job, owned=False)
    try:
        return Cluster(Client(client, timeout=_PATIENCE), token, job, owned=True)
    except (OSError, ValueError, TimeoutError) as error:
        raise InputError(
            Problem(
                found=f"no Dask scheduler at {client!r} ({' '.join(str(error).split())[:200]})",
                expected="the address of one, such as tcp://127.0.0.1:8786",
                remedy="start one with: dask scheduler",
            )
        ) from None


class Cluster:
    """A Dask cluster that knows a job."""

    def __init__(self, client: Client, token: str, job: Job, *, owned: bool) -> None:
        self._client, self._token, self._owned = client, token, owned
        self._plugin = JobPlugin(token, job)
        self._executor: Executor = client.get_executor(pure=False)

    def __enter__(self) -> Cluster:
        self._client.register_plugin(self._plugin)
        return self

    def __exit__(self, *_: object) -> None:
        try:
            self._executor.shutdown(wait=False)
            if self._client.status == "running":
                self._client.unregister_worker_plugin(self._plugin.name)
        finally:
            if self._owned:
                self._client.close()

    @property
    def window(self) -> int:
        """How many tasks to have in flight: the cluster may grow and shrink meanwhile."""
        threads = sum(self._client.nthreads().values())
        return _AHEAD * max(int(threads), 1)

    def submit(self, task: Task) -> Future[Outcome]:
        """Hand out a task.

        Raises
        ------
        LadderfitError
            If the cluster is gone.
        """
        if self._client.status != "running":
            raise LadderfitError(
                "the Dask cluster is gone; what was done is kept: repeat the command to go on"
            )
        return self._executor.submit(work, self._token, task)

    def mend(self) -> None:
        """Nothing: the scheduler sees to its workers."""
