"""Ctrl-C while processes are started."""

import signal
import threading
from collections.abc import Iterator
from contextlib import contextmanager


@contextmanager
def deaf() -> Iterator[None]:
    """Without Ctrl-C, which a process that is started meanwhile then does not hear either."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    before = signal.signal(signal.SIGINT, signal.SIG_IGN)
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, before)
