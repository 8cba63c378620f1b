"""The worker that moves through a record: at a chosen speed, to a moment, or keeping up with one being written."""

import queue
import threading
import time
from collections.abc import Callable
from contextlib import suppress
from typing import TYPE_CHECKING

from eastfall.physics.errors import EastfallError
from eastfall.tui.feed import PERIOD, Feed, Publish
from eastfall.tui.store import History, Said, Snapshot

if TYPE_CHECKING:
    from eastfall.io.replay import Index, Replay
    from eastfall.io.run import RunUpdate

SLOWEST, FASTEST = 0.25, 256.0
AT_ONCE = 100_000
"""Lines after which a jump hands on what it found: memory stays flat over a recording of any length."""


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
        moment = min(max(moment, 0.0), self._replay.duration)
        self._take(self._replay.seek(moment, most=AT_ONCE))
        while self._replay.on_the_way:
            self._take(self._replay.advance(moment, most=AT_ONCE))

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
            self._take(self._replay.catch_up(self._now(), most=AT_ONCE))
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
