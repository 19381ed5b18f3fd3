"""One worker process, seen from the side that started it."""

from __future__ import annotations

import contextlib
import os
import signal
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator

from topovet.screening.records import Job, Outcome
from topovet.screening.worker import GRACE_S, READY

_ONE_THREAD = (
    "OPENBLAS_NUM_THREADS",
    "OMP_NUM_THREADS",
    "MKL_NUM_THREADS",
    "VECLIB_MAXIMUM_THREADS",
    "NUMEXPR_NUM_THREADS",
)
_WORDS = 300

ABANDONED_S = 2.0
"""What a killed process gets to be gone in before it is left to itself."""


class WorkerProcess:
    """A process that vets one case at a time.

    Parameters
    ----------
    threads
        Threads it may use for itself; its BLAS uses one.
    patience_s
        Time without work after which it ends by itself; None for never.
    """

    def __init__(self, threads: int, patience_s: float | None = None) -> None:
        # a worker that crashes says why on stderr; that must be readable afterwards, however much
        self._stderr = tempfile.TemporaryFile()  # noqa: SIM115  (closed in `stop`)
        environment = {**os.environ, **dict.fromkeys(_ONE_THREAD, "1")}
        environment["TOPOVET_THREADS"] = str(threads)
        patience = [] if patience_s is None else [str(patience_s)]
        self._process = subprocess.Popen(
            [sys.executable, "-m", "topovet.screening.worker", *patience],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=self._stderr,
            env=environment,
            bufsize=0,
        )
        assert self._process.stdout is not None
        self.answers = self._process.stdout
        self._pending = b""
        self._deadline: float | None = None
        self._limit_s: float | None = None

    @property
    def pid(self) -> int:
        return self._process.pid

    @property
    def exit_code(self) -> int | None:
        """None while it lives."""
        return self._process.poll()

    @property
    def left_s(self) -> float | None:
        """Time that the case at hand may still take, 0 when it is up; None without a limit."""
        return None if self._deadline is None else max(0.0, self._deadline - time.monotonic())

    @property
    def overdue(self) -> str:
        """What to say of a case whose time is up."""
        minutes = (self._limit_s or 0.0) / 60
        return f"it took longer than the limit of {minutes:g} minute{'s' * (minutes != 1)}"

    def send(self, job: Job) -> None:
        """Hand over a job; a process that is gone is noticed by `receive`."""
        assert self._process.stdin is not None
        self._deadline = None if job.limit_s is None else time.monotonic() + job.limit_s
        self._limit_s = job.limit_s
        with contextlib.suppress(BrokenPipeError):
            self._process.stdin.write(job.to_json().encode() + b"\n")

    def receive(self) -> Iterator[Outcome]:
        """The outcomes that have come in; to be called when `answers` can be read.

        Raises
        ------
        EOFError
            The process has ended; the message says how.
        """
        data = os.read(self.answers.fileno(), 1 << 16)
        if not data:
            raise EOFError(self._how_it_ended())
        *lines, self._pending = (self._pending + data).split(b"\n")
        for line in lines:
            if line != READY.encode():
                yield Outcome.from_json(line)

    def stop(self) -> None:
        """End the process, by force if it does not end by itself."""
        self.ask_to_end()
        try:
            self._process.wait(GRACE_S + 1)
        except subprocess.TimeoutExpired:
            self._process.kill()
            self._process.wait()
        self.answers.close()
        self._stderr.close()

    def abandon(self) -> None:
        """Kill the process and wait no longer than a moment: it may hang in a file system."""
        self._process.kill()
        with contextlib.suppress(subprocess.TimeoutExpired):
            self._process.wait(ABANDONED_S)
        self.ask_to_end()
        self.answers.close()
        self._stderr.close()

    def ask_to_end(self) -> None:
        """Closing stdin is the sign; a process that is busy hears it too."""
        assert self._process.stdin is not None
        with contextlib.suppress(OSError):
            self._process.stdin.close()

    def _how_it_ended(self) -> str:
        code = self._process.wait()
        how = f"ended with exit code {code}"
        if code < 0:
            with contextlib.suppress(ValueError):
                how = f"was ended by signal {-code} ({signal.Signals(-code).name})"
        if code == -signal.SIGKILL:
            return f"{how}, as the system does when memory runs out"
        said = self._last_words()
        return f"{how}, saying {said}" if said else how

    def _last_words(self) -> str:
        self._stderr.seek(0)
        lines = self._stderr.read().decode("utf-8", errors="replace").split("\n")
        filled = [line.strip() for line in lines if line.strip()]
        fatal = [line for line in filled if line.startswith("Fatal Python error")]
        return (fatal or filled or [""])[-1][:_WORDS]
