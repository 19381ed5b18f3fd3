"""Who is at a case at the moment: a hint that saves double work, never a lock.

Nothing waits for a claim and nothing depends on it: two processes that vet the same case write the
same bytes, and the last rename wins. A claim that is not renewed, or whose process has ended, does
not count.
"""

from __future__ import annotations

import contextlib
import json
import os
import socket
import threading
import time
from collections.abc import Iterator
from pathlib import Path

CLAIM_FILE = ".claim"

RENEWED_EVERY_S = 20.0
STALE_AFTER_S = 120.0
"""Well above the time between renewals, so that a busy machine or file server makes none stale."""


def claimed_by_another(folder: Path) -> bool:
    """Whether another living process said lately that it is at this case."""
    path = folder / CLAIM_FILE
    try:
        age = time.time() - path.stat().st_mtime
        owner = json.loads(path.read_bytes())
        host, pid = str(owner["host"]), int(owner["pid"])
    except (OSError, ValueError, KeyError, TypeError):
        return False
    # a time far ahead is as little to be trusted as one long gone
    if abs(age) > STALE_AFTER_S or (host, pid) == _me():
        return False
    return host != _me()[0] or _is_alive(pid)


@contextlib.contextmanager
def claim(folder: Path) -> Iterator[None]:
    """Say that this process is at the case until the end of the block."""
    path = folder / CLAIM_FILE
    host, pid = _me()
    with contextlib.suppress(OSError):
        folder.mkdir(parents=True, exist_ok=True)
        path.write_text(json.dumps({"host": host, "pid": pid}))
    ended = threading.Event()
    renewal = threading.Thread(target=_renew, args=(path, ended), daemon=True)
    renewal.start()
    try:
        yield
    finally:
        ended.set()
        renewal.join()
        with contextlib.suppress(OSError, ValueError, KeyError, TypeError):
            if json.loads(path.read_bytes())["pid"] == pid:
                path.unlink()


def _renew(path: Path, ended: threading.Event) -> None:
    while not ended.wait(RENEWED_EVERY_S):
        with contextlib.suppress(OSError):
            os.utime(path)


def _me() -> tuple[str, int]:
    return socket.gethostname(), os.getpid()


def _is_alive(pid: int) -> bool:
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return False
    except OSError:
        return True
    return True
