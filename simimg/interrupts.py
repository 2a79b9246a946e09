"""An interrupt that waits while processes are started.

One that comes in the midst of starting a process would leave that process behind.
"""

from __future__ import annotations

import signal
import threading
from collections.abc import Iterator
from contextlib import contextmanager


@contextmanager
def holding_interrupts() -> Iterator[None]:
    """Let an interrupt wait, and the processes started here hear none: they inherit the mask.

    One in the midst of starting a process would leave it behind.
    """
    main = threading.current_thread() is threading.main_thread()
    if not (main and hasattr(signal, "pthread_sigmask")):
        yield
        return
    heard = False

    def hear(*_: object) -> None:
        nonlocal heard
        heard = True

    handler = signal.signal(signal.SIGINT, hear)
    mask = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, mask)
        signal.signal(signal.SIGINT, signal.SIG_DFL if handler is None else handler)
        if heard:
            signal.raise_signal(signal.SIGINT)
