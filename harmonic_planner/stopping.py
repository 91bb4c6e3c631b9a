"""Signals that ask the program to stop, as an exception, so that what is half done is undone."""

import signal
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from types import FrameType

SIGNALS = (signal.SIGINT, signal.SIGTERM)


class StoppedError(BaseException):
    """A signal asked the program to stop; not an Exception, so that nothing takes it for a fault."""

    def __init__(self, number: int) -> None:
        super().__init__(number)
        self.number = number


@contextmanager
def stopping_on_signals() -> Iterator[None]:
    """Turn the first SIGINT or SIGTERM into StoppedError, and ignore further ones."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return

    def stop(number: int, _frame: FrameType | None) -> None:
        for each in SIGNALS:
            signal.signal(each, signal.SIG_IGN)
        raise StoppedError(number)

    before = {each: signal.signal(each, stop) for each in SIGNALS}
    try:
        yield
    finally:
        for each, handler in before.items():
            signal.signal(each, handler)
