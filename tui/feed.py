"""The worker behind the screen: one thread steps a live run or a replay and publishes frozen snapshots at 10 Hz.

The screen never touches the source: it asks by putting a command in the worker's queue, and reads snapshots.
"""

import queue
import threading
import time
from abc import ABC, abstractmethod
from collections.abc import Callable
from typing import TYPE_CHECKING

from eastfall.io.safetext import safe
from eastfall.physics.errors import EastfallError
from eastfall.tui import words
from eastfall.tui.store import History, Said, Snapshot

if TYPE_CHECKING:
    from eastfall.io.run import Run, RunUpdate

Publish = Callable[[Snapshot], None]
Command = Callable[[], None]

PERIOD = 0.1
"""Seconds between pictures."""
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
