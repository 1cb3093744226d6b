"""Ctrl-C as a question that a solver asks at a safe place, instead of an exception anywhere."""

import signal
import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from types import FrameType

from detune.solvers.outcome import Progress


@dataclass
class Stop:
    """Whether a stop was asked for: by Ctrl-C, by whoever is told of the progress, or by the caller's question."""

    question: Callable[[], bool] | None = None
    asked: bool = False

    def __call__(self) -> bool:
        """Return whether to stop."""
        if self.question is not None and self.question():
            self.asked = True
        return self.asked

    def told(self, tell: Callable[[Progress], None], progress: Progress) -> None:
        """Tell of the progress; a KeyboardInterrupt raised meanwhile asks for a stop."""
        try:
            tell(progress)
        except KeyboardInterrupt:
            self.asked = True


@contextmanager
def stop_on_interrupt(question: Callable[[], bool] | None = None) -> Iterator[Stop]:
    """Turn the first Ctrl-C into a wish to stop; the second one interrupts at once, as usual.

    Signals reach the main thread alone: in another thread only the caller's question counts.
    """
    stop = Stop(question)
    if threading.current_thread() is not threading.main_thread():
        yield stop
        return
    earlier = signal.getsignal(signal.SIGINT)

    def note(_: int, __: FrameType | None) -> None:
        stop.asked = True
        signal.signal(signal.SIGINT, earlier)

    # One that was not set from Python could not be put back; a process in the background ignores Ctrl-C on purpose.
    if earlier is None or earlier is signal.SIG_IGN:
        yield stop
        return
    signal.signal(signal.SIGINT, note)
    try:
        yield stop
    finally:
        signal.signal(signal.SIGINT, earlier)
