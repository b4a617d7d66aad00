"""Stopping a run by hand: an interrupt that some library swallows still ends the run at the next cruise."""

from __future__ import annotations

import signal
import threading
from contextlib import contextmanager
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator
    from types import FrameType


@contextmanager
def stoppable() -> Iterator[Callable[[], None]]:
    """Give a call that raises ``KeyboardInterrupt`` where an interrupt came since, to be made between cruises."""
    if threading.current_thread() is not threading.main_thread():
        yield lambda: None  # signals are the main thread's
        return
    came = threading.Event()

    def heed(number: int, frame: FrameType | None) -> None:
        came.set()
        signal.default_int_handler(number, frame)

    def stop_if_asked() -> None:
        if came.is_set():
            raise KeyboardInterrupt

    before = signal.signal(signal.SIGINT, heed)
    try:
        yield stop_if_asked
    finally:
        signal.signal(signal.SIGINT, before)
