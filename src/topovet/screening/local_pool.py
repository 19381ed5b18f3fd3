"""Worker processes on this machine."""

from __future__ import annotations

import selectors

from topovet.screening.machine import processors
from topovet.screening.pool import Finished
from topovet.screening.records import Job
from topovet.screening.worker_process import WorkerProcess


class LocalPool:
    """Processes that share the processors of this machine; see `Pool`.

    A process is started when it is first needed and again after it was lost.

    Parameters
    ----------
    workers
        How many.
    memory_bytes
        What they share.
    """

    def __init__(self, workers: int, memory_bytes: int | None) -> None:
        self.slots = workers
        self.memory_bytes = memory_bytes
        self.threads = max(1, processors() // workers)
        self.about = (
            f"{workers} worker{'s' * (workers != 1)} with {self.threads} "
            f"thread{'s' * (self.threads != 1)} each"
        )
        self._idle: list[WorkerProcess] = []
        self._busy: dict[str, WorkerProcess] = {}
        self._selector = selectors.DefaultSelector()

    def submit(self, job: Job) -> None:
        worker = self._idle.pop() if self._idle else WorkerProcess(self.threads)
        if worker.exit_code is not None:  # lost while it had nothing to do: no fault of this case
            worker.stop()
            worker = WorkerProcess(self.threads)
        self._busy[job.slug] = worker
        self._selector.register(worker.answers, selectors.EVENT_READ, (job.slug, worker))
        worker.send(job)

    def wait(self) -> list[Finished]:
        finished: list[Finished] = []
        while not finished:
            for key, _ in self._selector.select(self._patience()):
                slug, worker = key.data
                finished += self._collect(slug, worker)
            finished += self._give_up()
        return finished

    def _patience(self) -> float | None:
        """Seconds until the first case is overdue."""
        left = [w.left_s for w in self._busy.values() if w.left_s is not None]
        return min(left, default=None)

    def _give_up(self) -> list[Finished]:
        """Cases whose time is up; a new process takes the next one."""
        late = [(slug, worker) for slug, worker in self._busy.items() if worker.left_s == 0.0]
        for slug, worker in late:
            self._release(slug, worker)
            worker.abandon()
        return [Finished(slug, None, worker.overdue, for_good=True) for slug, worker in late]

    def _collect(self, slug: str, worker: WorkerProcess) -> list[Finished]:
        try:
            outcomes = list(worker.receive())
        except EOFError as error:
            self._release(slug, worker)
            worker.stop()
            return [Finished(slug, None, f"the process {error}")]
        for outcome in outcomes:
            self._release(slug, worker)
            self._idle.append(worker)
            return [Finished(slug, outcome)]
        return []

    def _release(self, slug: str, worker: WorkerProcess) -> None:
        self._selector.unregister(worker.answers)
        del self._busy[slug]

    def close(self) -> None:
        workers = [*self._idle, *self._busy.values()]
        for worker in workers:
            worker.ask_to_end()
        for worker in workers:
            worker.stop()
        self._idle, self._busy = [], {}
        self._selector.close()
