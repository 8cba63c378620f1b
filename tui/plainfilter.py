"""The last sieve before a terminal with plain letters only: what any widget, also a stock one, draws beyond ASCII."""

from functools import lru_cache

from rich.cells import cell_len
from rich.segment import Segment
from textual.color import Color
from textual.filter import LineFilter

from eastfall.tui.letters import in_ascii

_LINES, _BLOCKS, _DOTS = range(0x2500, 0x2580), range(0x2580, 0x25A0), range(0x2800, 0x2900)


class PlainFilter(LineFilter):
    """Puts a plain letter in place of every other, as wide as it was, so that nothing moves."""

    def apply(self, segments: list[Segment], background: Color) -> list[Segment]:
        """Return the segments in ASCII."""
        del background
        return [
            one if one.text.isascii() else Segment("".join(map(stand_in, one.text)), one.style, one.control)
            for one in segments
        ]


@lru_cache(maxsize=4096)
def stand_in(letter: str) -> str:
    """Return ASCII of a letter's width; nothing for a mark that has none."""
    if letter.isascii():
        return letter
    width = cell_len(letter)
    code = ord(letter)
    plain = "+" if code in _LINES else "#" if code in _BLOCKS or code in _DOTS else ""
    return (plain or in_ascii(letter).strip() or "?")[:width].ljust(width)
