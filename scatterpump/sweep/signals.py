"""Signals that ask a run to come to an end: what is running is finished and written, and nothing more is begun."""

from __future__ import annotations

import signal
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass

__all__ = ["RESUME", "Request", "stop_on_signals"]

RESUME = 75  # EX_TEMPFAIL of sysexits.h: not finished, to be tried again
NAMES = ("SIGTERM", "SIGUSR1", "SIGINT")


@dataclass
class Request:
    """Whether the run is asked to end, and by which signal."""

    signal: str = ""


@contextmanager
def stop_on_signals() -> Iterator[Request]:
    """Take SIGTERM, SIGUSR1 and the first Ctrl-C as a request; a second Ctrl-C interrupts at once.

    Only the main thread may do so; elsewhere the request never comes.
    """
    request = Request()
    if threading.current_thread() is not threading.main_thread():
        yield request
        return

    def ask(number: int, _: object) -> None:
        request.signal = signal.Signals(number).name
        if number == signal.SIGINT:
            signal.signal(signal.SIGINT, signal.default_int_handler)

    numbers = [getattr(signal, name) for name in NAMES if hasattr(signal, name)]
    before = {number: signal.signal(number, ask) for number in numbers}
    try:
        yield request
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
