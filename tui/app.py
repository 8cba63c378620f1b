"""The application: colours, glyphs, signals, and the entry points that the command line calls."""

import asyncio
import contextlib
import os
import signal
import sys
from collections.abc import Callable
from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING, ClassVar

from textual.app import App
from textual.binding import BindingType
from textual.driver import Driver
from textual.message import Message
from textual.screen import Screen

from eastfall.io.logformat import SUFFIX
from eastfall.io.safetext import safe
from eastfall.tui import keys
from eastfall.tui.feed import Feed, LiveFeed, ReplayFeed
from eastfall.tui.glyphs import BRAILLE, Glyphs
from eastfall.tui.preferences import Remembered
from eastfall.tui.screens.dialogs import Confirm
from eastfall.tui.screens.help import HelpScreen
from eastfall.tui.screens.settings import SettingsScreen
from eastfall.tui.screens.start import Choice, Ports, StartScreen
from eastfall.tui.screens.watch import WatchScreen
from eastfall.tui.session import Session, curves_of, replay_session
from eastfall.tui.store import Snapshot
from eastfall.tui.terminal import glyphs_for, refuse_unless_screen, wants_no_colour
from eastfall.tui.themes import MONO, THEMES
from eastfall.tui.units import UNITS, Units
from eastfall.tui.widgets.cells import CellWidget

if TYPE_CHECKING:
    from eastfall.io.replay import Replay
    from eastfall.io.run import Run
    from eastfall.io.sitefile import SiteFile
    from eastfall.physics.expected import ExpectedCurve


class Picture(Message):
    """A newer snapshot is there."""


class Dashboard(App[int]):
    """What all screens share.

    Parameters
    ----------
    first : Screen
        The screen to begin with.
    glyphs : Glyphs
        How this terminal shows dots.
    theme : str, optional
        Name of one of the program's themes; as remembered by default.
    no_colour : bool
        Keep every colour code out of the output.
    remembered : Remembered, optional
        The person's settings; the defaults, and nothing kept, without.
    """

    CSS_PATH = "app.tcss"
    TITLE = "eastfall"
    ENABLE_COMMAND_PALETTE = False
    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("all"))

    def __init__(
        self,
        first: Screen[Choice | None] | Screen[None],
        *,
        glyphs: Glyphs = BRAILLE,
        theme: str | None = None,
        no_colour: bool = False,
        remembered: Remembered | None = None,
    ) -> None:
        # Textual picks its colour filter here, before a theme of ours can be set: ansi mode sends none of its own.
        super().__init__(ansi_color=True if no_colour else None)
        for one in THEMES:
            self.register_theme(one)
        self.remembered = remembered or Remembered()
        self.theme = MONO.name if no_colour else theme or theme_named(self.remembered.now.theme)
        self.glyphs = glyphs
        self.set_class(glyphs.name == "ascii", "-ascii")
        self.muted = not self.remembered.now.sound
        self.key_changes, self._refused = keys.moved(self.remembered.now.keys)
        self.set_keymap(self.key_changes)
        self.first = first
        self.choice: Choice | None = None
        self.feed: Feed | None = None
        self._no_colour = no_colour
        self._newest: Snapshot | None = None
        self._told = False

    def get_driver_class(self) -> type[Driver]:
        """Take the driver that outlives a closed window wherever the stock one of POSIX would be taken."""
        found = super().get_driver_class()
        if found.__name__ != "LinuxDriver":
            return found
        from eastfall.tui.driver import PatientDriver  # noqa: PLC0415 (POSIX alone has what it imports)

        return PatientDriver

    def on_mount(self) -> None:
        """Leave cleanly on the signals that Textual does not catch, then show the first screen."""
        loop = asyncio.get_running_loop()
        for name in ("SIGTERM", "SIGHUP"):
            number = getattr(signal, name, None)
            if number is not None:
                with contextlib.suppress(NotImplementedError, RuntimeError, ValueError):
                    loop.add_signal_handler(number, self.exit, 0)
        self.push_screen(self.first, self._chosen)
        for complaint in filter(None, (self.remembered.complaint, *self._refused)):
            self.notify(safe(complaint), markup=False, severity="warning", timeout=10)
        if self.feed is not None:
            self.feed.start()

    def _chosen(self, choice: Choice | None) -> None:
        """Leave with what the start screen was closed with."""
        self.choice = choice
        self.exit(0)

    def take(self, snapshot: Snapshot) -> None:
        """Keep the newest snapshot and tell the screen, unless it is told already; called by the worker."""
        self._newest = snapshot
        if not self._told:
            self._told = True
            self.post_message(Picture())

    def on_picture(self) -> None:
        """Hand the newest snapshot to the watch screen."""
        self._told = False
        if self._newest is not None and isinstance(self.first, WatchScreen):
            self.first.show(self._newest)

    def action_theme(self) -> None:
        """Take the next set of colours."""
        if not self._no_colour:
            names = [one.name for one in THEMES]
            self.theme = names[(names.index(self.theme) + 1) % len(names)]
            self.remember(theme=theme_word(self.theme))

    @property
    def units(self) -> Units:
        """What lengths are shown in."""
        return UNITS[self.remembered.now.units]

    @property
    def cell_aspect(self) -> float:
        """Height of a character cell over its width."""
        return self.remembered.now.cell_aspect

    def remember(self, **settings: object) -> None:
        """Change settings and keep them; say so when they cannot be kept."""
        complaint = self.remembered.change(**settings)
        if complaint:
            self.notify(complaint, markup=False, severity="warning", timeout=6)

    def action_mute(self) -> None:
        """Turn the sound off or on."""
        self.muted = not self.muted
        self.remember(sound=not self.muted)
        self.notify("sound off" if self.muted else "sound on", markup=False, timeout=2)

    def action_settings(self) -> None:
        """Open the settings; a dialog has none."""
        if not self.screen.is_modal and not isinstance(self.screen, SettingsScreen):
            self.push_screen(SettingsScreen(self.remembered, self._set))

    def _set(self, name: str, value: object) -> None:
        """Take a changed setting at once, as far as the screens in front can."""
        self.remember(**{name: value})
        if name == "theme" and not self._no_colour:
            self.theme = theme_named(self.remembered.now.theme)
        self.muted = not self.remembered.now.sound
        if name == "glyphs":
            # While a screen is open the library stands in for stdout.
            encoding = getattr(sys.__stdout__, "encoding", None)
            self.glyphs = glyphs_for(os.environ, encoding, self.remembered.now.glyphs)
            self.set_class(self.glyphs.name == "ascii", "-ascii")
        if isinstance(self.first, WatchScreen):
            self.first.session = replace(self.first.session, units=self.units)
        for screen in self.screen_stack:
            reckon_in = getattr(screen, "reckon_in", None)
            if name == "units" and reckon_in is not None:
                reckon_in(self.units)
            for widget in screen.query(CellWidget):
                widget.redraw()

    def action_keys(self) -> None:
        """Open the help page of the screen in front; a dialog or the help page itself has none."""
        if not self.screen.is_modal and not isinstance(self.screen, HelpScreen):
            places: tuple[str, ...] = getattr(self.screen, "PLACES", ())
            self.push_screen(
                HelpScreen(*places, replay=isinstance(self.feed, ReplayFeed), changes=self.key_changes)
            )

    def action_leave(self) -> None:
        """Leave; a run that is being recorded is asked about first."""
        if isinstance(self.feed, LiveFeed) and self.feed.running:
            self.push_screen(
                Confirm("Stop recording and leave?", "The record so far is kept. The instrument is let go."),
                self._left,
            )
        elif any(getattr(one, "unsaved", False) for one in self.screen_stack):
            self.push_screen(
                Confirm("Leave without saving?", "What was typed into the site file is lost."), self._left
            )
        else:
            self.exit(0)

    async def action_quit(self) -> None:
        """Leave as by the key of the table: the library's own ctrl+q would not ask."""
        self.action_leave()

    def _left(self, sure: bool | None) -> None:
        if sure:
            self.exit(0)


def watch_app(session: Session, **look: object) -> Dashboard:
    """Return the application on a watch screen; its feed is set by the caller."""
    session = replace(session, units=UNITS[settings_of(look).now.units])
    return Dashboard(WatchScreen(session), **look)  # type: ignore[arg-type]  # the caller names Dashboard's arguments


def settings_of(look: dict[str, object]) -> Remembered:
    """Return the settings that a look comes with; the defaults without any."""
    found = look.get("remembered")
    return found if isinstance(found, Remembered) else Remembered()


def theme_named(word: str) -> str:
    """Return the theme's name for a word of the settings."""
    return _THEME_OF[word]


def theme_word(name: str) -> str:
    """Return the word of the settings for a theme's name."""
    return next(word for word, one in _THEME_OF.items() if one == name)


_THEME_OF = dict(zip(("dark", "light", "none"), (one.name for one in THEMES), strict=True))


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


def run_live(
    site: "SiteFile", *, run: "Run", curve: "ExpectedCurve | None" = None, theme: str | None = None
) -> int:
    """Show a live run until the user leaves.

    Parameters
    ----------
    site : SiteFile
        What the run rests on.
    run : Run
        Not yet started; it is started, stepped and stopped here.
    curve : ExpectedCurve, optional
        For where a bob would hang and a dropped body would be.
    theme : str, optional
        Name of a theme.

    Returns
    -------
    int
        Exit status.

    Raises
    ------
    InputError
        When this terminal has no screen; or what stopped the run before its first reading.
    """
    look = terminal_look() | ({"theme": theme} if theme else {})
    bob, fall = curves_of(curve or run.pipeline.survey.curve)
    session = Session(
        assumptions=site.assumptions, mode="live", title=safe(site.assumptions.site.name), bob=bob, fall=fall
    )
    app = watch_app(session, **look)
    if Path(site.path).is_file():
        app.remembered.used(Path(site.path))
    return _shown(app, LiveFeed(run, app.take))


def run_replay(
    replay: "Replay", *, speed: float = 1.0, curve: "ExpectedCurve | None" = None, theme: str | None = None
) -> int:
    """Show a record until the user leaves.

    Parameters
    ----------
    replay : Replay
        At its beginning.
    speed : float
        Record seconds per second.
    curve : ExpectedCurve, optional
        For where a bob would hang and a dropped body would be.
    theme : str, optional
        Name of a theme.

    Returns
    -------
    int
        Exit status.

    Raises
    ------
    InputError
        When this terminal has no screen, or the record cannot be read.
    """
    look = terminal_look() | ({"theme": theme} if theme else {})
    session = replay_session(replay, curve)
    app = watch_app(session, **look)
    return _shown(app, ReplayFeed(replay, app.take, speed=speed, now=since_start(replay)))


def since_start(replay: "Replay") -> Callable[[], float] | None:
    """Return a clock that tells the seconds since a run that is still being recorded started; None for any other."""
    started = replay.recording.started_at
    if not replay.follow or started is None:
        return None

    def seconds() -> float:
        return (datetime.now(UTC) - started).total_seconds()

    return seconds


def _shown(app: Dashboard, feed: Feed) -> int:
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


def run_explorer(site: "SiteFile", *, theme: str | None = None) -> int:
    """Show the prediction explorer of a site until the user leaves.

    Parameters
    ----------
    site : SiteFile
        What the inputs begin with.
    theme : str, optional
        Name of a theme.

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

    look = terminal_look() | ({"theme": theme} if theme else {})
    units = UNITS[settings_of(look).now.units]
    screen = ExplorerScreen(site.assumptions, name=safe(site.assumptions.site.name), units=units)
    app = Dashboard(screen, **look)  # type: ignore[arg-type]  # as in watch_app
    return app.run() or app.return_code or 0


def run_start(
    act: Callable[[Choice], int] | None = None,
    *,
    folder: Path | None = None,
    ports: Ports | None = None,
    theme: str | None = None,
) -> int:
    """Show the start screen, do what is chosen, and come back to it until the user leaves.

    Parameters
    ----------
    act : callable, optional
        Does what was chosen (demo, watch, replay) with the terminal free for it, and returns an exit status; the verb
        of that name by default.
    folder : Path, optional
        Where sites and runs are looked for; the current folder.
    ports : callable, optional
        Names the serial ports of this machine, one line each; as pyserial lists them by default.
    theme : str, optional
        Name of a theme.

    Returns
    -------
    int
        Exit status of what was done last; 0 when nothing was.

    Raises
    ------
    InputError
        When this terminal has no screen; or what `act` raises.
    """
    status, act = 0, act or by_verb
    while True:
        # Read anew each time round: what was done in between may have changed the settings.
        look = terminal_look() | ({"theme": theme} if theme else {})
        used = [Path(one) for one in settings_of(look).now.recent_sites]
        kept = settings_of(look).now.runs_folder
        screen = StartScreen(
            folder or Path.cwd(),
            log_suffix=SUFFIX,
            ports=ports or port_names,
            used=used,
            shelves=[Path(kept).expanduser()] if kept else [],
        )
        app = Dashboard(screen, **look)  # type: ignore[arg-type]  # as in watch_app
        app.run()
        if app.choice is None:
            return status
        status = act(app.choice)


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
