"""Interruptions: steps that a signal must not tear apart."""

from __future__ import annotations

import signal
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from types import FrameType


class Interruption:
    """The signal that asked to stop, if one did."""

    def __init__(self) -> None:
        self.number: int | None = None

    def raise_if_set(self) -> None:
        """Stop here, between two steps, if a signal has asked for it."""
        if self.number is not None:
            raise KeyboardInterrupt


@contextmanager
def held_signals() -> Iterator[Interruption]:
    """Take note of SIGINT and SIGTERM instead of being torn out of the middle of a step.

    Whoever holds them may ask the interruption it is given; at the end of the step the signal is
    raised again. Masking them would not do: the system delivers a signal to any thread, and Python
    passes it on to the main one.
    """
    interruption = Interruption()
    if threading.current_thread() is not threading.main_thread():
        yield interruption  # Python delivers signals to the main thread only
        return

    def note(number: int, _frame: FrameType | None) -> None:
        interruption.number = number

    earlier = {}
    try:
        for number in (signal.SIGINT, signal.SIGTERM):
            if signal.getsignal(number) not in (signal.SIG_IGN, None):
                earlier[number] = signal.signal(number, note)
        yield interruption
    finally:
        for number, handler in earlier.items():
            signal.signal(number, handler)
    if interruption.number is not None:
        signal.raise_signal(interruption.number)
