"""Which terminals are refused, and which glyphs the others get."""

import pytest

from eastfall.io.errors import InputError
from eastfall.tui.glyphs import ASCII, BRAILLE, HALF, Glyphs
from eastfall.tui.terminal import glyphs_for, refuse_unless_screen, wants_no_colour

pytestmark = pytest.mark.invariant


@pytest.mark.parametrize(
    ("environment", "is_terminal", "says"),
    [({"TERM": "xterm"}, False, "needs a terminal"), ({"TERM": "dumb"}, True, "TERM is dumb")],
)
def test_no_screen_is_refused_with_what_to_do_instead(
    environment: dict[str, str], is_terminal: bool, says: str
) -> None:
    """Pipes and dumb terminals get one line that names the way without a screen."""
    with pytest.raises(InputError, match=f"{says}.*`record`") as caught:
        refuse_unless_screen(environment, is_terminal=is_terminal)
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize("term", ["xterm-256color", "linux", "vt100", "screen", ""])
def test_terminals_with_a_screen_are_taken(term: str) -> None:
    """Everything that can place text is good enough."""
    refuse_unless_screen({"TERM": term}, is_terminal=True)


@pytest.mark.parametrize(
    ("environment", "encoding", "glyphs"),
    [
        ({"TERM": "xterm-256color"}, "utf-8", BRAILLE),
        ({"TERM": "linux"}, "utf-8", HALF),
        ({"TERM": "vt100"}, "utf-8", ASCII),
        ({"TERM": "dumb"}, "utf-8", ASCII),
        ({"TERM": "xterm"}, "cp437", ASCII),
        ({"TERM": "linux", "LC_ALL": "C"}, "utf-8", ASCII),
        ({"TERM": "xterm", "LC_ALL": "C"}, "utf-8", ASCII),
        ({"TERM": "xterm", "LANG": "C", "LC_CTYPE": "C.UTF-8"}, "utf-8", ASCII),
        ({"TERM": "xterm", "LC_CTYPE": "C.UTF-8"}, "utf-8", BRAILLE),
        ({"TERM": "xterm", "LC_CTYPE": "UTF-8", "LANG": "sv_SE.utf8"}, "utf-8", BRAILLE),
        ({"TERM": "xterm", "LANG": "de_DE@euro"}, "utf-8", ASCII),
        ({"TERM": "xterm", "LANG": "en_GB.ISO-8859-1"}, "utf-8", ASCII),
        ({"TERM": "xterm", "LC_ALL": "POSIX", "EASTFALL_GLYPHS": "half"}, "utf-8", HALF),
        ({"TERM": "xterm"}, "iso-8859-1", ASCII),
        ({"TERM": "xterm"}, "ascii", ASCII),
        ({"TERM": "xterm"}, None, ASCII),
        ({"TERM": "xterm"}, "no-such-encoding", ASCII),
        ({"TERM": "xterm", "EASTFALL_GLYPHS": "ascii"}, "utf-8", ASCII),
        ({"TERM": "xterm", "EASTFALL_GLYPHS": "nonsense"}, "utf-8", BRAILLE),
    ],
)
def test_glyphs_fit_encoding_and_terminal(
    environment: dict[str, str], encoding: str | None, glyphs: Glyphs
) -> None:
    """Braille where it shows, half blocks on consoles, letters where nothing else can be written."""
    assert glyphs_for(environment, encoding) is glyphs


def test_no_colour_is_asked_for_by_any_text_but_none() -> None:
    """NO_COLOR counts when it is set and not empty (no-color.org)."""
    assert wants_no_colour({"NO_COLOR": "1"})
    assert not wants_no_colour({"NO_COLOR": ""})
    assert not wants_no_colour({})
