"""Ctrl-C and SIGTERM as an exception, so that workers are stopped and the log says so."""

from __future__ import annotations

import contextlib
import signal
from collections.abc import Iterator
from types import FrameType


class Stopped(KeyboardInterrupt):
    """The process was asked to stop.

    Attributes
    ----------
    signum
        By which signal.
    """

    def __init__(self, signum: int) -> None:
        super().__init__(signal.Signals(signum).name)
        self.signum = signum


@contextlib.contextmanager
def stop_signals() -> Iterator[None]:
    """Within the block, SIGINT and SIGTERM raise `Stopped`, once; further ones are ignored."""
    wanted = (signal.SIGINT, signal.SIGTERM)
    before = {signum: signal.getsignal(signum) for signum in wanted}

    def stop(signum: int, frame: FrameType | None) -> None:
        for each in wanted:
            signal.signal(each, signal.SIG_IGN)
        raise Stopped(signum)

    for signum in wanted:
        signal.signal(signum, stop)
    try:
        yield
    finally:
        for signum, handler in before.items():
            signal.signal(signum, handler)
