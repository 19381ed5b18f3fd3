"""The process that vets cases for a screen: jobs come in on stdin, outcomes go out on stdout.

Both are lines of JSON. A process of its own for each worker, rather than a thread, because a
native library that crashes or takes too much memory must cost one case and not the screen.

It ends when stdin is closed, so that no worker outlives the process that started it, and after
a time without work where one is given as its argument.
"""

from __future__ import annotations

import contextlib
import faulthandler
import os
import queue
import signal
import sys
import threading
from types import FrameType

from topovet.screening.code_digest import code_digest
from topovet.screening.records import Job

GRACE_S = 5.0
"""What a long native call gets to come to an end in, once the process has been told to end."""

READY = "ready"


def main(patience_s: float | None = None) -> None:
    """Vet cases until stdin is closed, or until nothing has come for `patience_s` seconds."""
    faulthandler.enable()
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # Ctrl-C is for the process that started us
    signal.signal(signal.SIGTERM, _end)
    # whatever a library prints must not get between the outcomes
    answers = os.fdopen(os.dup(1), "w", encoding="utf-8")
    os.dup2(2, 1)
    jobs: queue.Queue[str] = queue.Queue()
    threading.Thread(target=_listen, args=(jobs,), daemon=True).start()

    code_digest()  # of the files that are about to be loaded, not of what they are in an hour
    from topovet.screening.vetting import vet_job

    answers.write(f"{READY}\n")
    answers.flush()
    with contextlib.suppress(queue.Empty):
        while True:
            outcome = vet_job(Job.from_json(jobs.get(timeout=patience_s)))
            answers.write(outcome.to_json() + "\n")
            answers.flush()


def _listen(jobs: queue.Queue[str]) -> None:
    for line in sys.stdin:
        jobs.put(line)
    os.kill(os.getpid(), signal.SIGTERM)


def _end(signum: int, frame: FrameType | None) -> None:
    """End in an orderly way, but not later than after the grace."""
    timer = threading.Timer(GRACE_S, os._exit, (128 + signum,))
    timer.daemon = True
    timer.start()
    sys.exit(128 + signum)


if __name__ == "__main__":
    with contextlib.suppress(BrokenPipeError):
        main(float(sys.argv[1]) if len(sys.argv) > 1 else None)
