"""Questions that stop the work for a moment: quit a recording, a text to type, the shaft declared clear, a station."""

from collections.abc import Callable
from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import BindingType
from textual.containers import VerticalScroll
from textual.screen import ModalScreen
from textual.visual import VisualType
from textual.widgets import Input, Static

from eastfall.io.cautions import CAUTIONS
from eastfall.tui import keys
from eastfall.tui.glyphs import BRAILLE, Glyphs
from eastfall.tui.letters import in_ascii
from eastfall.tui.widgets.table import fit_bar


class Plain(Static):
    """Text that is shown letter by letter: brackets are no markup, and a plain terminal gets plain letters."""

    def __init__(self, text: str, classes: str = "") -> None:
        super().__init__(text, markup=False, classes=classes)
        self._words = text

    def on_mount(self) -> None:
        """Choose the letters, now that the terminal is known."""
        if shown_in(self.app, self._words) != self._words:
            self.update(self._words)

    def update(self, content: VisualType = "", *, layout: bool = True) -> None:
        """Show other words."""
        super().update(shown_in(self.app, content) if isinstance(content, str) else content, layout=layout)


def shown_in(app: object, text: str) -> str:
    """Return a text in the letters that an application's terminal can show."""
    glyphs: Glyphs = getattr(app, "glyphs", BRAILLE)
    return in_ascii(text) if glyphs.name == "ascii" else text


def plain(text: str, classes: str = "") -> Plain:
    """Return text that is shown letter by letter."""
    return Plain(text, classes)


class Page(VerticalScroll):
    """The frame of a dialog; what is too long for the window is scrolled by keys."""

    def __init__(self) -> None:
        super().__init__(classes="dialog")

    def on_mount(self) -> None:
        """Fit the scroll bar to the terminal."""
        fit_bar(self)


class Confirm(ModalScreen[bool]):
    """A question with yes and no; anything but the one key is no."""

    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("confirm"))

    def __init__(self, question: str, consequence: str) -> None:
        super().__init__()
        self._question, self._consequence = question, consequence

    def compose(self) -> ComposeResult:
        """Show question, consequence and the two keys."""
        with Page():
            yield plain(self._question, "title")
            told = keys.keymap_of(self.app).line("confirm")
            yield plain("        ".join(f"{key}  {name}" for key, name in told))
            yield plain(self._consequence)

    def action_answer(self, answer: bool) -> None:
        """Close with the answer."""
        self.dismiss(answer)


class AskText(ModalScreen[str | None]):
    """One line to type; enter takes it when it is understood, escape leaves it.

    Parameters
    ----------
    question, hint : str
        What is asked for, and how it is typed.
    does : str
        What taking it comes to.
    check : callable, optional
        Refuses by a ValueError.
    warning : str
        Stands above the line.
    value : str
        To begin with.
    replaced : bool
        Whether the first letter typed takes its place.
    """

    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("dialog"))

    def __init__(
        self,
        question: str,
        hint: str = "",
        *,
        does: str = "takes it",
        check: Callable[[str], object] | None = None,
        warning: str = "",
        value: str = "",
        replaced: bool = False,
    ) -> None:
        super().__init__()
        self._question, self._hint, self._check, self._warning = question, hint, check, warning
        self._value, self._does, self._replaced = value, does, replaced

    def compose(self) -> ComposeResult:
        """Show the question over the line to type in."""
        with Page() as page:
            page.can_focus = False  # the line that is typed in has the keyboard
            yield plain(self._question, "title")
            if self._warning:
                yield plain(self._warning)
            field = Input(self._value, id="field", select_on_focus=self._replaced)
            field.cursor_blink = False
            yield field
            if self._hint:
                yield plain(self._hint)
            keymap = keys.keymap_of(self.app)
            yield plain(f"{keymap['dialog.take']} {self._does}, {keymap['dialog.leave']} does not")
            complaint = plain("", "complaint")
            complaint.display = False
            yield complaint

    def on_mount(self) -> None:
        """Take the keys; in a low window the line that is typed in stays in view."""
        field = self.query_one(Input)
        field.focus()
        self.call_after_refresh(field.scroll_visible, animate=False)

    def on_input_submitted(self, event: Input.Submitted) -> None:
        """Close with the text, or say what is wrong with it."""
        try:
            if self._check is not None:
                self._check(event.value)
        except ValueError as error:
            complaint = self.query_one(".complaint", Static)
            complaint.update(str(error))
            complaint.display = True
            return
        self.dismiss(event.value)

    def action_leave(self) -> None:
        """Close without a text."""
        self.dismiss(None)


def named(text: str) -> str:
    """Return a person's name, or refuse an empty one.

    Raises
    ------
    ValueError
        When there is nothing but blanks.
    """
    if not text.strip():
        raise ValueError("A name is needed: it is written into the record.")
    return text.strip()


class ClearShaft(AskText):
    """Asks who declares the shaft clear before a drop run is armed."""

    def __init__(self) -> None:
        super().__init__(
            "Is the shaft clear, from collar to bottom?",
            "Your name: it goes into the record.",
            does="declares it clear and arms the run",
            check=named,
            warning=CAUTIONS[1],
        )
