"""The port trial: raw lines as they come, how a line form reads each, and a form proposed from them.

Nothing is recorded here. The port is opened by the program's own links, in a thread that `io.trial` keeps.
"""

from collections import deque
from collections.abc import Callable, Sequence
from dataclasses import replace
from typing import ClassVar

from rich.text import Text
from textual import work
from textual.app import ComposeResult
from textual.binding import BindingType
from textual.containers import Horizontal
from textual.widgets import Input, OptionList
from textual.widgets.option_list import Option

from eastfall.io.propose import Proposal, propose
from eastfall.io.safetext import safe
from eastfall.io.sitefile import LinkSettings, SiteFile
from eastfall.io.trial import KEPT, Heard, LineRead, LineReader, Trial
from eastfall.physics.errors import ParameterError
from eastfall.tui import keys
from eastfall.tui.roles import Role
from eastfall.tui.screens.dialogs import plain, shown_in
from eastfall.tui.widgets.cells import PaintedScreen
from eastfall.tui.widgets.choices import Choices
from eastfall.tui.widgets.line import KeyLine, Piece, TextLine
from eastfall.tui.widgets.trial import Reasons, TrialLines

Ports = Callable[[], Sequence[str]]
SPEEDS = (1200, 2400, 4800, 9600, 19200, 38400, 57600, 115200)
_DRAW = 0.1
_THINK = 10
"""Every so many pictures the lines are looked at anew for a form."""
_SILENT = 3.0
"""Seconds without a byte after which the screen says so."""
_STATES = {
    "opening": ("opening ...", Role.TEXT),
    "open": ("listening", Role.OK),
    "ended": ("the input has ended", Role.WARNING),
    "lost": ("no port", Role.ACTION),
    "closed": ("let go", Role.TEXT),
}


class PortTrial(PaintedScreen[LinkSettings | None]):
    """Listens to a port; closes with a form that was taken over, or None.

    Parameters
    ----------
    settings : LinkSettings, optional
        Port, speed and form to begin with; None has the lines read by the form that is proposed.
    site, index : optional
        For an `emulate:` link.
    ports : callable, optional
        Names the serial ports of this machine, one line each.
    """

    PLACES = ("trial",)
    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("trial"))
    VERTICAL_BREAKPOINTS = [(0, "-low"), (18, "-mid"), (32, "-tall")]  # noqa: RUF012
    CSS = """
    PortTrial #where { height: 1; }
    PortTrial #where Static { width: auto; }
    PortTrial Input { background: $panel; color: $foreground; }
    PortTrial Input:ansi { background: ansi_default; text-style: underline; }
    PortTrial Input:ansi > .input--cursor { background: ansi_default; color: ansi_default; text-style: reverse; }
    PortTrial #url { width: 1fr; }
    PortTrial #baud { width: 9; }
    PortTrial #trial-lines { display: none; }
    PortTrial.-listening #trial-lines { display: block; }
    PortTrial.-listening #ports { display: none; }
    PortTrial #counts { height: 1; }
    PortTrial #proposal { height: 10; }
    """

    def __init__(
        self,
        settings: LinkSettings | None = None,
        *,
        site: SiteFile | None = None,
        index: int = 0,
        ports: Ports | None = None,
    ) -> None:
        super().__init__()
        self._given = settings
        self._site, self._index, self._ports = site, index, ports
        self._trial: Trial | None = None
        self._by_proposal = settings is None
        self._held = False
        self._forget()

    def _forget(self) -> None:
        """Begin with no line."""
        self.proposal = Proposal(reasons=("no line has come yet",))
        self._reader: LineReader | None = None
        self._reads: deque[LineRead] = deque(maxlen=KEPT)
        self._read_by: LinkSettings | None = None
        self._seen = self._turn = 0
        self._news = False
        self._silent_since = 0.0

    def compose(self) -> ComposeResult:
        """Show what to open over what comes and what it may be."""
        yield TextLine(id="trial-title")
        with Horizontal(id="where"):
            yield plain("port ")
            yield _line("url", self._given.url if self._given else "")
            yield plain("  speed ")
            yield _line("baud", str(self._given.baud if self._given else 9600))
        yield TextLine(id="counts")
        yield Choices(id="ports")
        yield TrialLines(id="trial-lines")
        yield Reasons(id="proposal")
        yield KeyLine(id="keys")

    def on_mount(self) -> None:
        """Look for ports, and draw from now on."""
        self.query_one(OptionList).can_focus = False
        self.query_one("#url", Input).focus()
        self.set_interval(_DRAW, self._tick)
        self._look_for_ports()
        self._paint(None)

    def on_unmount(self) -> None:
        """Let go of the port, however the screen is left."""
        self._let_go()

    @property
    def listening(self) -> bool:
        """Whether a port is open, or being opened."""
        return self._trial is not None

    # Choosing.

    @work(thread=True, exclusive=True, exit_on_error=False)
    def _look_for_ports(self) -> None:
        try:
            found = list(self._ports()) if self._ports is not None else []
        except OSError as error:
            self.app.call_from_thread(self._show_ports, [], safe(str(error), 70))
            return
        self.app.call_from_thread(self._show_ports, found, "no serial port on this machine")

    def _show_ports(self, found: Sequence[str], otherwise: str) -> None:
        options = self.query_one(OptionList)
        options.clear_options()
        options.add_options(
            [Option(Text(shown_in(self.app, f"  {safe(one, 76)}")), id=f"port {one}") for one in found]
        )
        if not found:
            options.add_option(
                Option(Text(shown_in(self.app, f"  {otherwise}; type an address")), disabled=True)
            )

    def action_move(self, by: int) -> None:
        """Take the next port of the list, or the next speed, where the line for it has the keyboard."""
        if self.listening:
            return
        if self.query_one("#baud", Input).has_focus:
            self.action_speed(-by)
            return
        options = self.query_one(OptionList)
        (options.action_cursor_down if by > 0 else options.action_cursor_up)()
        chosen = options.highlighted_option
        if chosen is not None and chosen.id is not None:
            self._take_port(chosen.id)

    def on_option_list_option_selected(self, event: OptionList.OptionSelected) -> None:
        """Take the port that was clicked."""
        self._take_port(event.option_id or "")

    def _take_port(self, name: str) -> None:
        line = self.query_one("#url", Input)
        line.value = name.removeprefix("port ").split("  ")[0].strip()
        line.cursor_position = len(line.value)

    def action_speed(self, by: int) -> None:
        """Take another usual speed; a port that is open is opened again with it."""
        now = self._baud() or 9600
        if by > 0:
            following = next((one for one in SPEEDS if one > now), SPEEDS[0])
        else:
            following = next((one for one in reversed(SPEEDS) if one < now), SPEEDS[-1])
        self.query_one("#baud", Input).value = str(following)
        if self.listening:
            self._let_go()
            self._listen()

    def _baud(self) -> int | None:
        text = self.query_one("#baud", Input).value.strip()
        return int(text) if text.isdecimal() and 50 <= int(text[:8]) <= 4_000_000 else None

    def on_input_submitted(self, event: Input.Submitted) -> None:
        """Open the port."""
        event.stop()
        self._listen()

    # Listening.

    def _listen(self) -> None:
        url, baud = self.query_one("#url", Input).value.strip(), self._baud()
        if not url or baud is None:
            words = (
                "a port or an address is needed"
                if not url
                else "speed: expected a whole number from 50 to 4000000"
            )
            self._text("counts").show((words, Role.ACTION))
            return
        self._forget()
        self._held = False
        base = self._given or LinkSettings(url=url)
        self._trial = Trial(replace(base, url=url, baud=baud), self._site, self._index)
        self._trial.start()
        for one in self.query(Input):
            one.disabled = True
        self.set_class(True, "-listening")
        self._paint(self._trial.heard())

    def _let_go(self) -> None:
        if self._trial is None:
            return
        trial, self._trial = self._trial, None
        trial.stop()

    def _tick(self) -> None:
        if self._trial is None:
            return
        heard = self._trial.heard()
        self._take(heard)
        self._paint(heard)

    def _take(self, heard: Heard) -> None:
        """Read what is new; look for a form now and then, while there is something new."""
        new = min(heard.count - self._seen, len(heard.lines))
        if new or heard.pending:
            self._silent_since = heard.seconds
            self._news = True
        if self._turn % _THINK == 0 and self._news:
            self._news = False
            self.proposal = propose(heard.lines or ((heard.pending,) if heard.pending else ()), heard.rate)
        self._turn += 1
        form = self._form()
        if form != self._read_by:
            self._read_by, self._reader = form, _reader(form)
            self._reads.clear()
            new = len(heard.lines)
        self._seen = heard.count
        fresh = heard.lines[-new:] if new else ()
        if self._reader is not None:
            self._reads.extend(self._reader.read(fresh))
        else:
            self._reads.extend(LineRead(one, "unused", "not read: no form is known yet") for one in fresh)

    def _form(self) -> LinkSettings | None:
        """Return the form that the lines are read by."""
        if not self._by_proposal:
            return self._given
        return self.proposal.link("port", 9600)

    # What is shown.

    def _text(self, name: str) -> TextLine:
        return self.query_one(f"#{name}", TextLine)

    def _paint(self, heard: Heard | None) -> None:
        state = _STATES[heard.state] if heard is not None else ("choose a port", Role.TEXT)
        self._text("trial-title").show(
            ("port trial  ", Role.DIM), ("nothing is recorded here", Role.STRONG), right=(state,)
        )
        self.query_one(KeyLine).show(*self._keys())
        self.query_one(Reasons).show(*(self._suggestion() if heard is not None else _ADVICE))
        if heard is not None:
            self._text("counts").show(*self._counts(heard))
            if not self._held:
                self.query_one(TrialLines).show(tuple(self._reads), self._note(heard))

    def _keys(self) -> list[tuple[str, str]]:
        keymap = keys.keymap_of(self.app)
        if self.listening:
            idle = ("up", "other", "listen", *(() if self._given is not None else ("use",)))
            return keymap.line(*self.PLACES, without=idle)
        told = keymap.line(*self.PLACES, without=("speed", "use", "hold", "take", "close"))
        return [*told, (keymap["trial.close"], "back")]

    def _counts(self, heard: Heard) -> tuple[Piece, ...]:
        reader = self._reader
        good, bad, unused = (reader.good, reader.bad, reader.unused) if reader else (0, 0, 0)
        rate = heard.count / heard.seconds if heard.seconds > 0.0 else 0.0
        kinds = ", ".join(f"{kind} {n}" for kind, n in reader.faults.most_common(2)) if reader else ""
        return (
            (f"{heard.count} lines, {rate:.1f}/s   ", Role.TEXT),
            (f"good {good}   ", Role.OK),
            (f"bad {bad}", Role.ACTION if bad else Role.DIM),
            (f" ({kinds})" if kinds else "", Role.DIM),
            (f"   unused {unused}" if unused else "", Role.DIM),
            ("   held" if self._held else "", Role.WARNING),
        )

    def _note(self, heard: Heard) -> str:
        if heard.trouble:
            return heard.trouble
        if heard.pending:
            return f"no line end yet: {safe(heard.pending, 60)}"
        if heard.state == "open" and heard.seconds - self._silent_since > _SILENT:
            return f"nothing for {heard.seconds:.0f} s: is it switched on, is it this port, this speed?"
        return "waiting for the first line" if heard.state == "open" else ""

    def _suggestion(self) -> tuple[Piece, tuple[str, ...]]:
        by = "the proposed form" if self._by_proposal else "the site file's form"
        form = self.proposal.link("port", 9600)
        reasons = tuple(safe(one) for one in self.proposal.reasons)
        if form is None:
            return (f"Read by {by}. Nothing to propose yet:", Role.WARNING), reasons
        what = f"Proposed, to be checked: {form.form}, {', '.join(form.columns)}"
        if form.form == "columns":
            what += f"; delimiter {_named(form.delimiter)}; checksum {form.checksum}"
            what += "; decimal comma" if form.decimal == "comma" else ""
        return (f"Read by {by}. {safe(what)}", Role.MEASURED), reasons

    # What the keys do.

    def action_use(self) -> None:
        """Read by the other form, where one was given."""
        if self.listening and self._given is not None:
            self._by_proposal = not self._by_proposal

    def action_hold(self) -> None:
        """Hold the lines, or let them run on."""
        self._held = self.listening and not self._held

    def action_take(self) -> None:
        """Close with the proposed form."""
        if self._trial is None:
            return
        form = self.proposal.link(self._trial.settings.url, self._trial.settings.baud)
        if form is None:
            self.notify("nothing is proposed yet", markup=False, timeout=3)
            return
        self._let_go()
        self.dismiss(form)

    def action_close(self) -> None:
        """Let go of the port; without one, leave."""
        if not self.listening:
            self.dismiss(None)
            return
        self._let_go()
        self.set_class(False, "-listening")
        for one in self.query(Input):
            one.disabled = False
        self.query_one("#url", Input).focus()
        self._text("counts").show(("the port is free again", Role.TEXT))
        self._paint(None)


_ADVICE: tuple[Piece, tuple[str, ...]] = (
    ("Choose a port of the list, or type an address such as socket://10.0.0.7:4001.", Role.TEXT),
    (
        "The lines are shown as they come, each with how it is read.",
        "A line form is proposed from them; it can be taken over into a site file.",
        "Speed matters to serial ports only.",
    ),
)


def _line(name: str, value: str) -> Input:
    """Return a line to type in."""
    line = Input(value, id=name, compact=True, select_on_focus=False)
    line.cursor_blink = False
    return line


def _named(delimiter: str) -> str:
    return {" ": "blank", "\t": "tab"}.get(delimiter, delimiter)


def _reader(form: LinkSettings | None) -> LineReader | None:
    try:
        return LineReader(form) if form is not None else None
    except ParameterError:
        return None
