"""The start screen: the cautions, then what can be done from this folder; says what was chosen and starts nothing."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, ClassVar, Literal

from rich.text import Text
from textual import work
from textual.app import ComposeResult
from textual.binding import BindingType
from textual.containers import Vertical
from textual.widgets import OptionList
from textual.widgets.option_list import Option

from eastfall.io.cautions import CAUTIONS
from eastfall.io.safetext import safe
from eastfall.tui import keys
from eastfall.tui.screens.dialogs import plain, shown_in
from eastfall.tui.units import METRIC
from eastfall.tui.widgets.cells import PaintedScreen
from eastfall.tui.widgets.choices import Choices
from eastfall.tui.widgets.line import KeyLine
from eastfall.tui.words import size

if TYPE_CHECKING:
    from eastfall.physics.settings import Kind

RECENT = 8
"""Sites and runs listed, the newest first."""
_DEMO: "tuple[tuple[Kind, str], ...]" = (
    ("guided", "a probe run down guides and back up"),
    ("hung", "a plumb line swinging to rest"),
    ("drop", "bodies dropped from the collar"),
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Choice:
    """What the user wants to do."""

    what: Literal["demo", "watch", "replay", "explore"]
    path: Path | None = None
    kind: "Kind" = "guided"


_EXPLORED = 3
"""Sites offered to explore; any other by `eastfall expect SITE --explore`."""
Ports = Callable[[], Sequence[str]]


def recent(folder: Path, suffixes: tuple[str, ...]) -> list[Path]:
    """Return files of a folder and the folders right below it, the newest first, at most `RECENT`."""
    seen = (path for pattern in ("*", "*/*") for path in folder.glob(pattern))
    found = [one for one in seen if one.name.endswith(suffixes) and one.name[0] != "." and one.is_file()]
    return sorted(found, key=lambda one: (-one.stat().st_mtime, one.name))[:RECENT]


def looks_like_site(path: Path) -> bool:
    """Tell whether a TOML file has the section that every site file has; others are not listed."""
    try:
        with path.open("rb") as file:
            return b"[site]" in file.read(65536)
    except OSError:
        return False


class StartScreen(PaintedScreen[Choice | None]):
    """Cautions and a list of what to do.

    Parameters
    ----------
    folder : Path
        Where sites and runs are looked for.
    log_suffix : str
        How a run log's name ends.
    ports : callable, optional
        Names the serial ports of this machine, one line each.
    used : sequence of Path
        Site files used lately, the newest first.
    shelves : sequence of Path
        Folders of runs besides those here.
    """

    PLACES = ("start",)
    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("start"))

    def __init__(
        self,
        folder: Path,
        *,
        log_suffix: str,
        ports: Ports | None = None,
        used: Sequence[Path] = (),
        shelves: Sequence[Path] = (),
    ) -> None:
        super().__init__()
        self._used, self._shelves = used, shelves
        self._folder, self._suffix, self._ports = folder, log_suffix, ports
        self._choices: dict[str, Choice] = {}

    def compose(self) -> ComposeResult:
        """Show name, cautions, list and keys."""
        yield plain("eastfall   measured against expected in a deep shaft, on a turning Earth", "title")
        with Vertical(id="cautions"):
            yield plain("\n".join(CAUTIONS))
        yield Choices(*self._options(), id="start-list")
        yield KeyLine(id="keys")

    def on_mount(self) -> None:
        """Take the keys."""
        self.query_one(OptionList).focus()
        self.query_one(KeyLine).show(*keys.keymap_of(self.app).line("start", "all"))

    def _options(self) -> list[Option | None]:
        options: list[Option | None] = [self._head("Try it without an instrument")]
        options += [
            self._option(f"demo {kind}", f"demo, {what}", Choice(what="demo", kind=kind))
            for kind, what in _DEMO
        ]
        sites = self._sites()
        options.append(
            self._head("Watch live: site files" if sites else "Watch live: no site file in this folder")
        )
        options += [
            self._option(f"watch {path}", self._shown(path), Choice(what="watch", path=path))
            for path in sites
        ]
        options += [
            self._line("write a new site file", "new"),
            self._line(
                f"edit a site file (or {keys.keymap_of(self.app)['start.edit']} on one above)", "edit"
            ),
        ]
        logs = recent(self._folder, (self._suffix,))
        options.append(self._head("Replay: run logs here" if logs else "Replay: no run log in this folder"))
        options += [
            self._option(
                f"replay {path}",
                f"{self._shown(path)}  {size(path.stat().st_size)}",
                Choice(what="replay", path=path),
            )
            for path in logs
        ]
        options.append(self._line("the shelf: all runs, verdicts; compare two, write reports", "shelf"))
        options.append(self._head("Expect: change latitude, depth, body, wire, air; see the curves move"))
        options += [
            self._option(f"explore {path}", f"explore {self._shown(path)}", Choice(what="explore", path=path))
            for path in sites[:_EXPLORED]
        ]
        options.append(self._option("explore", "explore an invented shaft", Choice(what="explore")))
        if self._ports is not None:
            options += [
                self._head("Instruments"),
                self._line("try a port: raw lines, and how they read", "trial"),
                self._line("check the serial ports of this machine", "ports"),
            ]
        return options

    def _sites(self) -> list[Path]:
        """Return the site files of the folder, then those used lately elsewhere that are still there."""
        here = [path for path in recent(self._folder, (".toml",)) if looks_like_site(path)]
        known = {path.absolute() for path in here}
        return here + [path for path in self._used if path.absolute() not in known and looks_like_site(path)]

    def _shown(self, path: Path) -> str:
        inside = path.is_relative_to(self._folder)
        return safe(str(path.relative_to(self._folder) if inside else path), 60)

    def _option(self, name: str, words: str, choice: Choice) -> Option:
        self._choices[name] = choice
        return self._line(words, name)

    def _line(self, words: str, name: str) -> Option:
        return Option(Text(shown_in(self.app, f"  {words}")), id=name)

    def _head(self, words: str) -> Option:
        return Option(Text(shown_in(self.app, words), style="bold"), disabled=True)

    def on_option_list_option_selected(self, event: OptionList.OptionSelected) -> None:
        """Close with the choice, or look for ports."""
        if event.option_id == "ports":
            event.option_list.replace_option_prompt("ports", Text("  looking ..."))
            self._look_for_ports()
        elif event.option_id == "shelf":
            self._open_shelf()
        elif event.option_id in {"new", "edit", "trial"}:
            self._to_desk(event.option_id)
        elif event.option_id in self._choices:
            self.dismiss(self._choices[event.option_id])

    def _open_shelf(self) -> None:
        """Open the list of all runs of this folder, the folders right below it, and where runs are recorded."""
        from eastfall.tui.screens.shelf import ShelfScreen  # noqa: PLC0415 (the engine only where it runs)
        from eastfall.tui.shelf import folders  # noqa: PLC0415

        below = sorted(one for one in self._folder.glob("*") if one.is_dir() and one.name[0] != ".")
        where = folders(self._folder, *below, *self._shelves)
        self.app.push_screen(ShelfScreen(where, getattr(self.app, "units", METRIC)), self._taken)

    def _taken(self, log: Path | None) -> None:
        if log is not None:
            self.dismiss(Choice(what="replay", path=log))

    def _to_desk(self, what: str) -> None:
        """Open the site form or the port trial."""
        from eastfall.tui.screens import desk  # noqa: PLC0415 (what edits TOML is loaded only where it is used)

        if what == "new":
            desk.new_site(self.app, self._folder, self._ports, self._back)
        elif what == "trial":
            desk.try_port(self.app, self._folder, self._ports, self._back)
        else:
            sites = [one.path for one in self._choices.values() if one.what == "watch" and one.path]
            newest = self._shown(sites[0]) if sites else ""
            desk.ask_site(self.app, self._folder, newest, self._ports, self._back)

    def action_edit(self) -> None:
        """Edit the site file under the cursor."""
        option = self.query_one(OptionList).highlighted_option
        choice = self._choices.get(option.id or "") if option is not None else None
        if choice is not None and choice.what == "watch" and choice.path is not None:
            from eastfall.tui.screens import desk  # noqa: PLC0415 (as above)

            desk.edit_site(self.app, choice.path, self._ports, self._back)
        else:
            self._to_desk("edit")

    def _back(self, saved: Path | None) -> None:
        """List the files anew, the cursor on what was saved."""
        if saved is None:
            return
        options = self.query_one(OptionList)
        self._choices.clear()
        options.clear_options()
        options.add_options(self._options())
        if f"watch {saved}" in self._choices:
            options.highlighted = options.get_option_index(f"watch {saved}")

    @work(thread=True, exclusive=True, exit_on_error=False)
    def _look_for_ports(self) -> None:
        try:
            found = [safe(one, 76) for one in self._ports()] if self._ports is not None else []
        except OSError as error:
            found = [f"cannot list ports: {safe(str(error), 60)}"]
        words = "\n".join(f"  {one}" for one in found) or "  no serial port on this machine"
        self.app.call_from_thread(self._show_ports, words)

    def _show_ports(self, words: str) -> None:
        again = keys.keymap_of(self.app)["start.open"]
        self.query_one(OptionList).replace_option_prompt("ports", Text(f"{words}\n  ({again} looks again)"))
