"""What a run says in the terminal while it works: how far the search is, then one line for each thing done after it."""

import sys
from collections.abc import Callable

from detune.solvers.outcome import Progress

WIDTH = 100


class Terminal:
    """Speaks on the error stream, so that the answer on the output stream stays by itself.

    How far the work is and what is done next is for someone who watches; a file or a pipe gets neither.
    """

    def __init__(self) -> None:
        self._watched = sys.stderr.isatty()
        self._open = False

    @property
    def progress(self) -> Callable[[Progress], None] | None:
        """Whom to tell how far the search is; None where nobody watches."""
        return self._far if self._watched else None

    @property
    def stage(self) -> Callable[[str], None] | None:
        """Whom to tell what is done next; None where nobody watches."""
        return self.announce if self._watched else None

    def announce(self, text: str) -> None:
        """Write one line, watched or not."""
        if self._open:
            print(file=sys.stderr)
        self._open = False
        print(text, file=sys.stderr, flush=True)

    def _far(self, far: Progress) -> None:
        bracket = ""
        if far.lower_bound is not None and far.lower_bound < float("inf"):
            bracket = f"; none left is cheaper than {far.lower_bound:.2f}"
        found = "" if far.incumbent is None else f"; best so far {far.incumbent:.2f}"
        self._open = far.settled < far.designs
        text = f"{far.share:.1%} of {far.designs:,} designs settled{found}{bracket}"
        print(f"\r{text:<{WIDTH}}", end="" if self._open else "\n", file=sys.stderr, flush=True)
