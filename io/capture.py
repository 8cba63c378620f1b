"""A plain-text capture read as arrivals: raw instrument lines, one a line, without times of arrival."""

from codecs import BOM_UTF8
from collections.abc import Iterator
from pathlib import Path
from typing import Self

import numpy as np

from eastfall.io.arrivals import Arrival, LineBlock
from eastfall.io.decoded import Example
from eastfall.io.errors import CaptureError
from eastfall.io.forms import decoder_for
from eastfall.io.framing import Splitter, count_lines
from eastfall.io.safetext import safe
from eastfall.io.sitefile import LinkSettings, SiteFile

_CHUNK = 1 << 20
_SHOWN = 3
_HEAD = 64 << 10


class CaptureReader:
    """A capture, streamed; the time of line i is i times the interval.

    Parameters
    ----------
    path : Path
        The file.
    interval : float, optional
        Time between lines [s]; without it every line has the time 0, and the instrument's own clock must speak.

    Raises
    ------
    CaptureError
        The file cannot be opened.
    """

    def __init__(self, path: Path, interval: float | None) -> None:
        try:
            self._file = path.open("rb", buffering=0)
        except OSError as cause:
            raise CaptureError(
                f"{path}: cannot be read: {cause.strerror}; expected a run log or a capture"
            ) from cause
        self.path = path
        self.ended = False
        self.lines = 0
        self.last_time = 0.0
        self._interval = interval or 0.0
        self._splitter = Splitter()
        self._at_start = True

    def more(self) -> list[Arrival] | None:
        """Return the next block of lines; None at the end of the file."""
        try:
            while chunk := self._file.read(_CHUNK):
                if self._at_start:
                    # What some editors put in front is no part of the first line.
                    chunk, self._at_start = chunk.removeprefix(BOM_UTF8), False
                if data := self._splitter.feed(chunk):
                    return [self._block(data)]
        except OSError as cause:
            raise CaptureError(f"{self.path}: cannot be read: {cause.strerror}") from cause
        self.ended = True
        rest = self._splitter.cut_off()
        return [self._block(rest + b"\n")] if rest else None

    def __iter__(self) -> Iterator[Arrival]:
        """Yield every block up to the end."""
        while (some := self.more()) is not None:
            yield from some

    def _block(self, data: bytes) -> LineBlock:
        count = count_lines(data)
        times = np.round(np.arange(self.lines, self.lines + count) * self._interval, 6)
        block = LineBlock(data=data, times=times, first_line=self.lines + 1)
        self.lines += count
        self.last_time = float(times[-1])
        return block

    def close(self) -> None:
        """Let go of the file."""
        self._file.close()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()


def form_in_words(link: LinkSettings) -> str:
    """Return how a link's lines are read, in one phrase."""
    if link.form == "iec61162":
        return "the form iec61162 (sentences such as $--XDR and $--DPT)"
    check = "" if link.checksum == "none" else f", checksum {link.checksum}"
    sign = "" if link.decimal == "point" else ", decimal comma"
    return f"the form columns ({', '.join(link.columns)}; delimiter {link.delimiter!r}{check}{sign})"


def _first_lines(path: Path, link: LinkSettings) -> list[tuple[int, str, Example | None]]:
    """Return number, text made safe to show, and fault if any, of the first lines that are not empty."""
    splitter = Splitter()
    with path.open("rb") as file:
        data = splitter.feed(file.read(_HEAD).removeprefix(BOM_UTF8)) or splitter.cut_off() + b"\n"
    numbered = [(number, line) for number, line in enumerate(data.split(b"\n"), start=1) if line]
    shown: list[tuple[int, str, Example | None]] = []
    for number, line in numbered[:_SHOWN]:
        block = LineBlock(data=line + b"\n", times=np.zeros(1), first_line=number)
        examples = decoder_for(link).decode(block).examples
        shown.append((number, safe(line, 60), examples[0] if examples else None))
    return shown


def refuse(path: Path, site: SiteFile, lines: int) -> CaptureError:
    """Return the error for a capture of which no line could be used: its first lines, and how they were read."""
    if not lines:
        return CaptureError(f"{path}: is empty; expected instrument lines")
    link = site.links[0] if site.links else LinkSettings(url="-")
    told = [
        f'line {number} "{text}": {_fault(example)}' for number, text, example in _first_lines(path, link)
    ]
    return CaptureError(
        f"{path}: none of its {lines} lines could be used, read by {form_in_words(link)}: "
        + ("; ".join(told) or "the first of them are empty")
    )


def _fault(example: Example | None) -> str:
    if example is None:
        return "reads well, but gives no reading inside the shaft"
    return f"{example[1]}, expected {example[3]}"
