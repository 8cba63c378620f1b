"""The site form: every key of a site file, checked as it is typed, saved with the user's comments and order kept.

The line that is typed in always has the keyboard: up and down take another key, page up and down another section.
What is wrong is said by `io.sitefile` alone.
"""

from collections.abc import Callable, Sequence
from pathlib import Path
from typing import ClassVar

from textual import on
from textual.app import ComposeResult
from textual.binding import BindingType
from textual.containers import Horizontal

from eastfall.io.errors import OutputError, SiteFileError
from eastfall.io.outputs import write_text
from eastfall.io.safetext import safe
from eastfall.io.siteedit import NEW_SITE, SiteDraft, changed_since, open_draft, take_link
from eastfall.io.sitefile import LinkSettings, SiteFile, parse_site
from eastfall.io.sitevalues import headings, key_of, shape, typed
from eastfall.tui import formpages, keys
from eastfall.tui.roles import Role
from eastfall.tui.screens.dialogs import Confirm
from eastfall.tui.screens.formdialogs import AskName, RowsDialog, free_name
from eastfall.tui.screens.porttrial import PortTrial
from eastfall.tui.widgets.cells import PaintedScreen
from eastfall.tui.widgets.formrow import KeyList, KeyRow, RowList, SectionList, ValueInput
from eastfall.tui.widgets.line import KeyLine, TextLine

Ports = Callable[[], Sequence[str]]


class SiteForm(PaintedScreen[Path | None]):
    """A form over one site file; closes with the path it was saved under, or None.

    Parameters
    ----------
    draft : SiteDraft
        The text to begin with.
    path : Path, optional
        The file that it came from; None for a new one.
    folder : Path
        Where a new file goes.
    ports : callable, optional
        Names the serial ports, for the port trial.
    """

    PLACES = ("form",)
    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("form"))
    CSS = """
    SiteForm #form { height: 1fr; }
    SiteForm #sections { width: 16; }
    SiteForm #edit { height: 1; }
    SiteForm #edit-name { width: 30; }
    SiteForm #edit-unit { width: 10; }
    SiteForm #value { width: 1fr; background: $panel; color: $foreground; }
    SiteForm #value:ansi { background: ansi_default; text-style: underline; }
    SiteForm #value:ansi > .input--cursor { background: ansi_default; color: ansi_default; text-style: reverse; }
    SiteForm #about { height: 3; }
    SiteForm #fault { height: 2; }
    """

    def __init__(
        self, draft: SiteDraft, *, path: Path | None = None, folder: Path, ports: Ports | None = None
    ) -> None:
        super().__init__()
        self.draft = draft
        self._path, self._folder, self._ports = path, folder, ports
        self._kept = draft.text
        self._saved: Path | None = None
        self._faults: dict[str, str] = {}
        self._page = self._row = 0

    @classmethod
    def new(cls, folder: Path, *, ports: Ports | None = None) -> "SiteForm":
        """Return a form over a new site file."""
        return cls(SiteDraft(NEW_SITE, "site file"), folder=folder, ports=ports)

    @classmethod
    def over(cls, path: Path, *, ports: Ports | None = None) -> "SiteForm":
        """Return a form over a file that stands.

        Raises
        ------
        SiteFileError
            When it cannot be read, or is no TOML.
        """
        return cls(open_draft(path), path=path, folder=path.parent, ports=ports)

    @property
    def unsaved(self) -> bool:
        """Whether there is something that leaving would lose."""
        return self.draft.text != self._kept

    def compose(self) -> ComposeResult:
        """Show sections and keys over the line that is typed in."""
        yield TextLine(id="form-title")
        with Horizontal(id="form"):
            yield SectionList(id="sections")
            yield KeyList(id="form-keys")
        with Horizontal(id="edit"):
            yield TextLine(id="edit-name")
            yield ValueInput(id="value")
            yield TextLine(id="edit-unit")
        yield TextLine(id="about")
        yield TextLine(id="fault")
        yield KeyLine(id="keys")

    def on_mount(self) -> None:
        """Take the keys."""
        self.query_one(KeyLine).show(*keys.keymap_of(self.app).line(*self.PLACES))
        self.query_one(ValueInput).focus()
        self._load()

    # What is shown.

    @property
    def pages(self) -> list[formpages.Page]:
        """What the section list holds."""
        return formpages.pages(self.draft)

    @property
    def page(self) -> formpages.Page:
        """The section in view."""
        found = self.pages
        self._page = min(self._page, len(found) - 1)
        return found[self._page]

    @property
    def key_path(self) -> str:
        """The key that is typed in; empty where there is none."""
        paths = self.page.paths
        self._row = max(0, min(self._row, len(paths) - 1))
        return paths[self._row] if paths else ""

    def _load(self) -> None:
        """Let the line stand for the key under the cursor."""
        path = self.key_path
        key = key_of(path) if path else None
        text = formpages.one_line(path, self.draft.value(path)) if path else ""
        keymap = keys.keymap_of(self.app)
        hint = formpages.hint(path, keymap) if path else f"{keymap['form.open']} adds a link"
        self.query_one(ValueInput).load(path, text, hint, key.choices if key else ())
        self.paint()

    def paint(self) -> None:
        """Judge the draft and show everything anew."""
        self._faults = self.draft.faults()
        page, path = self.page, self.key_path
        with self.app.batch_update():
            self._paint_title()
            shown = formpages.section_rows(self.draft, self.pages, self._faults)
            self.query_one(SectionList).show(shown, self._page)
            full = page.label == formpages.FIRST
            rows = tuple(formpages.key_row(self.draft, one, self._faults, full=full) for one in page.paths)
            nothing = (KeyRow(name=f"{keys.keymap_of(self.app)['form.open']} adds a link", value=""),)
            self.query_one(KeyList).show(rows or nothing, self._row)
            self._line("edit-name").show((safe(path, 29), Role.STRONG))
            key = key_of(path) if path else None
            self._line("edit-unit").show((f" {key.unit}" if key else "", Role.TEXT))
            self._line("about").show((formpages.about(path) if path else "", Role.TEXT))
            self._line("fault").show(*self._verdict(path))

    def _line(self, name: str) -> TextLine:
        return self.query_one(f"#{name}", TextLine)

    def _paint_title(self) -> None:
        name = safe(self._path.name, 40) if self._path else "new site file"
        count = len(self._faults)
        state = (
            "not saved"
            if self.unsaved
            else "saved"
            if self._saved
            else "as in the file"
            if self._path
            else "new"
        )
        verdict = (f"{count} to mend", Role.ACTION) if count else ("no fault", Role.OK)
        self._line("form-title").show(
            ("site form  ", Role.DIM), (name, Role.STRONG), right=((f"{state}   ", Role.TEXT), verdict)
        )

    def _verdict(self, path: str) -> tuple[tuple[str, Role], ...]:
        if path in self._faults:
            return ((f"! {safe(self._faults[path], 300)}", Role.ACTION),)
        if self._faults:
            other = next(iter(self._faults.values()))
            return (("elsewhere: ", Role.WARNING), (safe(other, 280), Role.DIM))
        return (("no fault: this file can be used", Role.OK),)

    # What the keys do.

    def on_value_input_typed(self, event: ValueInput.Typed) -> None:
        """Take what was typed, and judge it."""
        if event.path in self.page.paths:
            self.draft.put_typed(event.path, event.text)
            self.paint()

    def _take(self) -> None:
        """Take what stands in the line: its message may still be on the way."""
        line = self.query_one(ValueInput)
        if line.path and line.value != formpages.one_line(line.path, self.draft.value(line.path)):
            self.draft.put_typed(line.path, line.value)

    def _go(self, page: int, row: int) -> None:
        self._take()
        self._page, self._row = page % len(self.pages), row
        self._load()

    def action_move(self, by: int) -> None:
        """Take another key of the section."""
        self._go(self._page, (self._row + by) % max(1, len(self.page.paths)))

    def action_page(self, by: int) -> None:
        """Take another section."""
        self._go(self._page + by, 0)

    @on(RowList.Chosen, "#sections")
    def _section_chosen(self, event: RowList.Chosen) -> None:
        """Take the section that was clicked."""
        self._go(event.row, 0)
        self.query_one(ValueInput).focus()

    @on(RowList.Chosen, "#form-keys")
    def _key_chosen(self, event: RowList.Chosen) -> None:
        """Take the key that was clicked."""
        self._go(self._page, event.row)
        self.query_one(ValueInput).focus()

    def action_enter(self) -> None:
        """Open the rows, add a link, or take the next key."""
        path = self.key_path
        if not path:
            self.action_add_link()
        elif shape(path) == "rows":
            self._open_rows(path)
        else:
            self.action_move(1)

    def _open_rows(self, path: str) -> None:
        self._take()
        before = self.draft.value(path)

        def check(text: str) -> str:
            self.draft.put_typed(path, text)
            return self.draft.faults().get(path, "")

        def taken(text: str | None) -> None:
            if text is None:
                self.draft.put(path, before)
            else:
                self.draft.put_typed(path, text)
            self._load()

        self.app.push_screen(RowsDialog(path, headings(path), typed(path, before), check), taken)

    def action_next_fault(self) -> None:
        """Go to the next key that is at fault."""
        self._take()
        places = [(number, row) for number, page in enumerate(self.pages) for row in self._wrong(page)]
        here = (self._page, self._row)
        following = [one for one in places if one > here] or places
        if following:
            self._go(*following[0])

    def _wrong(self, page: formpages.Page) -> list[int]:
        return [row for row, path in enumerate(page.paths) if path in self._faults]

    def action_add_link(self) -> None:
        """Add a link and go to it."""
        self._take()
        self.draft.add_link()
        self._go(len(self.pages) - 2, 0)

    def action_remove_link(self) -> None:
        """Ask, then take the link in view out."""
        index = self.page.index
        if index is not None:
            self._take()
            self.app.push_screen(
                Confirm(f"Take link {index + 1} out?", "Its keys go out of the form."), self._removed
            )

    def _removed(self, sure: bool | None) -> None:
        index = self.page.index
        if sure and index is not None:
            self.draft.remove_link(index)
            self.query_one(ValueInput).path = ""
            self._load()

    # The port.

    def action_port(self) -> None:
        """Listen to the port of the link in view; the form it proposes can be taken over."""
        self._take()
        index = self.page.index or 0
        site = self._site()
        now = site.links[index] if site is not None and index < len(site.links) else self._link(index)
        self.app.push_screen(PortTrial(now, site=site, index=index, ports=self._ports), self._heard)

    def _site(self) -> SiteFile | None:
        try:
            return parse_site(self.draft.text, self.draft.source)
        except SiteFileError:
            return None

    def _link(self, index: int) -> LinkSettings | None:
        """Return as much as can be known of a link while the file has faults elsewhere."""
        url = self.draft.value(f"link[{index}].url") if index < self.draft.links else None
        return LinkSettings(url=url) if isinstance(url, str) else None

    def _heard(self, settings: LinkSettings | None) -> None:
        if settings is None:
            return
        index = self.page.index or 0
        if index >= self.draft.links:
            self.draft.add_link()
        take_link(self.draft, index, settings)
        self.query_one(ValueInput).path = ""
        self._page = next(number for number, one in enumerate(self.pages) if one.index == index)
        self._row = 0
        self._load()

    # Saving and leaving.

    def action_save(self) -> None:
        """Save: over the file that is edited after asking, else under a name that is free."""
        self._take()
        self.paint()
        if self._faults:
            self.app.push_screen(
                Confirm(
                    f"Save with {len(self._faults)} to mend?", "No run can start from the file as it is."
                ),
                lambda sure: self._ask_where() if sure else None,
            )
        else:
            self._ask_where()

    def _ask_where(self) -> None:
        if self._path is None:
            self.action_save_as()
            return
        changed = changed_since(self._path, self._kept)
        self.app.push_screen(
            Confirm(f"Write over {safe(self._path.name, 50)}?", changed or "Comments and order are kept."),
            lambda sure: self._write(self._path, over=True) if sure else None,
        )

    def action_save_as(self) -> None:
        """Ask for a name and save under it."""
        self._take()
        proposal = self._path.name if self._path else formpages.file_name(self.draft)
        self.app.push_screen(
            AskName("Save the site file as", "saves it", safe(proposal, 60), self._free),
            lambda name: self._write(self._free(name), over=False) if name else None,
        )

    def _free(self, name: str) -> Path:
        return free_name(self._folder, name)

    def _write(self, path: Path | None, *, over: bool) -> None:
        if path is None:
            return
        try:
            write_text(path, self.draft.text, force=over)
        except OutputError as error:
            self.notify(safe(str(error), 200), severity="error", markup=False)
            return
        self._path = self._saved = path
        self._kept = self.draft.text
        self.notify(f"saved: {safe(str(path), 120)}", markup=False, timeout=3)
        self.paint()

    def action_close(self) -> None:
        """Leave; changes that are not saved are asked about."""
        self._take()
        if self.unsaved:
            self.app.push_screen(
                Confirm("Leave without saving?", "What was typed since the last save is lost."),
                self._left,
            )
        else:
            self.dismiss(self._saved)

    def _left(self, sure: bool | None) -> None:
        if sure:
            self.dismiss(self._saved)
