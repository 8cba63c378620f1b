"""The process behind one shared view: the watch screen over a record that it keeps up with; no key, no port.

It is started by the server with a browser at the other end, and leaves when the server is gone, however that went.
"""

import os
import sys
import threading
import time
from collections.abc import Callable
from pathlib import Path

import click
from textual import events
from textual.app import ComposeResult

from eastfall.io.replay import Replay
from eastfall.physics.errors import EastfallError
from eastfall.tui.app import Dashboard
from eastfall.tui.opening import since_start
from eastfall.tui.replayfeed import ReplayFeed
from eastfall.tui.roles import Role
from eastfall.tui.saying import say
from eastfall.tui.screens.watch import WatchScreen
from eastfall.tui.session import Session, replay_session
from eastfall.tui.terminal import glyphs_for, wants_no_colour
from eastfall.tui.themes import THEMES
from eastfall.tui.widgets.line import KeyLine, TextLine

THEME_NAMES = {one.name.removeprefix("eastfall-"): one.name for one in THEMES}
"""What a person calls a set of colours, and what the application does."""
_PERIOD = 0.5  # s between looks for the parent


class ViewScreen(WatchScreen, inherit_bindings=False):
    """The watch screen without a key."""

    FOOT = "view-only"

    def compose(self) -> ComposeResult:
        """Put a line that says so in place of the keys."""
        yield from super().compose()
        yield TextLine(id="view-only")

    def on_mount(self) -> None:
        """Write the line."""
        self.query_one(KeyLine).display = False
        said = ("view only ", Role.STRONG), ("keys work where the run is recorded", Role.DIM)
        self.query_one("#view-only", TextLine).show(*said)


class ViewFeed(ReplayFeed):
    """Keeps up with a record; without the second pass over it that jumping would need."""

    def _read_through(self) -> None:
        pass


class Viewer(Dashboard, inherit_bindings=False):
    """The dashboard for somebody who may only look.

    Parameters
    ----------
    session : Session
        What is known of the run.
    theme : str
        Name of one of the program's themes.
    """

    # Textual looks for it beside the module of the class.
    CSS_PATH = str(Path(__file__).parents[1] / "app.tcss")

    def __init__(self, session: Session, *, theme: str = THEMES[0].name) -> None:
        # Whose terminal this is started from says nothing of the browser: only what the user set counts.
        asked = {name: value for name, value in os.environ.items() if name == "EASTFALL_GLYPHS"}
        super().__init__(
            ViewScreen(session),
            glyphs=glyphs_for(asked, "utf-8"),
            theme=theme,
            no_colour=wants_no_colour(os.environ),
        )
        self.muted = True

    async def on_event(self, event: events.Event) -> None:
        """Drop keys, mouse and pasted text: the server does not pass them on, and here they would do nothing."""
        if not isinstance(event, events.InputEvent | events.Paste):
            await super().on_event(event)


def leave_with_parent(
    parent: int,
    *,
    leave: Callable[[int], object] = os._exit,
    parent_now: Callable[[], int] = os.getppid,
    period: float = _PERIOD,
) -> threading.Thread | None:
    """End this process when its parent is gone, whatever its main thread is doing.

    Parameters
    ----------
    parent : int
        Process number of the server.
    leave : callable
        Ends the process, given a status; at once, since a viewer has nothing to save.
    parent_now : callable
        The present parent.
    period : float
        Between two looks [s].

    Returns
    -------
    Thread or None
        The watch; None on Windows, where a process keeps the number of a parent that is gone.
    """
    if os.name != "posix":
        return None

    def watch() -> None:
        while parent_now() == parent:
            time.sleep(period)
        leave(0)

    thread = threading.Thread(target=watch, name="eastfall parent", daemon=True)
    thread.start()
    return thread


def view(log: Path, theme: str) -> None:
    """Show a record until the server says to leave.

    Raises
    ------
    EastfallError
        The record cannot be read.
    """
    replay = Replay(log, follow=True)
    app = Viewer(replay_session(replay), theme=theme)
    feed = ViewFeed(replay, app.take, now=since_start(replay))
    app.feed = feed
    try:
        app.run()
    finally:
        feed.close()
    if feed.failure is not None:
        raise feed.failure


@click.command()
@click.argument("log", type=click.Path(path_type=Path))
@click.option("--parent", type=int, required=True)
@click.option("--theme", type=click.Choice(list(THEME_NAMES)), default=next(iter(THEME_NAMES)))
def main(log: Path, parent: int, theme: str) -> None:
    """Draw one view of LOG for the server that started this."""
    leave_with_parent(parent)
    try:
        view(log, THEME_NAMES[theme])
    except EastfallError as error:
        say(f"eastfall: view: {error}", err=True)
        sys.exit(2)


if __name__ == "__main__":
    main()
