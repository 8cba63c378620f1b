"""What the command line calls: the dashboard opened on a run, a record, a site or nothing yet, and closed again."""

import os
import sys
from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING

from eastfall.io.logformat import SUFFIX
from eastfall.io.safetext import safe
from eastfall.tui.app import Dashboard, settings_of, watch_app
from eastfall.tui.feed import Feed, LiveFeed
from eastfall.tui.preferences import Remembered
from eastfall.tui.replayfeed import ReplayFeed
from eastfall.tui.screens.start import Choice, StartScreen
from eastfall.tui.screens.watch import WatchScreen
from eastfall.tui.session import Session, curves_of, replay_session
from eastfall.tui.terminal import glyphs_for, refuse_unless_screen, wants_no_colour
from eastfall.tui.units import UNITS

if TYPE_CHECKING:
    from eastfall.io.replay import Replay
    from eastfall.io.run import Run
    from eastfall.io.sitefile import SiteFile


def terminal_look() -> dict[str, object]:
    """Return glyphs and colours that fit this terminal, or refuse it.

    Raises
    ------
    InputError
        When there is no screen to draw on.
    """
    refuse_unless_screen(os.environ, is_terminal=sys.stdin.isatty() and sys.stdout.isatty())
    remembered = Remembered.of(os.environ)
    return {
        "glyphs": glyphs_for(os.environ, sys.stdout.encoding, remembered.now.glyphs),
        "no_colour": wants_no_colour(os.environ),
        "remembered": remembered,
    }


def run_live(site: "SiteFile", *, run: "Run", seconds: float | None = None) -> int:
    """Show a live run until the user leaves.

    Parameters
    ----------
    site : SiteFile
        What the run rests on.
    run : Run
        Not yet started; it is started, stepped and stopped here.
    seconds : float, optional
        Leave by itself after so long.

    Returns
    -------
    int
        Exit status.

    Raises
    ------
    InputError
        When this terminal has no screen; or what stopped the run before its first reading.
    """
    look = terminal_look()
    bob, fall = curves_of(run.pipeline.survey.curve)
    session = Session(
        assumptions=site.assumptions, mode="live", title=safe(site.assumptions.site.name), bob=bob, fall=fall
    )
    app = watch_app(session, **look)
    app.ends_after = seconds
    if Path(site.path).is_file():
        app.remembered.used(Path(site.path))
    return shown_over(app, LiveFeed(run, app.take))


def run_replay(replay: "Replay", *, speed: float = 1.0) -> int:
    """Show a record until the user leaves.

    Parameters
    ----------
    replay : Replay
        At its beginning.
    speed : float
        Record seconds per second.

    Returns
    -------
    int
        Exit status.

    Raises
    ------
    InputError
        When this terminal has no screen, or the record cannot be read.
    """
    look = terminal_look()
    session = replay_session(replay)
    app = watch_app(session, **look)
    return shown_over(app, ReplayFeed(replay, app.take, speed=speed, now=since_start(replay)))


def since_start(replay: "Replay") -> Callable[[], float] | None:
    """Return a clock that tells the seconds since a run that is still being recorded started; None for any other."""
    started = replay.recording.started_at
    if not replay.follow or started is None:
        return None

    def seconds() -> float:
        return (datetime.now(UTC) - started).total_seconds()

    return seconds


def shown_over(app: Dashboard, feed: Feed) -> int:
    """Run the application over a feed, and let go of the source whatever happens."""
    app.feed = feed
    if isinstance(app.first, WatchScreen):
        app.first.feed = feed
    try:
        status = app.run()
    finally:
        feed.close()
    if feed.failure is not None:
        raise feed.failure
    return status if status is not None else app.return_code or 0


def run_explorer(site: "SiteFile") -> int:
    """Show the prediction explorer of a site until the user leaves.

    Parameters
    ----------
    site : SiteFile
        What the inputs begin with.

    Returns
    -------
    int
        Exit status.

    Raises
    ------
    InputError
        When this terminal has no screen.
    """
    from eastfall.tui.screens.explorer import ExplorerScreen  # noqa: PLC0415 (the models only where asked for)

    look = terminal_look()
    units = UNITS[settings_of(look).now.units]
    screen = ExplorerScreen(site.assumptions, name=safe(site.assumptions.site.name), units=units)
    app = Dashboard(screen, **look)  # type: ignore[arg-type]  # as in watch_app
    return app.run() or app.return_code or 0


def run_start() -> int:
    """Show the start screen, do what is chosen with the terminal free for it, and come back until the user leaves.

    Returns
    -------
    int
        Exit status of what was done last; 0 when nothing was.

    Raises
    ------
    InputError
        When this terminal has no screen; or what the verb that was chosen raises.
    """
    status = 0
    while True:
        # Read anew each time round: what was done in between may have changed the settings.
        look = terminal_look()
        used = [Path(one) for one in settings_of(look).now.recent_sites]
        kept = settings_of(look).now.runs_folder
        screen = StartScreen(
            Path.cwd(),
            log_suffix=SUFFIX,
            ports=port_names,
            used=used,
            shelves=[Path(kept).expanduser()] if kept else [],
        )
        app = Dashboard(screen, **look)  # type: ignore[arg-type]  # as in watch_app
        app.run()
        if app.choice is None:
            return status
        status = by_verb(app.choice)


def by_verb(choice: Choice) -> int:
    """Do what was chosen as the command line would."""
    from eastfall.tui.main import cli  # noqa: PLC0415 (the command line imports this module)

    if choice.what == "explore":
        from eastfall.io.emulator import demo_site  # noqa: PLC0415
        from eastfall.io.sitefile import load_site  # noqa: PLC0415

        return run_explorer(load_site(choice.path) if choice.path else demo_site("drop"))
    arguments = ["demo", "--kind", choice.kind] if choice.what == "demo" else [choice.what, str(choice.path)]
    status = cli.main(arguments, standalone_mode=False)
    return status if isinstance(status, int) else 0


def port_names() -> list[str]:
    """Return the serial ports of this machine, each with what is known of it."""
    from serial.tools.list_ports import comports  # noqa: PLC0415 (only when asked)

    return [f"{one.device}  {one.description}" for one in sorted(comports())]
