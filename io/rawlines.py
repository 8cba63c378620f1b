"""From the bytes of raw records straight to blocks of lines, by array operations; anything unusual is left to JSON.

Decoding each record as JSON and joining the lines again takes four times as long (measured on records of one line). It
accepts only what the writer makes in the usual case (ASCII, no escapes, first link) and says None to everything else,
so it never guesses.
"""

import numpy as np
from numpy.typing import NDArray

from eastfall.io.decimals import Fields, plain_numbers

_QUOTE, _FEED, _BRACKET, _POINT = b'"\n[.'
_WORD = 8  # bytes that are compared at once
_HEAD, _RAW, _CLOSE, _CRC = b'{"t":', b',"raw":[', b'"],"crc"', b',"crc":"'  # a word at most
_CLOSE_AT, _CRC_AT, _LAST_AT = 20, 18, 2  # from the line feed back to `_CLOSE`, `_CRC` and the last quote
_LEAD = 8  # bytes of no meaning that `decimals` wants before the first number
_DECIMALS = 6  # times are rounded to 1 µs
_FRAME = 10  # quotes of a record of one line

Bytes = NDArray[np.uint8]
Places = NDArray[np.intp]


def plain_lines(data: bytes) -> tuple[bytes, NDArray[np.float64]] | None:
    """Return the instrument lines of usual raw records and their times.

    Parameters
    ----------
    data : bytes
        Whole lines of a run log, raw records only.

    Returns
    -------
    tuple of (bytes, ndarray) or None
        The lines, each ended by a line feed, and their times [s], shape (number of lines,); None when any record
        is not of the usual form.
    """
    if b"\\" in data or not data.isascii():
        return None
    data = bytes(_LEAD) + data
    text = np.frombuffer(data, dtype=np.uint8)
    feeds = np.flatnonzero(text == _FEED)
    if feeds.size == 0:
        return None
    starts = np.concatenate(([_LEAD], feeds[:-1] + 1))
    opens = _first_of_each(np.flatnonzero(text == _BRACKET), starts)
    if opens is None or not _framed(data, text, starts, opens, feeds):
        return None
    times = _times(data, text, starts + len(_HEAD), opens - len(_RAW) + 1)
    return None if times is None else _cut_out(text, starts, opens + 2, feeds, times)


def _first_of_each(places: Places, starts: Places) -> Places | None:
    """Return the first of the places in each record; None where there are too few."""
    if places.size > starts.size:  # brackets within lines
        places = places[np.minimum(np.searchsorted(places, starts), places.size - 1)]
    return places if places.size == starts.size else None


def _framed(data: bytes, text: Bytes, starts: Places, opens: Places, feeds: Places) -> bool:
    """Return whether each record is framed as usual, and has a line."""
    closes = feeds - _CLOSE_AT
    return (
        bool(np.all(opens - len(_RAW) > starts))
        and bool(np.all(closes >= opens + 2))
        and _stands(data, starts, _HEAD)
        and _stands(data, opens - len(_RAW) + 1, _RAW)
        and bool(np.all(text[opens + 1] == _QUOTE))
        and _stands(data, closes, _CLOSE)
        and _stands(data, feeds - _CRC_AT, _CRC)
        and bool(np.all(text[feeds - _LAST_AT] == _QUOTE))
    )


def _stands(data: bytes, places: Places, word: bytes) -> bool:
    """Return whether `word`, of eight bytes at most, stands at each of the places."""
    words: NDArray[np.uint64] = np.ndarray((len(data) - _WORD + 1,), "<u8", buffer=data, strides=(1,))
    kept = np.uint64((1 << (8 * len(word))) - 1)
    return bool(np.all((words[places] & kept) == np.uint64(int.from_bytes(word, "little"))))


def _cut_out(
    text: Bytes, starts: Places, begins: Places, feeds: Places, times: NDArray[np.float64]
) -> tuple[bytes, NDArray[np.float64]] | None:
    """Return what stands between the quotes, a line feed behind each line, and the time of each line."""
    closes = feeds - _CLOSE_AT
    quoted = text == _QUOTE
    out = text.copy()
    out[closes] = _FEED
    lines = out[_between(text.size, begins, closes + 1)].tobytes()
    if np.count_nonzero(quoted) == _FRAME * feeds.size:
        return lines, times
    lines = lines.replace(b'","', b"\n")
    more = np.add.reduceat(quoted, starts, dtype=np.intp) - _FRAME
    if b'"' in lines or np.any(more % 2):
        return None
    return lines, np.repeat(times, more // 2 + 1)


def _between(size: int, begins: Places, ends: Places) -> NDArray[np.bool_]:
    """Return a mask that is True from each begin up to, not with, its end."""
    edges = np.empty(2 * begins.size + 2, dtype=np.intp)
    edges[0], edges[-1] = 0, size
    edges[1:-1:2], edges[2:-1:2] = begins, ends
    inside = np.zeros(edges.size - 1, dtype=bool)
    inside[1::2] = True
    return np.repeat(inside, np.diff(edges))


def _times(data: bytes, text: Bytes, starts: Places, stops: Places) -> NDArray[np.float64] | None:
    """Return the numbers that stand between the places, or None if one is not of the plain kind."""
    points = stops.copy()
    for decimals in range(1, _DECIMALS + 1):
        points -= np.where(text[stops - decimals - 1] == _POINT, decimals + 1, 0)
    times, plain = plain_numbers(Fields(data, text, starts, np.maximum(points, starts), stops))
    return times if bool(plain.all()) else None
