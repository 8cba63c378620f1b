"""The real application with a source that only writes down what it is asked, for tests that drive it by keys."""

from typing import Any

from textual.pilot import Pilot

from eastfall.tui.app import Dashboard, watch_app
from eastfall.tui.feed import LiveFeed
from eastfall.tui.replayfeed import ReplayFeed
from eastfall.tui.screens.watch import WatchScreen
from eastfall.tui.session import Session
from eastfall.tui.store import Snapshot


class Asked:
    """Writes down what the screen asks of its source."""

    running = True

    def __init__(self) -> None:
        self.calls: list[tuple[Any, ...]] = []

    def start(self) -> None:
        """Write it down."""
        self.calls.clear()

    def close(self) -> None:
        """Write it down."""
        self.running = False


class AskedLive(Asked, LiveFeed):
    """A live source that only listens."""

    def acknowledge(self, name: str, who: str = "") -> None:
        """Write it down."""
        self.calls.append(("acknowledge", name, who))

    def shelve(self, name: str, seconds: float, reason: str, who: str = "") -> None:
        """Write it down."""
        self.calls.append(("shelve", name, seconds, reason, who))

    def note(self, text: str, who: str = "") -> None:
        """Write it down."""
        self.calls.append(("note", text, who))

    def arm(self, who: str) -> None:
        """Write it down."""
        self.calls.append(("arm", who))

    def mark(self, depth: float, east: float, north: float, who: str = "") -> None:
        """Write it down."""
        self.calls.append(("mark", depth, east, north, who))


class AskedReplay(Asked, ReplayFeed):
    """A replay that only listens."""

    def play(self, *, on: bool | None = None) -> None:
        """Write it down."""
        self.calls.append(("play", on))

    def faster(self, factor: float) -> None:
        """Write it down."""
        self.calls.append(("faster", factor))

    def skip(self, seconds: float) -> None:
        """Write it down."""
        self.calls.append(("skip", seconds))

    def seek(self, moment: float) -> None:
        """Write it down."""
        self.calls.append(("seek", moment))

    def step(self) -> None:
        """Write it down."""
        self.calls.append(("step",))


def built(session: Session, feed: Asked | None = None, **look: Any) -> Dashboard:
    """Return the application with a source that only listens."""
    app = watch_app(session, **look)
    app.feed = app.first.feed = feed  # type: ignore[assignment, attr-defined]
    return app


def lines(app: Dashboard) -> list[str]:
    """Return the screen as text."""
    strips = app.screen._compositor.render_strips()
    return ["".join(segment.text for segment in strip) for strip in strips]


def text_of(app: Any) -> str:
    """Return the screen as one text."""
    return "\n".join(lines(app))


async def settled(pilot: Pilot[Any], *pressed: str) -> str:
    """Press keys, wait until no worker runs and the picture stands, and return the screen."""
    await pilot.press(*pressed)
    text, same = "", 0
    for _ in range(200):
        await pilot.app.workers.wait_for_complete()
        await pilot.pause()
        before, text = text, text_of(pilot.app)
        # What a worker found is painted a few messages later: the picture stands when it did three times over.
        same = same + 1 if text == before else 0
        if same == 3:
            break
    return text


async def shown(pilot: Pilot[Any], snapshot: Snapshot) -> list[str]:
    """Hand a snapshot in and return the screen."""
    pilot.app.take(snapshot)  # type: ignore[attr-defined]
    await pilot.pause()
    return lines(pilot.app)  # type: ignore[arg-type]


def watch(app: Dashboard) -> WatchScreen:
    """Return the watch screen."""
    assert isinstance(app.first, WatchScreen)
    return app.first
