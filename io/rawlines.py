"""From the bytes of raw records straight to blocks of lines, by array operations; anything unusual is left to JSON.

Decoding each record as JSON and joining the lines again takes four times as long (measured on records of one line). It
accepts only what the writer makes in the usual case (ASCII, no escapes, the first ten links) and says None to
everything else, so it never guesses.
"""

import numpy as np
from numpy.typing import NDArray

from eastfall.io.decimals import Fields, plain_numbers

_QUOTE, _FEED, _BRACKET, _END_BRACKET, _POINT, _ZERO = b'"\n[].0'
_WORD = 8  # bytes that are compared at once
_HEAD, _RAW, _CLOSE, _CRC = b'{"t":', b',"raw":[', b'"],"', b',"crc":"'  # a word at most
_CLOSE_AT, _CRC_AT, _LAST_AT = 20, 18, 2  # from the line feed back to `_CLOSE`, `_CRC` and the last quote
_LINK, _LINK_AT, _DIGIT_AT = (
    b'"link":',
    26,
    19,
)  # back to `_LINK` and its one digit, where a record names a link
_MOST_LINKS = 9  # named by one digit
_LINK_LONGER = 9  # bytes by which that moves `_CLOSE` forward
_LEAD = 8  # bytes of no meaning that `decimals` wants before the first number
_DECIMALS = 6  # times are rounded to 1 µs
_FRAME = 10  # quotes of a record of one line
_LINK_QUOTES = 2  # and of a link's name

Bytes = NDArray[np.uint8]
Places = NDArray[np.intp]


def plain_lines(data: bytes) -> list[tuple[int, bytes, NDArray[np.float64]]] | None:
    """Return the instrument lines of usual raw records and their times.

    Parameters
    ----------
    data : bytes
        Whole lines of a run log, raw records only.

    Returns
    -------
    list of (int, bytes, ndarray) or None
        For each link, in the order of their numbers: the number, its lines, each ended by a line feed, and their times
        [s], shape (number of lines,); None when any record is not of the usual form.
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
    if opens is None:
        return None
    links = _links(text, feeds)
    named = links != 0
    closes = feeds - _CLOSE_AT - (_LINK_LONGER * named if named.any() else 0)
    if not (_framed(data, text, starts, opens, feeds, closes) and _named(data, feeds[named], links[named])):
        return None
    times = _times(data, text, starts + len(_HEAD), opens - len(_RAW) + 1)
    if times is None:
        return None
    return _by_link(text, np.stack([starts, opens + 2, closes]), links, times)


def _links(text: Bytes, feeds: Places) -> Places:
    """Return the link that each record names; 0 where it names none, anything where it is not of the usual form."""
    digits = text[np.maximum(feeds - _DIGIT_AT, 0)]
    return np.where(digits == _END_BRACKET, 0, digits.astype(np.intp) - _ZERO)


def _named(data: bytes, feeds: Places, links: Places) -> bool:
    """Return whether the records that seem to name a link do."""
    usual = bool(np.all((links > 0) & (links <= _MOST_LINKS)))
    return usual and _stands(data, feeds - _LINK_AT, _LINK)


def _first_of_each(places: Places, starts: Places) -> Places | None:
    """Return the first of the places in each record; None where there are too few."""
    if places.size > starts.size:  # brackets within lines
        places = places[np.minimum(np.searchsorted(places, starts), places.size - 1)]
    return places if places.size == starts.size else None


def _framed(data: bytes, text: Bytes, starts: Places, opens: Places, feeds: Places, closes: Places) -> bool:
    """Return whether each record is framed as usual, and has a line."""
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


def _by_link(
    text: Bytes, places: Places, links: Places, times: NDArray[np.float64]
) -> list[tuple[int, bytes, NDArray[np.float64]]] | None:
    """Return the lines of each link; `places` are the starts of the records, and where their lines begin and end."""
    quoted = text == _QUOTE
    more = None
    if np.count_nonzero(quoted) != _FRAME * links.size + _LINK_QUOTES * np.count_nonzero(links):
        more = np.add.reduceat(quoted, places[0], dtype=np.intp) - _FRAME - _LINK_QUOTES * (links != 0)
        if np.any(more % 2):
            return None
    out = text.copy()
    out[places[2]] = _FEED
    numbers = np.flatnonzero(np.bincount(links)).tolist()
    found = []
    for one in numbers:
        which = slice(None) if len(numbers) == 1 else links == one
        _, begins, closes = places[:, which]
        lines, when = out[_between(text.size, begins, closes + 1)].tobytes(), times[which]
        if more is not None:
            lines = lines.replace(b'","', b"\n")
            if b'"' in lines:
                return None
            when = np.repeat(when, more[which] // 2 + 1)
        found.append((one, lines, when))
    return found


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
