"""How the rows of a window are shared out: lines of text by how much they matter, then figures and evidence."""

from collections.abc import Sequence
from dataclasses import dataclass

FIGURES = 3
"""Rows of the large figures."""
LEAST_EVIDENCE, GOOD_EVIDENCE = 6, 8
"""Rows below which the pictures show nothing, and above which the large figures get theirs besides."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Shares:
    """Rows for each line, 0 for one that has no room; and whether figures and pictures are shown."""

    lines: dict[str, int]
    figures: bool
    evidence: bool


def shared(height: int, wants: Sequence[tuple[str, int]], *, whole: frozenset[str] = frozenset()) -> Shares:
    """Share out the rows of a window.

    Parameters
    ----------
    height : int
        Of the window.
    wants : sequence of (str, int)
        Lines and the rows that their words need, what matters most first; a line is cut to what is left.
    whole : frozenset of str
        Lines that half of would mislead: they are shown whole or not at all.
    """
    lines, left = {}, height
    for name, rows in wants:
        lines[name] = min(rows, left) if rows <= left or name not in whole else 0
        left -= lines[name]
    figures = left >= FIGURES + GOOD_EVIDENCE or FIGURES <= left < LEAST_EVIDENCE
    return Shares(lines=lines, figures=figures, evidence=left - FIGURES * figures >= LEAST_EVIDENCE)
