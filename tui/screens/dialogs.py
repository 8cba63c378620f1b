"""Questions that stop the work for a moment: quit a recording, a text to type, the shaft declared clear, a station."""

from collections.abc import Callable
from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import BindingType
from textual.containers import Vertical
from textual.screen import ModalScreen
from textual.visual import VisualType
from textual.widgets import Input, Static

from eastfall.io.cautions import CAUTIONS
from eastfall.tui import keys
from eastfall.tui.glyphs import BRAILLE, Glyphs
from eastfall.tui.letters import in_ascii


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


class Confirm(ModalScreen[bool]):
    """A question with yes and no; anything but the one key is no."""

    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("confirm"))

    def __init__(self, question: str, consequence: str) -> None:
        super().__init__()
        self._question, self._consequence = question, consequence

    def compose(self) -> ComposeResult:
        """Show question, consequence and the two keys."""
        with Vertical(classes="dialog"):
            yield plain(self._question, "title")
            yield plain(self._consequence)
            told = keys.keymap_of(self.app).line("confirm")
            yield plain("        ".join(f"{key}  {name}" for key, name in told))

    def action_answer(self, answer: bool) -> None:
        """Close with the answer."""
        self.dismiss(answer)


class AskText(ModalScreen[str | None]):
    """One line to type; enter takes it when it is understood, escape leaves it."""

    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("dialog"))

    def __init__(
        self,
        question: str,
        hint: str,
        *,
        check: Callable[[str], object] | None = None,
        warning: str = "",
        value: str = "",
    ) -> None:
        super().__init__()
        self._question, self._hint, self._check, self._warning = question, hint, check, warning
        self._value = value

    def compose(self) -> ComposeResult:
        """Show the question over the line to type in."""
        with Vertical(classes="dialog"):
            yield plain(self._question, "title")
            if self._warning:
                yield plain(self._warning)
            field = Input(self._value, id="field", select_on_focus=False)
            field.cursor_blink = False
            yield field
            yield plain(self._hint)
            complaint = plain("", "complaint")
            complaint.display = False
            yield complaint

    def on_mount(self) -> None:
        """Take the keys."""
        self.query_one(Input).focus()

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


def taken(app: object, does: str) -> str:
    """Return the hint of a line to type in: which key takes it, and which leaves it."""
    keymap = keys.keymap_of(app)
    return f"{keymap['dialog.take']} {does}, {keymap['dialog.leave']} does not"


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

    def __init__(self, app: object) -> None:
        keymap = keys.keymap_of(app)
        super().__init__(
            "Is the shaft clear, from collar to bottom?",
            f"Your name and {keymap['dialog.take']}: the shaft is clear, arm the run.   "
            f"{keymap['dialog.leave']}: do not arm.",
            check=named,
            warning=f"{CAUTIONS[1]}\nYour name goes into the record as the one who declared it clear.",
        )
