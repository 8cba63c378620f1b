"""One piece of work at a time, always for the newest request; those in between are skipped. Knows no screen."""

import threading
from collections.abc import Callable
from typing import Generic, TypeVar

Asked = TypeVar("Asked")
Found = TypeVar("Found")


class Newest(Generic[Asked, Found]):
    """Hands requests to a worker thread, of several that wait only the last.

    Parameters
    ----------
    work : callable
        From a request to a result; runs in the worker.
    done : callable
        Takes request and result, in the worker; what `work` raises as ValueError is the result then.
    start : callable
        Runs a function in a thread; called only when none runs.
    """

    def __init__(
        self,
        work: Callable[[Asked], Found],
        done: Callable[[Asked, Found | ValueError], None],
        start: Callable[[Callable[[], None]], object],
    ) -> None:
        self._work, self._done, self._start = work, done, start
        self._lock = threading.Lock()
        self._waiting: list[Asked] = []
        self._busy = False

    def ask(self, request: Asked) -> None:
        """Ask for a result; what waited before is forgotten."""
        with self._lock:
            self._waiting = [request]
            if self._busy:
                return
            self._busy = True
        self._start(self._run)

    def _next(self) -> list[Asked]:
        with self._lock:
            found, self._waiting = self._waiting, []
            self._busy = bool(found)
            return found

    def _run(self) -> None:
        """Work until nothing waits."""
        while waiting := self._next():
            try:
                found: Found | ValueError = self._work(waiting[0])
            except ValueError as error:
                found = error
            except BaseException:
                with self._lock:
                    self._busy = False
                raise
            self._done(waiting[0], found)
