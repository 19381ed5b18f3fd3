"""What runs on a Dask worker: hands the case to a process of its own and waits for the outcome."""

from __future__ import annotations

import json
import os
import selectors
import threading

from topovet.screening.records import Job, Outcome
from topovet.screening.worker_process import WorkerProcess

PATIENCE_S = 60.0
"""A process that waits longer for its next case ends; Dask workers live for days."""

_local = threading.local()


def vet_on_dask(job: str) -> str:
    """Outcome of a job as JSON, or {"lost": "how", "for_good": …} where its process was lost.

    The process, one to a thread of the Dask worker, keeps apart what Dask would run in threads of
    one process, and a crash takes neither the Dask worker nor its other cases with it.
    """
    worker = _worker()
    try:
        return _outcome(worker, job).to_json()
    except TimeoutError as error:
        return json.dumps({"lost": str(error), "for_good": True})
    except EOFError as error:
        if worker.exit_code != 0:
            return json.dumps({"lost": f"the process {error}"})
    # its patience ended as the case was on its way
    return _outcome(_worker(), job).to_json()


def _worker() -> WorkerProcess:
    """The process of this thread, a new one where the last has ended."""
    worker: WorkerProcess | None = getattr(_local, "worker", None)
    if worker is not None and worker.exit_code is None:
        return worker
    if worker is not None:
        worker.stop()
    threads = os.environ.get("TOPOVET_THREADS", "")
    worker = WorkerProcess(int(threads) if threads.isdigit() else 1, PATIENCE_S)
    _local.worker = worker
    return worker


def _outcome(worker: WorkerProcess, job: str) -> Outcome:
    """As the process tells it; TimeoutError where the time for it is up."""
    worker.send(Job.from_json(job))
    with selectors.DefaultSelector() as selector:
        selector.register(worker.answers, selectors.EVENT_READ)
        while True:
            if not selector.select(worker.left_s):
                worker.abandon()
                _local.worker = None
                raise TimeoutError(worker.overdue)
            for outcome in worker.receive():
                return outcome
