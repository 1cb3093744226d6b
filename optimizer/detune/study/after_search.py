"""The work after a search: it is announced, it can be interrupted, and under a time limit what is optional ends too.

What must not be missing is the answer's own assessment; it never asks whether there is time. All the rest may be left
out, and is then said to be.
"""

import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager

from detune.ground.units import show
from detune.solvers.interrupt import Stop, stop_on_interrupt
from detune.solvers.outcome import Settings

Question = Callable[[], bool]


class AfterSearch:
    """Whether there is still time for optional work, and what was left out for want of it.

    With a time limit, optional work may begin until twice the limit has passed since `settings` began to run: the
    search ends after the limit, and what follows may take as long again.
    """

    def __init__(self, settings: Settings) -> None:
        self._settings = settings
        self._stop: Question = settings.interrupted or (lambda: False)
        self._ends = None if settings.time_limit is None else time.perf_counter() + 2.0 * settings.time_limit
        self._left_out: list[str] = []
        self._interrupted = False

    @property
    def left_out(self) -> tuple[str, ...]:
        """What was left out so far, in words."""
        return tuple(self._left_out)

    @property
    def why(self) -> str | None:
        """Why something was left out, in words; None where nothing was."""
        limit = self._settings.time_limit
        if not self._left_out:
            return None
        if self._interrupted or limit is None:
            return "after an interruption"
        return f"for lack of time (the limit is {show(limit, 'time')}, and as long again after the search)"

    @property
    def interrupted(self) -> bool:
        """Whether a wish to leave out what is optional has been noticed."""
        return self._interrupted

    def tell(self, text: str) -> None:
        """Say in one line what is done next."""
        if self._settings.stage is not None:
            self._settings.stage(text)

    def may_begin(self) -> bool:
        """Return whether optional work may begin."""
        if not self._interrupted and self._stop():
            self._interrupted = True
            self.tell("Interrupted: what is optional is left out; Ctrl-C once more stops at once.")
        return not self._interrupted and (self._ends is None or time.perf_counter() < self._ends)

    def share(self, part: float) -> Question:
        """Return a question like `may_begin` for work that may take this part of the time that is left."""
        if self._ends is None:
            return self.may_begin
        now = time.perf_counter()
        ends = now + part * max(0.0, self._ends - now)
        return lambda: self.may_begin() and time.perf_counter() < ends

    def leave_out(self, what: str) -> None:
        """Note what is left out, in words."""
        self._left_out.append(what)

    @contextmanager
    def listening(self) -> Iterator[None]:
        """Take the first Ctrl-C meanwhile as a wish to leave out what is optional; the second one stops at once."""
        earlier = self._stop
        with stop_on_interrupt(earlier) as stop:
            self._stop = stop
            try:
                yield
            finally:
                self._stop = _asked_once(stop) if stop.asked else earlier


def _asked_once(stop: Stop) -> Question:
    return lambda: stop.asked
