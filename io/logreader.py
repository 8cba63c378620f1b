"""Reading a run log as the arrivals it recorded, in file order, streamed, also while another process writes it."""

import contextlib
import os
from collections.abc import Iterator
from datetime import datetime
from pathlib import Path
from typing import Self

import msgspec
import numpy as np
from numpy.typing import NDArray

from eastfall.io.arrivals import Arrival, LineBlock, RunEvent
from eastfall.io.errors import LogError
from eastfall.io.logformat import (
    EVENT_MARK,
    FIRST_SEAL,
    LINE_LIMIT,
    LONGEST,
    RECORDS,
    TOLD_MARK,
    Header,
    Record,
    read_header,
)
from eastfall.io.rawlines import plain_lines
from eastfall.io.safetext import safe
from eastfall.io.seal import CHUNK, SealScan, Verification, beside, combined, first_part, judge, opened
from eastfall.io.sitefile import SiteFile, parse_site


class LogReader:
    """A run log, read from its first part on.

    Parameters
    ----------
    path : Path
        Any part of the log.
    merge : bool
        Put the lines between events into large blocks, one for each link, though links then overtake one another: what
        follows from the lines does not depend on it. What the program itself told of alarms, which changes nothing and
        may be often, then stands behind the block. Else one block for each record, in their order.

    Raises
    ------
    LogError
        The file cannot be opened, is no run log, or an earlier part of it is missing.

    Attributes
    ----------
    header : Header
        The first record of the first part.
    path : Path
        The part being read.
    bad_lines : int
        Records that could not be read; they are passed over.
    ended : bool
        Whether the final seal has been read.
    last_time : float
        The latest time read so far [s].
    """

    def __init__(self, path: Path, *, merge: bool = True) -> None:
        self._merge = merge
        self._numbers: dict[int, int] = {}
        self._parts: list[Verification] = []
        self.bad_lines = 0
        self.ended = False
        self.last_time = 0.0
        self.header = self._open(first_part(path), FIRST_SEAL)

    def _open(self, path: Path, seal: str) -> Header:
        file = opened(path)
        first = file.readline(LINE_LIMIT)
        try:
            header = read_header(first, path)
        except LogError:
            file.close()
            raise
        self._file, self.path = file, path
        self._offset = len(first)
        self._scan = SealScan(seal)
        self._scan.feed(first)
        return header

    @property
    def started_at(self) -> datetime:
        """Start of the run, UTC."""
        try:
            return datetime.fromisoformat(self.header.started_at)
        except ValueError as cause:
            shown = safe(self.header.started_at, 40)
            raise LogError(
                f"{self.path}, line 1: started_at is {shown!r}; expected a date and time"
            ) from cause

    def site(self) -> SiteFile:
        """Return the settings that the run was recorded with.

        Raises
        ------
        SiteFileError
            The text in the header is not a site file that this program can read.
        """
        return parse_site(self.header.site, f"{self.path}: site file in line 1", on=self.started_at.date())

    def more(self) -> list[Arrival] | None:
        """Return what the next stretch of the log brings; None when nothing whole stands behind the last one now.

        Raises
        ------
        LogError
            The file can no longer be read, or holds a line too long for a run log.
        """
        if self.ended:
            return None
        try:
            data = self._whole_lines()
        except OSError as cause:
            raise LogError(f"{self.path}: cannot be read: {cause.strerror}") from cause
        return self._arrivals(data) if data else None

    def __iter__(self) -> Iterator[Arrival]:
        """Yield every arrival up to the end of what is there now."""
        while (some := self.more()) is not None:
            yield from some

    def verification(self) -> Verification:
        """Return what the seals say of all that has been read so far; ask when all has been read."""
        if self.ended:
            self._whole_lines_behind()
        return combined([*self._parts, judge(self._scan, self.path)])

    def close(self) -> None:
        """Let go of the file."""
        self._file.close()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    # -- bytes -----------------------------------------------------------------------------------------------------

    def _whole_lines(self) -> bytes:
        """Return the next whole lines, read from the end of the last whole one.

        Always from there: what stood behind it may have been half a record that the writer took back.
        """
        self._file.seek(self._offset)
        pieces: list[bytes] = []
        while chunk := self._file.read(CHUNK):
            cut = chunk.rfind(b"\n") + 1
            pieces.append(chunk[:cut] or chunk)
            if cut:
                data = b"".join(pieces)
                self._offset += len(data)
                return data
            if len(pieces) * CHUNK > LINE_LIMIT:
                raise LogError(f"{self.path}: a line of more than {LINE_LIMIT} bytes; expected a run log")
        self._reopen_if_replaced()
        return b""

    def _reopen_if_replaced(self) -> None:
        """Take up the file that a writer made anew after the first was deleted under it."""
        with contextlib.suppress(OSError):
            if not os.path.samestat(self.path.stat(), os.fstat(self._file.fileno())):
                file = self.path.open("rb")
                self._file.close()
                self._file = file

    def _whole_lines_behind(self) -> None:
        """Bring what stands behind the final seal before the check."""
        if self._file.closed:
            self._file = opened(self.path)
            with self._file:
                self._whole_lines_behind()
            return
        while data := self._whole_lines():
            self._scan.feed(data)

    # -- records ---------------------------------------------------------------------------------------------------

    def _arrivals(self, data: bytes) -> list[Arrival]:
        spans, begin, rolled = [], 0, None
        for at, end, record in self._scan.feed(data):
            spans.append(data[begin:at])
            begin = end
            rolled = self._take_seal(record) or rolled
        spans.append(data[begin:])
        arrivals = self._decoded(b"".join(spans))
        if rolled is not None:
            self._follow(rolled)
        return arrivals

    def _take_seal(self, record: Record | None) -> str | None:
        """Note a final seal; return the name of the next part if the log goes on there."""
        if record is None or abs(record.t) > LONGEST:
            self.bad_lines += 1
            return None
        self.last_time = max(self.last_time, record.t)
        self.ended = self.ended or record.end == "closed"
        return record.next if record.end == "rolled" else None

    def _follow(self, name: str) -> None:
        following = beside(self.path, name)
        if not following.exists():
            return
        self._whole_lines_behind()
        self._parts.append(judge(self._scan, self.path))
        self._file.close()
        self._open(following, self._parts[-1].seal)

    def _decoded(self, data: bytes) -> list[Arrival]:
        """Return the arrivals in record lines; stretches without events go through arrays, the rest through JSON."""
        if not self._merge:
            return self._records(data)
        arrivals: list[Arrival] = []
        lines: list[bytes] = []
        told: list[bytes] = []
        begin = 0
        for at, end, is_state in _events_in(data):
            lines.append(data[begin:at])
            begin = end
            told.append(data[at:end])
            if is_state:
                arrivals += self._stretch(lines, told)
                lines, told = [], []
        lines.append(data[begin:])
        return arrivals + self._stretch(lines, told)

    def _stretch(self, lines: list[bytes], told: list[bytes]) -> list[Arrival]:
        """Return blocks of lines, and behind them the events told among them."""
        data, events = b"".join(lines), b"".join(told)
        found = plain_lines(data) if data else []
        arrivals: list[Arrival] = []
        arrivals += self._records(data) if found is None else [self._block(*one) for one in found]
        if events:
            arrivals += self._records(events)
        return arrivals

    def _records(self, data: bytes) -> list[Arrival]:
        try:
            records = RECORDS.decode_lines(data)
        except (msgspec.DecodeError, UnicodeDecodeError):
            records = self._readable(data)
        return self._joined(records)

    def _readable(self, data: bytes) -> list[Record]:
        records = []
        for line in data.splitlines(keepends=True):
            try:
                records.append(RECORDS.decode(line))
            except (msgspec.DecodeError, UnicodeDecodeError):
                self.bad_lines += 1
        return records

    def _joined(self, records: list[Record]) -> list[Arrival]:
        """Return events in their places, and blocks of the lines between them."""
        arrivals: list[Arrival] = []
        waiting: dict[int, list[Record]] = {}
        for one in records:
            if abs(one.t) > LONGEST:
                self.bad_lines += 1
                continue
            if waiting and (one.raw is None or not self._merge):
                arrivals += [self._one_block(some) for some in waiting.values()]
                waiting = {}
            if one.raw is not None:
                waiting.setdefault(one.link, []).append(one)
            elif one.event is not None:
                self.last_time = max(self.last_time, one.t)
                arrivals.append(RunEvent(time=one.t, name=one.event, fields=one.fields or {}))
            else:
                self.bad_lines += 1
        return [*arrivals, *(self._one_block(some) for some in waiting.values())]

    def _one_block(self, records: list[Record]) -> LineBlock:
        lines = [line.replace("\n", " ") for one in records for line in one.raw or ()]
        text = "".join(line + "\n" for line in lines)
        times = np.repeat([one.t for one in records], [len(one.raw or ()) for one in records])
        return self._block(records[0].link, text.encode("latin-1", "replace"), times)

    def _block(self, link: int, data: bytes, times: NDArray[np.float64]) -> LineBlock:
        first = self._numbers.get(link, 0) + 1
        self._numbers[link] = first - 1 + times.size
        if times.size:
            self.last_time = max(self.last_time, float(times[-1]))
        return LineBlock(data=data, times=times, first_line=first, link=link)


def _events_in(data: bytes) -> Iterator[tuple[int, int, bool]]:
    """Yield where the lines of events begin and end, and whether no line may be moved across the event."""
    end = 0
    while (mark := data.find(EVENT_MARK, end)) >= 0:
        at = data.rfind(b"\n", end, mark) + 1 or end
        end = data.find(b"\n", mark) + 1 or len(data)
        yield at, end, not data.startswith(TOLD_MARK, mark)


def read_log(path: Path, *, merge: bool = True) -> LogReader:
    """Open a run log for reading; see `LogReader`."""
    return LogReader(path, merge=merge)
