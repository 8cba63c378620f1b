"""What if: other settings over a record, what differs from the recorded ones, and both outcomes; the record stays."""

from collections.abc import Callable
from dataclasses import replace
from functools import partial
from pathlib import Path
from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import BindingType
from textual.containers import Horizontal
from textual.message import Message

from eastfall.io.reduce import Reduction, reduce_file
from eastfall.io.replay import Replay
from eastfall.io.safetext import safe
from eastfall.io.sitefile import SiteFile, load_site
from eastfall.io.whatif import differences
from eastfall.physics.errors import EastfallError
from eastfall.tui import keys, whatif
from eastfall.tui.dials import Dial
from eastfall.tui.inputs import Inputs
from eastfall.tui.roles import Role
from eastfall.tui.screens.dialogs import AskText
from eastfall.tui.screens.inputs import InputScreen, Lines, typing
from eastfall.tui.units import METRIC, Units
from eastfall.tui.widgets.dials import DialList
from eastfall.tui.widgets.line import KeyLine, TextLine

_MOST_TOLD = 8


class WhatIfScreen(InputScreen):
    """Settings on the left, both outcomes on the right, the differences below.

    Parameters
    ----------
    path : Path
        The record.
    recorded : SiteFile
        The settings it was recorded with.
    used : SiteFile
        Those it is looked at with now.
    take_over : callable
        Takes the record under the settings on the screen, to be played on.
    units : Units
        Of the reader.
    """

    PLACES = ("whatif", "page")
    DIALS: ClassVar[tuple[Dial, ...]] = whatif.SETTINGS
    BINDINGS: ClassVar[list[BindingType]] = [
        *keys.bindings("whatif", "page"),
        *typing(),
    ]

    class Opened(Message):
        """The record stands ready under other settings."""

        def __init__(self, replay: Replay) -> None:
            super().__init__()
            self.replay = replay

    def __init__(
        self,
        path: Path,
        recorded: SiteFile,
        used: SiteFile,
        take_over: Callable[[Replay], None],
        units: Units = METRIC,
    ) -> None:
        super().__init__(Inputs(base=used.assumptions, units=units))
        self._path, self._recorded, self._base, self._take_over = path, recorded, used, take_over
        self._before: Reduction | None = None
        self.found: whatif.Outcomes | None = None

    def compose(self) -> ComposeResult:
        """Put the parts together."""
        yield TextLine(id="title")
        with Horizontal(id="middle"):
            yield DialList(id="dials")
            yield Lines(id="outcomes")
        yield Lines(id="apart")
        yield TextLine(id="help")
        yield KeyLine(id="keys")

    def site(self, inputs: Inputs) -> SiteFile:
        """Return the settings on the screen.

        Raises
        ------
        ValueError
            With one line, for a setting that is out of range or does not go with another.
        """
        return replace(self._base, assumptions=inputs.assumptions(self.DIALS))

    def work(self, inputs: Inputs) -> whatif.Outcomes:
        """Reduce the record under the settings; once also under the recorded ones."""
        site = self.site(inputs)
        try:
            if self._before is None:
                self._before = reduce_file(self._path, site=self._recorded)
            return whatif.Outcomes(recorded=self._before, used=reduce_file(self._path, site=site))
        except (EastfallError, OSError) as error:
            raise ValueError(safe(str(error), 200)) from error

    def take(self, found: object) -> None:
        """Keep the outcomes."""
        assert isinstance(found, whatif.Outcomes)  # noqa: S101 (what `work` returns)
        self.found = found

    def apart(self) -> tuple[str, ...]:
        """Return what differs from the recorded settings, a line each; empty for settings that cannot be used."""
        try:
            return whatif.told(differences(self._recorded, self.site(self.inputs)))
        except ValueError:
            return ()

    def paint(self) -> None:
        """Show all that is known."""
        if not self.is_mounted:
            return
        self.paint_inputs()
        self.query_one(KeyLine).show(*keys.keymap_of(self.app).line("whatif", "page", "all"))
        busy = "" if self.found is not None else "  working it out"
        self.query_one("#title", TextLine).show(
            ("what if  ", Role.STRONG),
            (safe(self._path.name, 60), Role.TEXT),
            right=(("the record stays as it is" + busy, Role.DIM),),
        )
        if self.found is not None:
            self.query_one("#outcomes", Lines).show(whatif.table(self.found, self.inputs.units))
        told = self.apart()
        head = f"differs from the recorded settings in {len(told)}" if told else "settings as recorded"
        more = (f"and {len(told) - _MOST_TOLD} more",) if len(told) > _MOST_TOLD else ()
        lines = (head, *told[:_MOST_TOLD], *more)
        apart = self.query_one("#apart", Lines)
        apart.styles.height = len(lines)
        apart.show(lines)

    def action_other_site(self) -> None:
        """Ask for another site file to look at the record with."""
        self.app.push_screen(AskText("Another site file", check=_site_at), self._other)

    def _other(self, text: str | None) -> None:
        if text is not None:
            site = _site_at(text)
            self._base = site if site.links else replace(site, links=self._recorded.links)
            self._fresh = True
            self.change(Inputs(base=self._base.assumptions, units=self.inputs.units))

    def restore_all(self) -> None:
        """Take all settings as they were recorded, also after another site file."""
        self._base, self._fresh = self._recorded, True
        self.change(Inputs(base=self._base.assumptions, units=self.inputs.units))

    def action_use(self) -> None:
        """Play the record on with these settings."""
        try:
            site = self.site(self.inputs)
        except ValueError:
            return  # the complaint is on the screen
        same = not differences(self._recorded, site)
        self.run_worker(
            partial(self._open, None if same else site), thread=True, exit_on_error=False, group="open"
        )

    def _open(self, site: SiteFile | None) -> None:
        try:
            self.post_message(self.Opened(Replay(self._path, site)))
        except (EastfallError, OSError) as error:
            self.post_message(self.Worked(self.inputs, ValueError(safe(str(error), 200))))

    def on_what_if_screen_opened(self, event: Opened) -> None:
        """Hand the record over and go back to it."""
        self._take_over(event.replay)
        self.dismiss(None)


def _site_at(text: str) -> SiteFile:
    """Read a site file.

    Raises
    ------
    ValueError
        With one line that says what is wrong with it.
    """
    try:
        return load_site(Path(text.strip()).expanduser())
    except EastfallError as error:
        raise ValueError(safe(str(error), 300)) from error
