"""The application: colours, glyphs, signals, and the entry points that the command line calls."""

import asyncio
import contextlib
import os
import signal
import sys
from collections.abc import Sequence
from dataclasses import replace
from typing import Any, ClassVar

from textual.app import App
from textual.binding import BindingType
from textual.css.query import NoMatches
from textual.driver import Driver
from textual.filter import LineFilter
from textual.message import Message
from textual.screen import Screen

from eastfall.io.safetext import safe
from eastfall.tui import keys
from eastfall.tui.feed import Feed, LiveFeed
from eastfall.tui.glyphs import BRAILLE, Glyphs
from eastfall.tui.plainfilter import PlainFilter
from eastfall.tui.preferences import Remembered
from eastfall.tui.replayfeed import ReplayFeed
from eastfall.tui.screens.dialogs import Confirm, shown_in
from eastfall.tui.screens.help import HelpScreen
from eastfall.tui.screens.settings import SettingsScreen
from eastfall.tui.screens.start import Choice
from eastfall.tui.screens.watch import WatchScreen
from eastfall.tui.session import Session
from eastfall.tui.store import Snapshot
from eastfall.tui.terminal import glyphs_for
from eastfall.tui.themes import MONO, THEMES
from eastfall.tui.units import UNITS, Units
from eastfall.tui.widgets.cells import CellWidget


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
    # For dialogs and pages; screens with pictures have their own.
    VERTICAL_BREAKPOINTS = [(0, "-tiny"), (16, "-roomy")]  # noqa: RUF012
    HORIZONTAL_BREAKPOINTS = [(0, "-slim"), (62, "-broad")]  # noqa: RUF012
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
        self._sieve = PlainFilter()
        self.muted = not self.remembered.now.sound
        changes, self._refused = keys.moved(self.remembered.now.keys)
        self.keys_now = keys.Keymap(changes)
        self.set_keymap(changes)
        self.first = first
        self.choice: Choice | None = None
        self.feed: Feed | None = None
        self.ends_after: float | None = None
        """Leave by itself after so long [s]."""
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

    def get_line_filters(self) -> Sequence[LineFilter]:
        """Have nothing beyond ASCII drawn, by whatever widget, where the terminal has plain letters only."""
        plain = (self._sieve,) if self.glyphs.name == "ascii" else ()
        return (*super().get_line_filters(), *plain)

    def _handle_exception(self, error: Exception) -> None:
        """Pass over a page that looks for its parts while the program ends: by then the library composes no more."""
        if not (self._exit and isinstance(error, NoMatches)):
            super()._handle_exception(error)

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
        if self.ends_after is not None:
            self.set_timer(self.ends_after, self.exit)

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

    def notify(self, message: str, **how: Any) -> None:
        """Say something for a while, in the letters of this terminal."""
        super().notify(shown_in(self, message), **how)

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
            kind = self.first.kind if isinstance(self.first, WatchScreen) else "guided"
            self.push_screen(HelpScreen(*places, replay=isinstance(self.feed, ReplayFeed), kind=kind))

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
