"""The worker between source and screen, with sources that need no port and no file."""

import threading
from collections.abc import Callable
from types import SimpleNamespace
from typing import Any

import pytest

from eastfall.io.errors import LinkError
from eastfall.physics.findings import Findings, Rows
from eastfall.tui.feed import Feed, LiveFeed
from eastfall.tui.replayfeed import FASTEST, SLOWEST, ReplayFeed
from eastfall.tui.store import Snapshot

pytestmark = pytest.mark.invariant
MakeRows = Callable[[int], Rows]
PATIENCE = 5.0


class Collected:
    """Keeps what a worker publishes, and waits for a wanted snapshot."""

    def __init__(self) -> None:
        self.all: list[Snapshot] = []
        self._news = threading.Condition()

    def __call__(self, snapshot: Snapshot) -> None:
        """Take a snapshot from the worker."""
        with self._news:
            self.all.append(snapshot)
            self._news.notify_all()

    def wait(self, wanted: Callable[[Snapshot], bool]) -> Snapshot:
        """Return the newest snapshot that is as wanted."""
        with self._news:
            assert self._news.wait_for(lambda: any(map(wanted, self.all)), PATIENCE)
            return next(one for one in reversed(self.all) if wanted(one))


class _FakeRun:
    """A live run that hands out the same rows in every step."""

    def __init__(self, block: Rows, health: Any) -> None:
        self.block, self.health = block, health
        self.told: list[tuple[str, ...]] = []
        self.steps = 0
        self.stopped = 0
        self.fault: Exception | None = None
        self.pause = threading.Event()

    def start(self) -> None:
        if self.fault:
            raise self.fault

    def step(self, timeout: float) -> Any:
        self.pause.wait(min(timeout, 0.005))
        self.steps += 1
        if self.fault:
            raise self.fault
        return self._update((Findings(rows=self.block),))

    def stop(self) -> Any:
        self.stopped += 1
        return self._update(())

    def _update(self, findings: tuple[Findings, ...]) -> Any:
        return SimpleNamespace(
            findings=findings, standing=None, alarms=(), health=self.health, time=1.0 * self.steps, armed=True
        )

    def acknowledge(self, name: str, who: str) -> None:
        self.told.append(("acknowledge", name, who))

    def shelve(self, name: str, seconds: float, reason: str, who: str) -> None:
        self.told.append(("shelve", name, seconds, reason, who))

    def note(self, text: str, who: str) -> None:
        self.told.append(("note", text, who))

    def arm(self, who: str) -> None:
        self.told.append(("arm", who))


class _FakeReplay:
    """A record of 100 s with one row a second."""

    duration = 100.0
    restarts = 0
    on_the_way = False
    index = None

    def __init__(self, block: Rows) -> None:
        self.block = block
        self.time = 0.0
        self.closed = False

    def advance(self, to_time: float, **_: float) -> Any:
        new = max(0, int(to_time) - int(self.time))
        self.time = to_time
        return self._update(new)

    def seek(self, time: float, **_: float) -> Any:
        self.restarts += time < self.time
        start = 0.0 if time < self.time else self.time
        new = int(time) - int(start)
        self.time = time
        return self._update(new)

    def step(self) -> Any:
        return self.advance(min(self.time + 1.0, self.duration))

    def catch_up(self, now: float, **_: float) -> Any:
        return self.advance(min(now, self.duration))

    def close(self) -> None:
        self.closed = True

    def _update(self, new: int) -> Any:
        findings = Findings(rows=Rows(self.block.data[:, :new]))
        return SimpleNamespace(findings=(findings,), standing=None, alarms=(), health=None, time=self.time)


@pytest.fixture
def shown() -> Collected:
    """Collect snapshots."""
    return Collected()


@pytest.fixture
def run(rows: MakeRows, health: Callable[..., Any]) -> _FakeRun:
    """Build a live run."""
    return _FakeRun(rows(5), health())


@pytest.fixture
def finished() -> Any:
    """Close every worker that a test opened."""
    opened: list[Feed] = []
    yield opened
    for one in opened:
        one.close()
        assert not one.running


def test_live_steps_reach_the_screen_as_growing_snapshots(
    run: _FakeRun, shown: Collected, finished: list[Feed]
) -> None:
    """Every step's rows are in a later snapshot, none twice."""
    feed = LiveFeed(run, shown)  # type: ignore[arg-type]
    finished.append(feed)
    feed.start()
    later = shown.wait(lambda one: len(one.rows) >= 50)
    assert len(later.rows) == 5 * later.time


def test_pictures_come_no_faster_than_ten_a_second(
    run: _FakeRun, shown: Collected, finished: list[Feed]
) -> None:
    """Two hundred steps within one moment of the clock give one picture."""
    feed = LiveFeed(run, shown, clock=lambda: 7.0)  # type: ignore[arg-type]
    finished.append(feed)
    feed.start()
    shown.wait(lambda one: len(one.rows) > 0)
    while run.steps < 200:
        assert feed.running
    assert len(shown.all) == 1


def test_commands_are_done_in_order_in_the_workers_thread(
    run: _FakeRun, shown: Collected, finished: list[Feed]
) -> None:
    """Acknowledging, shelving, note and arming reach the run as they were asked, and stand in the snapshot by name."""
    feed = LiveFeed(run, shown)  # type: ignore[arg-type]
    finished.append(feed)
    feed.acknowledge("action limit", "Ada")
    feed.shelve("feed silent", 600.0, "cable", "Ada")
    feed.note("fan stopped", "Ada")
    feed.arm("M. Quill")
    done = threading.Event()
    feed.ask(done.set)
    feed.start()
    assert done.wait(PATIENCE)
    assert run.told == [
        ("acknowledge", "action limit", "Ada"),
        ("shelve", "feed silent", 600.0, "cable", "Ada"),
        ("note", "fan stopped", "Ada"),
        ("arm", "M. Quill"),
    ]
    said = shown.wait(lambda one: len(one.said) == 4).said
    assert [one.text for one in said] == [
        "acknowledge action limit · Ada",
        "shelve feed silent for 10 min: cable · Ada",
        "fan stopped · Ada",
        "shaft clear, armed · M. Quill",
    ]
    assert [one.is_note for one in said] == [False, False, True, False]


def test_closing_stops_the_run_once_and_ends_the_thread(run: _FakeRun, shown: Collected) -> None:
    """The source is let go of, and the last snapshot is shown."""
    feed = LiveFeed(run, shown)  # type: ignore[arg-type]
    feed.start()
    shown.wait(lambda one: len(one.rows) > 0)
    feed.close()
    assert not feed.running
    assert run.stopped == 1


@pytest.mark.parametrize("at_start", [True, False])
def test_source_that_fails_is_stopped_and_its_words_are_shown(
    run: _FakeRun, shown: Collected, finished: list[Feed], at_start: bool
) -> None:
    """An error of the source becomes one line on the screen and is kept for the caller; the run is stopped."""
    feed = LiveFeed(run, shown)  # type: ignore[arg-type]
    finished.append(feed)
    if at_start:
        run.fault = LinkError("port /dev/ttyUSB9: no such device")
        feed.start()
    else:
        feed.start()
        shown.wait(lambda one: len(one.rows) > 0)
        run.fault = LinkError("port /dev/ttyUSB9: no such device")
    last = shown.wait(lambda one: bool(one.trouble))
    assert last.trouble == "port /dev/ttyUSB9: no such device"
    assert isinstance(feed.failure, LinkError)
    assert run.stopped == 1


def test_replay_runs_at_the_speed_asked_and_stops_at_the_end(
    rows: MakeRows, shown: Collected, finished: list[Feed]
) -> None:
    """With 10 s of clock at eight times the speed the record is at 80 s, then at its end, and no longer plays."""
    now = [0.0]
    feed = ReplayFeed(_FakeReplay(rows(100)), shown, speed=8.0, clock=lambda: now[0])  # type: ignore[arg-type]
    finished.append(feed)
    feed.start()
    shown.wait(lambda one: one.time == 0.0)
    now[0] = 10.0
    assert len(shown.wait(lambda one: one.time == 80.0).rows) == 80
    now[0] = 20.0
    end = shown.wait(lambda one: one.ended)
    assert (end.time, end.playing, len(end.rows)) == (100.0, False, 100)


def test_going_back_starts_the_picture_over(rows: MakeRows, shown: Collected, finished: list[Feed]) -> None:
    """After a jump back to 30 s the picture holds the first 30 s once."""
    feed = ReplayFeed(_FakeReplay(rows(100)), shown, clock=lambda: 0.0)  # type: ignore[arg-type]
    finished.append(feed)
    feed.play(on=False)
    feed.seek(80.0)
    feed.start()
    assert len(shown.wait(lambda one: one.time == 80.0).rows) == 80
    feed.seek(30.0)
    assert len(shown.wait(lambda one: one.time == 30.0).rows) == 30
    feed.skip(5.0)
    assert len(shown.wait(lambda one: one.time == 35.0).rows) == 35


class _InPieces(_FakeReplay):
    """A record of which no call plays more than 20 s."""

    def advance(self, to_time: float, **_: float) -> Any:
        self.on_the_way = to_time - self.time > 20.0
        return super().advance(min(to_time, self.time + 20.0))

    def seek(self, time: float, **_: float) -> Any:
        self.restarts += time < self.time
        self.time = 0.0 if time < self.time else self.time
        return self.advance(time)


def test_jump_that_stops_on_the_way_goes_on_to_its_end(
    rows: MakeRows, shown: Collected, finished: list[Feed]
) -> None:
    """However many lines a record gives at once, the picture is that of the moment asked for, and of none before it."""
    feed = ReplayFeed(_InPieces(rows(100)), shown, clock=lambda: 0.0)  # type: ignore[arg-type]
    finished.append(feed)
    feed.play(on=False)
    feed.seek(90.0)
    feed.start()
    assert len(shown.wait(lambda one: one.time == 90.0).rows) == 90
    feed.seek(50.0)
    assert len(shown.wait(lambda one: one.time == 50.0).rows) == 50
    assert {one.time for one in shown.all} <= {0.0, 90.0, 50.0}


def test_step_takes_one_block_and_stands_still(
    rows: MakeRows, shown: Collected, finished: list[Feed]
) -> None:
    """A step moves the record by a block and pauses it."""
    feed = ReplayFeed(_FakeReplay(rows(100)), shown, clock=lambda: 0.0)  # type: ignore[arg-type]
    finished.append(feed)
    feed.start()
    feed.step()
    one = shown.wait(lambda one: one.time == 1.0)
    assert not one.playing
    feed.seek(100.0)
    feed.play()
    assert shown.wait(lambda one: one.playing and one.serial > 2).time < 100.0


def test_speed_keeps_inside_its_bounds(rows: MakeRows, shown: Collected, finished: list[Feed]) -> None:
    """Doubling for ever ends at the fastest, halving at the slowest."""
    feed = ReplayFeed(_FakeReplay(rows(100)), shown, clock=lambda: 0.0)  # type: ignore[arg-type]
    finished.append(feed)
    feed.start()
    feed.faster(1e9)
    shown.wait(lambda one: one.speed == FASTEST)
    feed.faster(1e-9)
    shown.wait(lambda one: one.speed == SLOWEST)


def test_record_that_is_being_written_is_kept_up_with_until_one_looks_elsewhere(
    rows: MakeRows, shown: Collected, finished: list[Feed]
) -> None:
    """A followed record stands at its newest; a jump back leaves that, asking for the newest returns to it."""
    now = [40.0]
    replay = _FakeReplay(rows(100))
    feed = ReplayFeed(replay, shown, clock=lambda: 0.0, now=lambda: now[0])  # type: ignore[arg-type]
    finished.append(feed)
    feed.start()
    assert len(shown.wait(lambda one: one.keeping_up and one.time == 40.0).rows) == 40
    feed.seek(10.0)
    assert not shown.wait(lambda one: one.time == 10.0).keeping_up
    now[0] = 60.0
    feed.newest()
    assert len(shown.wait(lambda one: one.time == 60.0).rows) == 60
    feed.close()
    assert replay.closed
