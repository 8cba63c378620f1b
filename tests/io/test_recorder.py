"""Recording through trouble: what is held, in which order it is written later, and what is counted as lost."""

import numpy as np

from eastfall.io.arrivals import Arrival, LineBlock, RunEvent
from eastfall.io.errors import OutputError
from eastfall.io.recorder import RETRY, Recorder


class FailingLog:
    """A log that refuses while `full` is set; with `only_events` it has room for these."""

    def __init__(self) -> None:
        self.full = False
        self.only_events = False
        self.written: list[Arrival] = []
        self.closed = False

    def raw(self, block: LineBlock) -> None:
        """Take a block, or refuse."""
        self._take(block)

    def event(self, event: RunEvent) -> None:
        """Take an event, or refuse."""
        self._take(event)

    def _take(self, one: Arrival) -> None:
        if self.full and not (self.only_events and isinstance(one, RunEvent)):
            raise OutputError("/mnt/log: No space left on device")
        self.written.append(one)

    def tick(self, time: float) -> None:
        """Seal, or refuse."""
        del time
        if self.full:
            raise OutputError("/mnt/log: No space left on device")

    def close(self, time: float) -> None:
        """Close, or refuse."""
        self.tick(time)
        self.closed = True


def block(number: int) -> LineBlock:
    """Return a block of one line of ten bytes."""
    return LineBlock(data=b"%09d\n" % number, times=np.array([float(number)]), first_line=number + 1)


def over(log: FailingLog, limit: int = 1000) -> Recorder:
    """Return a recorder over a log that stands in for the real one."""
    return Recorder(log, limit)  # type: ignore[arg-type]


def test_what_is_held_while_the_disk_is_full_is_written_in_order_later() -> None:
    """Lines and events of the bad minute follow in their place once the log can be written again."""
    log = FailingLog()
    recorder = over(log)
    arrivals: list[Arrival] = [block(0), block(1), RunEvent(time=1.5, name="note"), block(2), block(3)]
    recorder.put(arrivals[0])
    log.full = True
    for one in arrivals[1:4]:
        recorder.put(one)
    assert recorder.trouble == "/mnt/log: No space left on device"
    recorder.tick(2.0)
    log.full = False
    recorder.put(arrivals[4])
    assert (log.written, recorder.held) == (arrivals[:1], 4)
    recorder.tick(2.0 + RETRY)
    assert (log.written, recorder.held, recorder.trouble, recorder.lost) == (arrivals, 0, "", 0)


def test_a_full_log_is_not_tried_at_every_line() -> None:
    """Between tries a second passes."""
    log = FailingLog()
    recorder = over(log)
    log.full = True
    recorder.put(block(0))
    recorder.tick(10.0)
    log.full = False
    recorder.tick(10.0 + 0.5 * RETRY)
    assert log.written == []
    recorder.tick(10.0 + RETRY)
    assert len(log.written) == 1


def test_memory_is_bounded_and_what_is_lost_is_counted() -> None:
    """Beyond the bound the oldest lines go, and their number is told."""
    log = FailingLog()
    recorder = over(log, limit=45)
    log.full = True
    for number in range(10):
        recorder.put(block(number))
    assert (recorder.held, recorder.lost) == (4, 6)
    log.full = False
    recorder.tick(100.0)
    said, *rest = log.written
    assert isinstance(said, RunEvent)
    assert (said.name, said.time, said.fields["count"]) == ("lost", 6.0, 6)
    assert [one.data for one in rest if isinstance(one, LineBlock)] == [block(n).data for n in range(6, 10)]
    recorder.put(block(10))
    recorder.close(101.0)
    assert [one for one in log.written if isinstance(one, RunEvent)] == [said]


def test_closing_a_log_that_cannot_be_written_counts_what_is_missing() -> None:
    """The end comes anyway; what could not be written is lost and the trouble is kept to be told."""
    log = FailingLog()
    recorder = over(log)
    log.full = True
    recorder.put(block(0))
    recorder.close(5.0)
    assert (recorder.lost, recorder.trouble) == (1, "/mnt/log: No space left on device")


def test_a_record_that_is_closed_with_lines_missing_says_how_many() -> None:
    """Where no more than a few bytes are left on a disk: the last that the record says is what it lacks."""
    log = FailingLog()
    recorder = over(log)
    log.full = True
    for number in range(7):
        recorder.put(block(number))
    log.only_events = True
    recorder.close(8.0)
    (said,) = log.written
    assert isinstance(said, RunEvent)
    assert (said.name, said.time, said.fields["count"]) == ("lost", 8.0, 7)


def test_trouble_with_sealing_is_trouble() -> None:
    """A log that takes lines and cannot seal them is failing too."""
    log = FailingLog()
    recorder = over(log)
    log.full = True
    recorder.tick(1.0)
    assert recorder.trouble
    log.full = False
    recorder.tick(1.0 + RETRY)
    assert not recorder.trouble


def test_without_a_log_nothing_is_held() -> None:
    """A run that is not recorded keeps nothing."""
    recorder = Recorder(None)
    recorder.put(block(0))
    recorder.tick(1.0)
    recorder.close(2.0)
    assert (recorder.held, recorder.trouble, recorder.lost) == (0, "", 0)
