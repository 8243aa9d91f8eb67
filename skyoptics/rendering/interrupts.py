"""Ctrl-C between batches: work that is half added is finished first."""

from __future__ import annotations

import signal
import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from types import FrameType


@contextmanager
def deferred() -> Iterator[Callable[[], None]]:
    """Hold back a first SIGINT; a second one interrupts at once.

    Yields
    ------
    callable
        To be called where stopping is safe; raises KeyboardInterrupt if SIGINT has come. In a thread other than the main
        one, where signals do not arrive, it does nothing.
    """
    if threading.current_thread() is not threading.main_thread():
        yield lambda: None
        return
    came = False

    def take(number: int, frame: FrameType | None) -> None:
        nonlocal came
        if came:
            raise KeyboardInterrupt
        came = True

    def check() -> None:
        if came:
            raise KeyboardInterrupt

    before = signal.signal(signal.SIGINT, take)
    try:
        yield check
    finally:
        signal.signal(signal.SIGINT, before)
