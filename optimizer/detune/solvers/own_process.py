"""A process of one's own for work that may ignore its time limit: it is ended from outside."""

import multiprocessing
import os
import tempfile
import time
from collections.abc import Callable
from multiprocessing.connection import Connection
from pathlib import Path
from types import TracebackType
from typing import Any

from detune.ground.errors import SolveError

# What a child may take to start and import its libraries, and to come to an end after its own limit; seconds.
START, GRACE, LOOK = 60.0, 2.0, 0.1


class OwnProcess:
    """A child process that answers one question after another by a function; use it in a `with`.

    It is spawned, so a script that leads here needs the usual `if __name__ == "__main__":`. What it and the libraries
    in it write as errors goes to a file of its own, never to the terminal; where it dies, the last line of that file
    is in the error.
    """

    def __init__(self, function: Callable[[Any], Any]) -> None:
        self.function = function
        self.process: Any = None
        self.pipe: Connection | None = None
        self.words: Path | None = None

    def __enter__(self) -> "OwnProcess":
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.end()

    def ask(self, question: object, limit: float, stop: Callable[[], bool] | None = None) -> Any | None:
        """Return the answer, None where it took longer than the limit (s) or a stop was asked for.

        The process is then ended, and another takes its place at the next question. Raises SolveError where it
        dies, an error it did not expect included, and where the function raises an error.
        """
        pipe = self._start(limit, stop)
        if pipe is None:
            return None
        pipe.send(question)
        if not self._waited(pipe, limit + GRACE, stop):
            self.end(at_work=True)
            return None
        kind, answer = self._received(pipe)
        if kind == "error":
            raise SolveError(f"the solver failed: {answer}")
        return answer

    def _start(self, limit: float, stop: Callable[[], bool] | None) -> Connection | None:
        if self.pipe is not None:
            return self.pipe
        context = multiprocessing.get_context("spawn")
        self.pipe, theirs = context.Pipe()
        handle, name = tempfile.mkstemp(prefix="detune-", suffix=".log")
        os.close(handle)
        self.words = Path(name)
        self.process = context.Process(target=_serve, args=(theirs, self.function, name), daemon=True)
        self.process.start()
        theirs.close()
        if not self._waited(self.pipe, min(START, limit + GRACE), stop):
            self.end(at_work=True)
            return None
        self._received(self.pipe)
        return self.pipe

    def _received(self, pipe: Connection) -> Any:
        try:
            return pipe.recv()
        except EOFError:
            self.process.join(GRACE)
            last = self._last_words()
            self.end()
            raise SolveError(f"the solver's process died: {last}") from None

    def _last_words(self) -> str:
        """Return the last line the process wrote as an error (of a traceback the error itself), or how it ended."""
        assert self.words is not None  # a process that answers was started
        code = self.process.exitcode
        ended = f"signal {-code}" if code is not None and code < 0 else f"exit code {code}"
        lines = self.words.read_text(encoding="utf-8", errors="replace").split("\n")
        return next((line.strip() for line in reversed(lines) if line.strip()), ended)

    @staticmethod
    def _waited(pipe: Connection, limit: float, stop: Callable[[], bool] | None) -> bool:
        until = time.perf_counter() + limit
        while not pipe.poll(min(LOOK, max(0.0, until - time.perf_counter()))):
            if time.perf_counter() >= until or (stop is not None and stop()):
                return False
        return True

    def end(self, at_work: bool = False) -> None:
        """End the process: by closing the pipe where it waits for a question, by force where it is at work."""
        if self.pipe is None:
            return
        self.pipe.close()
        self.pipe = None
        if not at_work:
            self.process.join(GRACE)
        self.process.kill()
        self.process.join()
        if self.words is not None:
            self.words.unlink(missing_ok=True)


def _serve(pipe: Connection, function: Callable[[Any], Any], words: str) -> None:
    """Answer questions until the other end closes; `words` is the file that takes what is written as an error."""
    import signal

    # By descriptor, since a library in C writes past Python's own stream.
    os.dup2(os.open(words, os.O_WRONLY | os.O_APPEND), 2)

    import pyomo.environ  # noqa: F401

    # Ctrl-C reaches the whole terminal; the parent decides what becomes of this process.
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    pipe.send(("ready", None))
    while True:
        try:
            question = pipe.recv()
        except EOFError:
            return
        try:
            pipe.send(("answer", function(question)))
        except (ValueError, RuntimeError, ArithmeticError) as error:
            pipe.send(("error", f"{type(error).__name__}: {error}"))
