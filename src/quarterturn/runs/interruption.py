"""Ctrl-C during a run: the first one ends it at the next safe point and keeps what there is, the second one raises.

The handler is installed only around a run, only in the main thread, and the earlier one is put back.
"""

from __future__ import annotations

import signal
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from types import FrameType


@contextmanager
def stoppable(stop: threading.Event) -> Iterator[threading.Event]:
    """While inside, SIGINT sets `stop`; a second SIGINT raises KeyboardInterrupt."""
    if threading.current_thread() is not threading.main_thread():
        yield stop
        return

    def handle(number: int, frame: FrameType | None) -> None:
        if stop.is_set():
            raise KeyboardInterrupt
        stop.set()

    earlier = signal.signal(signal.SIGINT, handle)
    try:
        yield stop
    finally:
        signal.signal(signal.SIGINT, earlier)
