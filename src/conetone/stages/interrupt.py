"""SIGTERM and SIGINT as an exception, so that a job keeps what it has finished."""

import signal
from collections.abc import Iterator
from contextlib import contextmanager
from types import FrameType


class StopRequested(BaseException):
    """The process was asked to stop; not an Exception, so that nothing swallows it."""


@contextmanager
def stop_on_signals(*, then_ignore: bool) -> Iterator[None]:
    """Raise StopRequested at the first SIGTERM or SIGINT; further ones change nothing.

    With `then_ignore`, for a process that ends with this block, both stay ignored after success: its work
    is whole, and its exit code must say so. Otherwise the handlers of before come back.
    """

    def stop(number: int, frame: FrameType | None) -> None:
        for each in previous:
            signal.signal(each, signal.SIG_IGN)
        raise StopRequested(signal.Signals(number).name)

    previous = {each: signal.getsignal(each) for each in (signal.SIGTERM, signal.SIGINT)}
    for each in previous:
        signal.signal(each, stop)
    try:
        yield
        if then_ignore:
            previous = dict.fromkeys(previous, signal.SIG_IGN)
    finally:
        for each, handler in previous.items():
            signal.signal(each, handler)
