"""Stopping what goes on until told: a first signal ends it after the work in hand, a second one at once."""

from __future__ import annotations

import signal
from collections.abc import Iterator
from contextlib import contextmanager
from threading import Event

_SIGNALS = (signal.SIGINT, signal.SIGTERM)


@contextmanager
def stop_on_signal() -> Iterator[Event]:
    """Return an event that a signal to stop sets; the signals are as before afterwards, and after the first."""
    event = Event()
    before = {number: signal.getsignal(number) for number in _SIGNALS}

    def stop(number: int, _: object) -> None:
        event.set()
        signal.signal(number, before[signal.Signals(number)])

    for number in _SIGNALS:
        signal.signal(number, stop)
    try:
        yield event
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
