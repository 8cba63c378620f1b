"""Dialogs of the site form: a table typed as rows of numbers, and the name of the file to save."""

from collections.abc import Callable
from pathlib import Path
from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import BindingType
from textual.screen import ModalScreen
from textual.widgets import Input, Static, TextArea

from eastfall.io.safetext import safe
from eastfall.tui import keys
from eastfall.tui.screens.dialogs import AskText, Page, plain

Check = Callable[[str], str]
"""From what is typed to what is wrong with it; empty when nothing is."""


class RowsDialog(ModalScreen[str | None]):
    """A table of the site file, one row a line, checked as it is typed; closes with the text or None.

    Parameters
    ----------
    title : str
        The key.
    headings : tuple of str
        What the numbers of a row mean.
    text : str
        The rows as they are.
    check : callable
        Says what is wrong.
    """

    CSS = """
    RowsDialog TextArea { height: 10; border: tall $foreground; background: $background; color: $foreground; }
    RowsDialog TextArea .text-area--cursor { background: $foreground; color: $background; }
    RowsDialog TextArea:ansi .text-area--cursor { background: ansi_default; color: ansi_default; text-style: reverse; }
    RowsDialog .complaint { height: 3; }
    """
    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("rows"))

    def __init__(self, title: str, headings: tuple[str, ...], text: str, check: Check) -> None:
        super().__init__()
        self._title, self._headings, self._text, self._check = title, headings, text, check

    def compose(self) -> ComposeResult:
        """Show the headings over the rows, and what is wrong beneath."""
        with Page() as page:
            page.can_focus = False  # the rows that are typed have the keyboard
            yield plain(self._title, "title")
            yield plain("a line for each row:  " + "   ".join(self._headings))
            yield TextArea(self._text, tab_behavior="focus", show_line_numbers=False, id="rows")
            yield plain("", "complaint")
            keymap = keys.keymap_of(self.app)
            yield plain(
                f"{keymap['rows.take']}  take the rows        {keymap['rows.leave']}  leave them as they were"
            )

    def on_mount(self) -> None:
        """Take the keys."""
        field = self.query_one(TextArea)
        field.cursor_blink = False
        field.focus()
        field.move_cursor(field.document.end)
        self._tell(self._text)

    def on_text_area_changed(self, event: TextArea.Changed) -> None:
        """Check the rows."""
        self._tell(event.text_area.text)

    def _tell(self, text: str) -> None:
        rows = sum(bool(one.strip()) for one in text.splitlines())
        complaint = self._check(text)
        says = f"! {safe(complaint, 180)}" if complaint else f"{rows} rows, no fault"
        self.query_one(".complaint", Static).update(says)

    def action_take(self) -> None:
        """Close with the rows."""
        self.dismiss(self.query_one(TextArea).text)

    def action_leave(self) -> None:
        """Close without them."""
        self.dismiss(None)


class AskName(AskText):
    """Asks for the name of a file, with a proposal to change or take."""

    def __init__(self, question: str, does: str, proposal: str, check: Callable[[str], object]) -> None:
        super().__init__(question, does=does, check=check)
        self._proposal = proposal

    def on_mount(self) -> None:
        """Show the proposal, the cursor at its end."""
        super().on_mount()
        self.query_one(Input).value = self._proposal


def free_name(folder: Path, name: str) -> Path:
    """Return the path of a site file under whose name nothing stands yet.

    Raises
    ------
    ValueError
        With what to type instead.
    """
    plain_name = name.strip()
    if not plain_name or not plain_name.isprintable():
        raise ValueError("A name is needed, such as kestrel.toml.")
    path = folder / Path(plain_name if plain_name.endswith(".toml") else f"{plain_name}.toml").expanduser()
    try:
        stands = path.exists() or path.is_symlink()
    except OSError as error:
        raise ValueError(f"This is no name of a file: {error}") from error
    if stands:
        raise ValueError("A file of this name stands already; another name, please.")
    if not path.parent.is_dir():
        raise ValueError("There is no such folder.")
    return path
