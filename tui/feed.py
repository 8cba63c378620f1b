"""The worker behind the screen: one thread steps a live run or a replay and publishes frozen snapshots at 10 Hz.

The screen never touches the source: it asks by putting a command in the worker's queue, and reads snapshots.
"""

import queue
import threading
import time
from abc import ABC, abstractmethod
from collections.abc import Callable
from contextlib import suppress
from typing import TYPE_CHECKING

from eastfall.io.safetext import safe
from eastfall.physics.errors import EastfallError
from eastfall.tui import words
from eastfall.tui.store import History, Said, Snapshot

if TYPE_CHECKING:
    from eastfall.io.replay import Index, Replay
    from eastfall.io.run import Run, RunUpdate

Publish = Callable[[Snapshot], None]
Command = Callable[[], None]

PERIOD = 0.1
"""Seconds between pictures."""
SLOWEST, FASTEST = 0.25, 256.0
_PATIENCE = 10.0  # s that closing waits for the source: sealing a record on a slow card


class Feed(ABC):
    """A source of snapshots in a thread of its own.

    Parameters
    ----------
    history : History
        Where findings gather; only the worker touches it after `start`.
    publish : callable
        Takes every snapshot, in the worker's thread.
    clock : callable
        Monotonic seconds.
    """

    def __init__(self, history: History, publish: Publish, clock: Callable[[], float]) -> None:
        self._history = history
        self._publish = publish
        self._clock = clock
        self._commands: queue.SimpleQueue[Command] = queue.SimpleQueue()
        self._stopping = threading.Event()
        self._thread = threading.Thread(target=self._run, name="eastfall feed", daemon=True)
        self._published = float("-inf")
        self._trouble = ""
        self.failure: Exception | None = None

    def start(self) -> None:
        """Begin."""
        self._thread.start()

    def close(self) -> None:
        """Stop the source and wait until it has let go of port and record."""
        self._stopping.set()
        self._commands.put(lambda: None)
        if self._thread.is_alive():
            self._thread.join(_PATIENCE)

    @property
    def running(self) -> bool:
        """Whether the worker still works."""
        return self._thread.is_alive()

    def ask(self, command: Command) -> None:
        """Have something done in the worker's thread, before its next step."""
        self._commands.put(command)

    def _run(self) -> None:
        try:
            try:
                self._begin()
                while not self._stopping.is_set():
                    self._obey()
                    self._work()
                    self._show()
            finally:
                self._end()
        except (EastfallError, OSError) as error:
            self._fail(error, str(error))
        except Exception as error:  # noqa: BLE001 (kept and raised by the caller of the screen, never swallowed)
            self._fail(error, f"{type(error).__name__}: {error}")

    def _fail(self, error: Exception, words: str) -> None:
        self.failure = error
        self._trouble = words
        self._show(force=True)

    def _obey(self) -> None:
        while True:
            try:
                command = self._commands.get_nowait()
            except queue.Empty:
                return
            command()
            self._published = float("-inf")

    def _show(self, *, force: bool = False) -> None:
        now = self._clock()
        if force or now - self._published >= PERIOD:
            self._published = now
            self._publish(self._snapshot())

    @abstractmethod
    def _begin(self) -> None:
        """Open the source."""

    @abstractmethod
    def _work(self) -> None:
        """Take one step, waiting a fraction of `PERIOD` at most."""

    @abstractmethod
    def _end(self) -> None:
        """Close the source."""

    @abstractmethod
    def _snapshot(self) -> Snapshot:
        """Freeze what stands."""


class LiveFeed(Feed):
    """Steps a live run; recording goes on whatever the screen does.

    Parameters
    ----------
    run : Run
        Not yet started.
    publish : callable
        Takes every snapshot, in the worker's thread.
    clock : callable
        Monotonic seconds.
    """

    def __init__(
        self,
        run: "Run",
        publish: Publish,
        *,
        clock: Callable[[], float] = time.monotonic,
    ) -> None:
        super().__init__(History("live"), publish, clock)
        self._source = run
        self._update: RunUpdate | None = None
        self._said: tuple[Said, ...] = ()

    def acknowledge(self, name: str, who: str = "") -> None:
        """Acknowledge one alarm."""
        self._say(lambda: self._source.acknowledge(name, who), f"acknowledge {name}", who)

    def shelve(self, name: str, seconds: float, reason: str, who: str = "") -> None:
        """Put one alarm aside for some seconds."""
        said = f"shelve {name} for {seconds / 60.0:.3g} min: {reason}"
        self._say(lambda: self._source.shelve(name, seconds, reason, who), said, who)

    def note(self, text: str, who: str = "") -> None:
        """Write a note into the record."""
        self._say(lambda: self._source.note(text, who), text, who, is_note=True)

    def mark(self, depth: float, east: float, north: float, who: str = "") -> None:
        """Take an offset [m] that a person read and typed in."""
        said = f"mark at {depth:g} m: {words.pair(east, north)}"
        self._say(lambda: self._source.mark(depth, east, north, who), said, who)

    def arm(self, who: str) -> None:
        """Write into the record who declared the shaft clear, and arm the run."""
        self._say(lambda: self._source.arm(who), "shaft clear, armed", who)

    def _say(self, act: Command, text: str, who: str, *, is_note: bool = False) -> None:
        """Have something said to the run, and keep it for the history on the screen."""

        def command() -> None:
            act()
            moment = self._update.time if self._update is not None else 0.0
            told = safe(f"{text} · {who}" if who else text, 200)
            self._said += (Said(time=moment, text=told, is_note=is_note),)

        self.ask(command)

    def _begin(self) -> None:
        self._source.start()

    def _work(self) -> None:
        self._take(self._source.step(PERIOD / 2))

    def _take(self, update: "RunUpdate") -> None:
        self._update = update
        self._history.add(update.findings, update.time)

    def _end(self) -> None:
        self._take(self._source.stop())
        self._show(force=True)

    def _snapshot(self) -> Snapshot:
        update = self._update
        if update is None:
            return self._history.snapshot(trouble=self._trouble)
        return self._history.snapshot(
            time=update.time,
            standing=update.standing,
            alarms=update.alarms,
            health=update.health,
            armed=update.armed,
            said=self._said,
            ended=all(one.state == "ended" for one in update.health.links) and bool(update.health.links),
            trouble=self._trouble,
        )


class ReplayFeed(Feed):
    """Moves through a record at a chosen speed, or keeps up with one that is being written.

    Parameters
    ----------
    replay : Replay
        At its beginning.
    publish : callable
        Takes every snapshot, in the worker's thread.
    speed : float
        Record seconds per second.
    clock : callable
        Monotonic seconds.
    now : callable, optional
        For a record that is being written: seconds since its run started.
    """

    def __init__(
        self,
        replay: "Replay",
        publish: Publish,
        *,
        speed: float = 1.0,
        clock: Callable[[], float] = time.monotonic,
        now: Callable[[], float] | None = None,
    ) -> None:
        super().__init__(History("replay"), publish, clock)
        self._replay = replay
        self._restarts = replay.restarts
        self._update: RunUpdate | None = None
        self._playing = True
        self._speed = min(max(speed, SLOWEST), FASTEST)
        self._last = clock()
        self._now = now
        self._keeping_up = now is not None
        self.index: Index | None = None
        """What can be jumped to; None while the record is still being read through for it."""

    def play(self, *, on: bool | None = None) -> None:
        """Go on, stop, or (None) change over; at the end of the record playing starts over."""

        def command() -> None:
            self._playing = not self._playing if on is None else on
            self._keeping_up = False
            if self._playing and self._at_end():
                self._go(0.0)

        self.ask(command)

    def newest(self) -> None:
        """Keep up with the end of a record that is being written; without effect on one that is complete."""

        def command() -> None:
            self._keeping_up = self._now is not None
            self._playing = self._playing or self._keeping_up

        self.ask(command)

    def faster(self, factor: float) -> None:
        """Change the speed by a factor, within its bounds."""

        def command() -> None:
            self._speed = min(max(self._speed * factor, SLOWEST), FASTEST)

        self.ask(command)

    def skip(self, seconds: float) -> None:
        """Go on (or back, negative) in the record."""
        self.ask(lambda: self._go(self._replay.time + seconds))

    def seek(self, moment: float) -> None:
        """Go to a time of the record [s]."""
        self.ask(lambda: self._go(moment))

    def step(self) -> None:
        """Take the next block of lines and stand still."""

        def command() -> None:
            self._playing = self._keeping_up = False
            self._take(self._replay.step())

        self.ask(command)

    @property
    def replay(self) -> "Replay":
        """The record; only the worker moves in it."""
        return self._replay

    def change(self, replay: "Replay") -> None:
        """Go on with the same record under other settings, at the same moment."""

        def command() -> None:
            moment = self._replay.time
            self._replay.close()
            self._replay, self._restarts = replay, replay.restarts
            self._history.clear()
            self.index = None
            self._begin()
            self._go(moment)

        self.ask(command)

    def _go(self, moment: float) -> None:
        self._keeping_up = False
        self._take(self._replay.seek(min(max(moment, 0.0), self._replay.duration)))

    def _at_end(self) -> bool:
        return self._replay.time >= self._replay.duration

    def _begin(self) -> None:
        self._last = self._clock()
        threading.Thread(target=self._read_through, name="eastfall index", daemon=True).start()

    def _read_through(self) -> None:
        replay = self._replay
        # A record that cannot be read through is told of by the worker that plays it.
        with suppress(EastfallError, OSError):
            index = replay.index
            if replay is self._replay:
                self.index = index

    def _work(self) -> None:
        try:
            command = self._commands.get(timeout=PERIOD if not self._playing else PERIOD / 2)
        except queue.Empty:
            pass
        else:
            command()
            self._published = float("-inf")
        now = self._clock()
        passed, self._last = now - self._last, now
        if self._keeping_up and self._now is not None:
            self._take(self._replay.catch_up(self._now()))
        elif self._playing:
            target = min(self._replay.time + passed * self._speed, self._replay.duration)
            self._take(self._replay.advance(target))
            self._playing = not self._at_end()

    def _take(self, update: "RunUpdate") -> None:
        """Gather what an update brought; after the record started over, so does the picture."""
        if self._replay.restarts != self._restarts:
            self._restarts = self._replay.restarts
            self._history.clear()
        self._update = update
        self._history.add(update.findings, update.time)

    def _end(self) -> None:
        self._replay.close()

    def _snapshot(self) -> Snapshot:
        update = self._update
        return self._history.snapshot(
            time=self._replay.time,
            duration=self._replay.duration,
            playing=self._playing,
            speed=self._speed,
            ended=self._at_end() and not self._keeping_up,
            keeping_up=self._keeping_up,
            standing=update.standing if update else None,
            alarms=update.alarms if update else (),
            health=update.health if update else None,
            said=self._said_by_now(),
            trouble=self._trouble,
        )

    def _said_by_now(self) -> tuple[Said, ...]:
        """Return what people had said by where the record stands."""
        if self.index is None:
            return ()
        return tuple(
            Said(time=one.time, text=one.text, is_note=one.what == "note")
            for one in self.index.marks
            if one.what in {"note", "event"} and one.time <= self._replay.time
        )
