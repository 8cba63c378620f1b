"""A printed table as lines that fit a window: heads in several rows, parts under each other, long texts below a row."""

import textwrap
from collections.abc import Sequence

_GAP = 2
_INDENT = 4
_LEAST = 12
"""Columns that a text is never cut below."""

Row = Sequence[str]


def printed(head: Row, rows: Sequence[Row], width: int | None = None) -> list[str]:
    """Return a table of numbers as lines, cells to the right.

    Parameters
    ----------
    head, rows : sequences of str
        Names with units, such as "u_east_mm", and cells.
    width : int, optional
        Of the window: what is wider has its heads in several rows, and if need be comes in parts, each beginning with
        the first column. Without one a row is a line.
    """
    widths = _widths([head, *rows])
    if width is None or _across(widths) <= width:
        return _set([head, *rows], widths)
    heads = _stacked(head)
    widths = _widths([*heads, *rows])
    found: list[str] = []
    for columns in _parts(widths, width):
        part = [[row[at] for at in columns] for row in (*heads, *rows)]
        while not any(part[0]):
            part.pop(0)
        found += [""] * bool(found) + _set(part, [widths[at] for at in columns])
    return found


def listed(head: Row, rows: Sequence[Row], width: int | None = None) -> list[str]:
    """Return a list of texts as lines, cells to the left; the last column may be long.

    In a window that is too narrow for it the last column stands below its row, and the longest of the others give way;
    in one too narrow for those a row is told in as many lines as it takes.

    Parameters
    ----------
    head, rows : sequences of str
        Names and cells.
    width : int, optional
        Of the window; without one a row is a line.
    """
    widths = _widths([head, *rows])
    if width is None or _across(widths) <= width:
        return [_left(row, widths) for row in (head, *rows)]
    *short, _ = widths
    while _across(short) > width and max(short) > _LEAST:
        short[short.index(max(short))] -= 1
    fits = _across(short) <= width
    found = [_left(head[:-1], short)] if fits else _prose(head[:-1], width)
    for row in rows:
        found += [_left(row[:-1], short)] if fits else _prose(row[:-1], width)
        found += _prose(row[-1:], width, " " * _INDENT)
    return found


def prose(text: str, width: int | None) -> list[str]:
    """Return a sentence as lines that are parted between words; as one line without a width."""
    return [text] if width is None or len(text) <= width else _prose([text], width)


def _prose(row: Row, width: int, indent: str = "") -> list[str]:
    text = (" " * _GAP).join(row)
    return textwrap.wrap(text, max(width, 2 * _INDENT), initial_indent=indent, subsequent_indent=indent)


def _widths(rows: Sequence[Row]) -> list[int]:
    return [max(map(len, column)) for column in zip(*rows, strict=True)]


def _across(widths: Sequence[int]) -> int:
    return sum(widths) + _GAP * (len(widths) - 1)


def _set(rows: Sequence[Row], widths: Sequence[int]) -> list[str]:
    gap = " " * _GAP
    return [
        gap.join(cell.rjust(width) for cell, width in zip(row, widths, strict=True)).rstrip() for row in rows
    ]


def _left(row: Row, widths: Sequence[int]) -> str:
    cells = (
        (cell if len(cell) <= width else cell[: width - 3] + "...").ljust(width)
        for cell, width in zip(row, widths, strict=True)
    )
    return (" " * _GAP).join(cells).rstrip()


def _stacked(head: Row) -> list[list[str]]:
    """Return names in as many rows as the longest has words, the unit in the last."""
    words = [name.split("_") for name in head]
    most = max(map(len, words))
    return [list(row) for row in zip(*([""] * (most - len(one)) + one for one in words), strict=True)]


def _parts(widths: Sequence[int], width: int) -> list[list[int]]:
    """Return the columns of each part, the first column in all of them."""
    parts = [[0]]
    for at in range(1, len(widths)):
        fits = _across([widths[one] for one in (*parts[-1], at)]) <= width
        if fits or len(parts[-1]) == 1:
            parts[-1].append(at)
        else:
            parts.append([0, at])
    return parts
