"""The workers of a Dask scheduler."""

from __future__ import annotations

import itertools
import json
import os
import queue
from pathlib import Path
from typing import Any

from topovet.errors import TopovetError
from topovet.screening.dask_task import vet_on_dask
from topovet.screening.engine import ScreenError
from topovet.screening.pool import Finished
from topovet.screening.records import Job, Outcome

CONNECT_S = 10
FIRST_WORKER_S = 120
"""Batch systems start workers late."""

LOOK_AFTER_S = 5.0


class DaskPool:
    """Workers behind a scheduler; see `Pool`. They need the same files under the same paths.

    Dask itself starts a case again whose worker it lost, as often as its configuration allows
    (`distributed.scheduler.allowed-failures`); what it gives up counts as lost here.

    Parameters
    ----------
    address
        Address of the scheduler, or the path of its scheduler file.

    Raises
    ------
    TopovetError
        Dask is not installed, the scheduler does not answer, or it has no workers.
    """

    def __init__(self, address: str) -> None:
        self._client = _connected(address)
        self._run = f"topovet-{os.getpid()}-{os.urandom(4).hex()}"
        self._numbers = itertools.count()
        self._done: queue.SimpleQueue[tuple[str, Any]] = queue.SimpleQueue()
        self._futures: dict[str, Any] = {}
        try:
            self._client.wait_for_workers(1, timeout=FIRST_WORKER_S)
        except TimeoutError as error:
            self._client.close()
            raise TopovetError(
                f"the Dask scheduler {address} has no workers; start some, then run again."
            ) from error
        self.about = f"{self.slots} threads of Dask workers at {address}"

    @property
    def slots(self) -> int:
        """Cases that may run at once: workers come and go."""
        threads: dict[str, int] = self._client.nthreads()
        return max(1, sum(threads.values()))

    @property
    def memory_bytes(self) -> int | None:
        """The limits that the workers were started with, added up."""
        workers = self._client.scheduler_info(n_workers=-1)["workers"].values()
        limits = [worker.get("memory_limit") or 0 for worker in workers]
        return sum(limits) if limits and all(limits) else None

    def submit(self, job: Job) -> None:
        future = self._client.submit(
            vet_on_dask, job.to_json(), key=f"{self._run}-{next(self._numbers)}", pure=False
        )
        self._futures[job.slug] = future
        future.add_done_callback(lambda ended: self._done.put((job.slug, ended)))

    def wait(self) -> list[Finished]:
        while True:
            try:
                slug, future = self._done.get(timeout=LOOK_AFTER_S)
            except queue.Empty:
                self._check_scheduler()
                continue
            del self._futures[slug]
            return [_finished(slug, future)]

    def _check_scheduler(self) -> None:
        if self._client.status not in ("running", "connecting"):
            raise ScreenError(
                f"the connection to the Dask scheduler is {self._client.status}; finished cases "
                "are kept, run the same command again to go on."
            )

    def close(self) -> None:
        """Withdraw what has not started; a case that runs on a worker runs to its end there."""
        if self._futures:
            self._client.cancel(list(self._futures.values()))
        self._client.close()


def _connected(address: str) -> Any:
    try:
        from distributed import Client
    except ImportError as error:
        raise TopovetError(
            'Dask is not installed here; install it with: pip install "topovet[dask]"'
        ) from error
    connect: Any = Client
    where = {"scheduler_file": address} if Path(address).is_file() else {"address": address}
    try:
        return connect(**where, timeout=CONNECT_S, set_as_default=False)
    except (OSError, TimeoutError, ValueError) as error:
        raise TopovetError(
            f"no Dask scheduler answers at {address} ({error}); check the address, or give the "
            "path of its scheduler file."
        ) from error


def _finished(slug: str, future: Any) -> Finished:
    if future.status == "cancelled":
        raise ScreenError(
            "the Dask scheduler has gone away or withdrew a case; finished cases are kept, run the "
            "same command again to go on."
        )
    if future.status == "error":
        error = future.exception()
        if type(error).__name__ == "KilledWorker":
            return Finished(slug, None, "the Dask workers that tried it were lost")
        raise ScreenError(f"a Dask worker cannot run topovet: {error!r}") from error
    answer = json.loads(future.result())
    if "lost" in answer:
        return Finished(slug, None, answer["lost"], for_good=answer.get("for_good", False))
    return Finished(slug, Outcome.from_json(future.result()))
