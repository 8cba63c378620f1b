"""One thread for each link: read, split into lines, stamp, queue; a lost link is tried again with growing pauses.

What becomes of the lines is for `io.run`. The threads touch nothing but their link and the inbox.
"""

import threading
from collections import deque
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from eastfall.io.arrivals import LineBlock
from eastfall.io.framing import Splitter
from eastfall.io.links import Link
from eastfall.io.safetext import safe

POLL = 0.1
"""Longest wait for bytes [s]: a stop is seen within it."""
QUEUED = 16 << 20
"""Bytes of lines that wait for the run at most."""
_RATE_OVER = 5.0
"""Stretch that the line rate is taken over [s]."""
_MICRO = 1e6

Clock = Callable[[], float]


@dataclass(frozen=True, slots=True, kw_only=True)
class LinkNews:
    """What became of a link."""

    time: float
    link: int
    state: str
    """open, lost or ended."""
    message: str
    cut: bytes = b""
    """The start of a line whose end will not come."""


Item = LineBlock | LinkNews


class Inbox:
    """The queue between the reader threads and the run; it also keeps the run's clock, so that stamps never cross.

    A line is stamped and queued in one step, and so is the run's look at the clock and the queue: whatever was stamped
    before that look is in the queue.

    Parameters
    ----------
    clock : callable
        Monotonic seconds; the run's time is 0 at the first look, here.
    limit : int
        Bytes that may wait.
    """

    def __init__(self, clock: Clock, limit: int = QUEUED) -> None:
        self._clock = clock
        self._origin = clock()
        self._limit = limit
        self._waiting = 0
        self._items: deque[Item] = deque()
        self._changed = threading.Condition()

    def now(self) -> float:
        """Return the run's time [s], rounded to 1 µs."""
        return round((self._clock() - self._origin) * _MICRO) / _MICRO

    def put_lines(self, data: bytes, first_line: int, link: int) -> float | None:
        """Stamp and queue whole lines; return the stamp, or None if there was no room."""
        with self._changed:
            if self._waiting + len(data) > self._limit and self._items:
                return None
            time = self.now()
            times = np.full(data.count(b"\n"), time)
            self._items.append(LineBlock(data=data, times=times, first_line=first_line, link=link))
            self._waiting += len(data)
            self._changed.notify_all()
            return time

    def put_news(self, link: int, state: str, message: str, cut: bytes = b"") -> None:
        """Stamp and queue news of a link; there is always room for it."""
        with self._changed:
            self._items.append(LinkNews(time=self.now(), link=link, state=state, message=message, cut=cut))
            self._changed.notify_all()

    def wait(self, timeout: float) -> None:
        """Wait until there is something, for `timeout` [s] at most."""
        with self._changed:
            if not self._items and timeout > 0.0:
                self._changed.wait(timeout)

    def wait_for_room(self, timeout: float) -> None:
        """Wait until the run has taken something, for `timeout` [s] at most."""
        with self._changed:
            self._changed.wait(timeout)

    @property
    def empty(self) -> bool:
        """Whether nothing waits."""
        with self._changed:
            return not self._items

    def take(self, most: int) -> tuple[list[Item], float, bool]:
        """Return up to `most` items, the time, and whether these are all that were stamped before it."""
        with self._changed:
            taken = [self._items.popleft() for _ in range(min(most, len(self._items)))]
            self._waiting -= sum(len(one.data) for one in taken if isinstance(one, LineBlock))
            self._changed.notify_all()
            return taken, self.now(), not self._items


class Backoff:
    """Pauses between tries: 0.5 s, doubled each time up to 10 s."""

    def __init__(self, first: float = 0.5, longest: float = 10.0) -> None:
        self._first = first
        self._longest = longest
        self._next = first

    def pause(self) -> float:
        """Return the pause before the next try [s]."""
        pause, self._next = self._next, min(self._next * 2.0, self._longest)
        return pause

    def reset(self) -> None:
        """Begin again with the first pause: the link has spoken."""
        self._next = self._first


class Reader:
    """Reads one link in a thread of its own until stopped.

    Parameters
    ----------
    link : Link
        Open already; from now on only the reader uses it.
    reopen : callable
        Opens the link again, or raises.
    inbox : Inbox
        Where the lines go.
    index : int
        The link's place in the site file.
    wait : callable, optional
        Waits for so many seconds and says whether to stop; by default until `stop` at the latest.
    """

    def __init__(
        self,
        link: Link,
        reopen: Callable[[], Link],
        inbox: Inbox,
        index: int = 0,
        *,
        wait: Callable[[float], bool] | None = None,
    ) -> None:
        self._link: Link | None = link
        self._reopen = reopen
        self._inbox = inbox
        self._index = index
        self._stopping = threading.Event()
        self._wait = wait or self._stopping.wait
        self._splitter = Splitter()
        self._backoff = Backoff()
        self._recent: deque[tuple[float, int]] = deque(maxlen=4096)
        self._thread = threading.Thread(target=self._run, name=f"link {index + 1}", daemon=True)
        self.state = "open"
        self.message = ""
        self.retry_at: float | None = None
        self.lines = 0
        self.dropped = 0
        self.latest = 0.0

    @property
    def stopping(self) -> bool:
        """Whether `stop` was called."""
        return self._stopping.is_set()

    def start(self) -> None:
        """Start the thread."""
        self._thread.start()

    def stop(self, within: float) -> bytes:
        """Stop and let go of the link; return the start of a line whose end has not come.

        Parameters
        ----------
        within : float
            Longest wait for the thread [s].
        """
        self._stopping.set()
        if self._thread.ident is not None:
            self._thread.join(within)
        elif self._link is not None:
            self._link.close()
        return self._splitter.cut_off() if not self._thread.is_alive() else b""

    def rate(self, now: float) -> float:
        """Return lines per second over the last few seconds."""
        begin = max(now - _RATE_OVER, 0.0)
        count = sum(lines for at, lines in list(self._recent) if at > begin)
        return count / max(now - begin, 1.0)

    def _run(self) -> None:
        self._inbox.put_news(self._index, "open", "")
        try:
            while not self._stopping.is_set() and self.state != "ended":
                if self._link is None:
                    self._try_again()
                else:
                    self._read(self._link)
        finally:
            if self._link is not None:
                self._link.close()
                self._link = None

    def _read(self, link: Link) -> None:
        try:
            data = link.read(POLL)
        except Exception as error:  # noqa: BLE001 (a driver's surprise must not end the reading in silence)
            link.close()
            self._link = None
            self.state = "lost"
            self._tell("lost", str(error), self._splitter.cut_off())
            return
        if data is None:
            self._end(patient=getattr(link, "patient", False))
        elif data:
            self._backoff.reset()
            self._queue(self._splitter.feed(data), patient=getattr(link, "patient", False))

    def _end(self, *, patient: bool) -> None:
        rest = self._splitter.cut_off()
        if rest and patient:  # the last line of a text file need not have an end
            self._queue(rest + b"\n", patient=True)
            rest = b""
        self.state = "ended"
        self._tell("ended", "the input has ended", rest)

    def _tell(self, state: str, message: str, cut: bytes) -> None:
        self.message = safe(message, 200)
        self._inbox.put_news(self._index, state, self.message, cut)

    def _try_again(self) -> None:
        pause = self._backoff.pause()
        self.retry_at = self._inbox.now() + pause
        stop = self._wait(pause)
        self.retry_at = None
        if stop or self._stopping.is_set():
            return
        try:
            self._link = self._reopen()
        except Exception as error:  # noqa: BLE001 (as above)
            self.message = safe(str(error), 200)
            return
        self.state = "open"
        self._tell("open", "", b"")

    def _queue(self, lines: bytes, *, patient: bool) -> None:
        if not lines:
            return
        count = lines.count(b"\n")
        first = self.lines + 1
        time = self._inbox.put_lines(lines, first, self._index)
        while time is None and patient and not self._stopping.is_set():
            self._inbox.wait_for_room(POLL)
            time = self._inbox.put_lines(lines, first, self._index)
        self.lines += count
        if time is None:
            self.dropped += count
        else:
            self.latest = time
            self._recent.append((time, count))
