"""What this terminal can show: whether there is a screen at all, which glyphs, whether colour."""

from collections.abc import Mapping

from eastfall.io.errors import InputError
from eastfall.tui.glyphs import ASCII, BRAILLE, GLYPHS, HALF, Glyphs
from eastfall.tui.letters import can, is_plain


def refuse_unless_screen(environment: Mapping[str, str], *, is_terminal: bool) -> None:
    """Refuse to draw where no screen is.

    Raises
    ------
    InputError
        When input or output is no terminal, or TERM says that it cannot place text.
    """
    advice = (
        "add --plain to a live verb or use `record`, `reduce` for a record, `eastfall --help` for the rest"
    )
    if not is_terminal:
        raise InputError(f"the screen needs a terminal for input and output; {advice}")
    if environment.get("TERM", "") in {"dumb", "unknown"}:
        raise InputError(f"TERM is {environment['TERM']}: this terminal cannot place text; {advice}")


def glyphs_for(environment: Mapping[str, str], encoding: str | None, wish: str = "auto") -> Glyphs:
    """Return the finest glyphs that will show; a wish overrules, and EASTFALL_GLYPHS (braille, half, ascii) that."""
    asked = environment.get("EASTFALL_GLYPHS") or wish
    if asked in GLYPHS:
        return GLYPHS[asked]
    if is_plain(environment, encoding) or not can(encoding, "▀"):
        return ASCII
    # The text console of Linux has half blocks in its fonts, and no braille.
    return HALF if environment.get("TERM", "").startswith("linux") or not can(encoding, "⣿") else BRAILLE


def wants_no_colour(environment: Mapping[str, str]) -> bool:
    """Tell whether NO_COLOR (https://no-color.org) is set and not empty."""
    return bool(environment.get("NO_COLOR"))
