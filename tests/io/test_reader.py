"""The reader threads and their queue: pauses, stamps, bounds, and leaving on time."""

import threading
import time
from collections.abc import Callable

import pytest
from live_help import LONG_ENOUGH, FedLink, HandClock, live_threads

from eastfall.io.arrivals import LineBlock
from eastfall.io.errors import LinkError
from eastfall.io.reader import Backoff, Inbox, LinkNews, Reader
from eastfall.io.run import STOP_WITHIN


class Pauses:
    """Records the pauses asked for, and lets a number of them pass at once before it says stop."""

    def __init__(self, most: int) -> None:
        self.asked: list[float] = []
        self._most = most
        self.over = threading.Event()

    def __call__(self, seconds: float) -> bool:
        """Pass, or say stop."""
        self.asked.append(seconds)
        if len(self.asked) >= self._most:
            self.over.set()
        return len(self.asked) >= self._most


def wait_for(done: Callable[[], bool]) -> None:
    """Wait until something is so, within bounds."""
    deadline = time.monotonic() + LONG_ENOUGH
    while not done():
        assert time.monotonic() < deadline
        threading.Event().wait(0.002)


def refuse() -> FedLink:
    """Open nothing."""
    raise LinkError("test: no such device")


def taken(inbox: Inbox) -> list[object]:
    """Return all that waits."""
    return list(inbox.take(1_000_000)[0])


def test_pauses_double_from_half_a_second_to_ten() -> None:
    """0.5, 1, 2, 4, 8, 10, 10 s; and from the start again once the link has spoken."""
    backoff = Backoff()
    assert [backoff.pause() for _ in range(7)] == [0.5, 1.0, 2.0, 4.0, 8.0, 10.0, 10.0]
    backoff.reset()
    assert backoff.pause() == 0.5


def test_a_lost_link_is_tried_with_growing_pauses() -> None:
    """Each try that fails doubles the pause; the state stays "lost" with the reason."""
    pauses, inbox = Pauses(6), Inbox(HandClock())
    reader = Reader(FedLink(items=(LinkError("test: lost: unplugged"),)), refuse, inbox, wait=pauses)
    reader.start()
    assert pauses.over.wait(LONG_ENOUGH)
    reader.stop(LONG_ENOUGH)
    assert pauses.asked[:6] == [0.5, 1.0, 2.0, 4.0, 8.0, 10.0]
    assert (reader.state, reader.message) == ("lost", "test: no such device")


def test_a_flapping_link_does_not_shorten_the_pauses() -> None:
    """A link that opens and is lost again before it says anything counts as another failed try."""
    pauses = Pauses(4)
    reader = Reader(
        FedLink(items=(LinkError("gone"),)),
        lambda: FedLink(items=(LinkError("gone"),)),
        Inbox(HandClock()),
        wait=pauses,
    )
    reader.start()
    assert pauses.over.wait(LONG_ENOUGH)
    reader.stop(LONG_ENOUGH)
    assert pauses.asked[:4] == [0.5, 1.0, 2.0, 4.0]


def test_an_unexpected_exception_of_a_driver_is_a_lost_link() -> None:
    """Whatever a driver raises, the thread lives and the link is tried again."""
    pauses, inbox = Pauses(1), Inbox(HandClock())
    link = FedLink(items=(b"1\n", RuntimeError("driver\x1b[2J")))
    reader = Reader(link, refuse, inbox, wait=pauses)
    reader.start()
    assert pauses.over.wait(LONG_ENOUGH)
    reader.stop(LONG_ENOUGH)
    news = [one for one in taken(inbox) if isinstance(one, LinkNews)]
    assert [one.state for one in news] == ["open", "lost"]
    assert news[1].message == r"driver\x1b[2J"
    assert link.closed


def test_a_half_line_is_not_joined_to_what_comes_after_the_loss() -> None:
    """What came as 51 before a loss and 2.3,1 after it is no line 512.3,1: the half is handed on as cut short."""
    inbox = Inbox(HandClock())
    again = FedLink(items=(b"2.3,1\n",))
    reader = Reader(
        FedLink(items=(b"7,7\n51", LinkError("gone"))), lambda: again, inbox, wait=lambda _: False
    )
    reader.start()
    wait_for(lambda: reader.lines == 2)
    reader.stop(LONG_ENOUGH)
    items = taken(inbox)
    assert [one.data for one in items if isinstance(one, LineBlock)] == [b"7,7\n", b"2.3,1\n"]
    assert [one.cut for one in items if isinstance(one, LinkNews)] == [b"", b"51", b""]


def test_lines_are_stamped_once_and_rounded_to_a_microsecond() -> None:
    """The stamp is the time since the inbox was made, in whole microseconds, and counts lines from one."""
    clock = HandClock()
    inbox = Inbox(clock)
    clock.time += 1.2345678
    assert inbox.put_lines(b"a\nb\n", 7, 1) == 1.234568
    (block,) = taken(inbox)
    assert isinstance(block, LineBlock)
    assert (block.times.tolist(), block.first_line, block.link) == ([1.234568, 1.234568], 7, 1)


def test_the_queue_is_bounded_and_says_what_it_dropped() -> None:
    """A link that cannot wait loses the newest lines when nobody takes them; they are counted."""
    inbox = Inbox(HandClock(), limit=10)
    link = FedLink(items=(b"1,1\n2,2\n", b"3,3\n", b"4,4\n5,5\n"))
    reader = Reader(link, refuse, inbox)
    reader.start()
    wait_for(lambda: reader.lines == 5)
    reader.stop(LONG_ENOUGH)
    assert reader.dropped == 3
    assert [one.data for one in taken(inbox) if isinstance(one, LineBlock)] == [b"1,1\n2,2\n"]


def test_a_patient_source_waits_for_room() -> None:
    """A file or a pipe loses nothing, however small the queue is."""
    inbox = Inbox(HandClock(), limit=8)
    link = FedLink(items=(*(b"%d,0\n" % i for i in range(50)), b"last", None))
    link.patient = True
    reader = Reader(link, refuse, inbox)
    reader.start()
    got = b""
    deadline = time.monotonic() + LONG_ENOUGH
    while reader.state != "ended" or not inbox.empty:
        assert time.monotonic() < deadline
        inbox.wait(0.01)
        got += b"".join(one.data for one in inbox.take(1)[0] if isinstance(one, LineBlock))
    reader.stop(LONG_ENOUGH)
    assert got == b"".join(b"%d,0\n" % i for i in range(50)) + b"last\n"
    assert reader.dropped == 0


class Asked(FedLink):
    """A link that keeps how long it was asked to wait."""

    def __init__(self, *items: object) -> None:
        super().__init__(items=items)
        self.timeouts: list[float] = []

    def read(self, timeout: float) -> bytes | None:
        """Give the next item."""
        self.timeouts.append(timeout)
        return super().read(timeout)


def test_a_silent_link_is_left_without_waiting_for_bytes() -> None:
    """Stopping closes the link, leaves no thread, and gives what was pending; no read was to outlast a stop."""
    link = Asked(b"1,2\n3")
    reader = Reader(link, refuse, Inbox(HandClock()))
    reader.start()
    wait_for(lambda: reader.lines == 1)
    assert reader.stop(LONG_ENOUGH) == b"3"
    assert link.closed
    assert live_threads() == []
    assert max(link.timeouts) < STOP_WITHIN


def test_a_reader_that_waits_for_a_lost_link_is_left_at_once() -> None:
    """A pause that would outlast this test many times does not hold up the end."""
    reader = Reader(FedLink(items=(LinkError("gone"),)), refuse, Inbox(time.monotonic))
    reader._backoff = Backoff(first=100.0 * LONG_ENOUGH)
    reader.start()
    wait_for(lambda: reader.retry_at is not None)
    reader.stop(LONG_ENOUGH)
    assert live_threads() == []


def test_a_reader_never_started_still_lets_go_of_its_link() -> None:
    """Stopping before starting closes the port."""
    link = FedLink()
    Reader(link, refuse, Inbox(HandClock())).stop(LONG_ENOUGH)
    assert link.closed


def test_the_rate_is_over_the_last_five_seconds() -> None:
    """Lines older than five seconds do not count."""
    clock = HandClock()
    inbox = Inbox(clock)
    link = FedLink()
    reader = Reader(link, refuse, inbox)
    reader.start()
    for second in range(8):
        link.put(b"1\n" * 20)
        wait_for(lambda wanted=20 * (second + 1): reader.lines == wanted)  # type: ignore[misc]
        clock.time += 1.0
    reader.stop(LONG_ENOUGH)
    assert reader.rate(inbox.now()) == pytest.approx(16.0)
    assert reader.rate(inbox.now() + 10.0) == 0.0
