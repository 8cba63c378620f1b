"""Proof that a run log is as it was written: the SHA-256 chain and its check; the records' shape is in `logformat`.

A seal is the SHA-256 of the seal before it (64 zeros at first, as text) and all bytes written since, the line of
the seal before it included. So every byte up to the last seal hangs together, over the parts of a rolled log too.

What it shows: damage, truncation and careless edits. What it does not: a chain has no key, so whoever can rewrite
the whole file can rebuild it. What pins a run is the final seal printed in the signed report: a log whose last seal
differs from the printed one is not the log that was reported.
"""

import hashlib
import stat
from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path
from typing import BinaryIO, Literal

import msgspec
import numpy as np

from eastfall.io.errors import LogError
from eastfall.io.logformat import (
    FIRST_SEAL,
    LINE_LIMIT,
    RECORDS,
    SEAL_MARK,
    Header,
    Record,
    line_holds,
    read_header,
    stated_crc,
)

CHUNK = 1 << 20
_MOST_PARTS = 10_000
_TELLING = SEAL_MARK.index(b"s")
"""Where a seal differs from a raw record or an event."""
State = Literal["intact", "cut short", "changed"]


class Chain:
    """The running chain of one part.

    Parameters
    ----------
    value : str
        The seal that the part continues from, 64 hex digits.
    """

    def __init__(self, value: str = FIRST_SEAL) -> None:
        self.restart(value)

    def restart(self, value: str) -> None:
        """Begin a stretch behind the seal `value`."""
        self._hash = hashlib.sha256(value.encode("utf-8", "replace"))

    def add(self, data: bytes | memoryview) -> None:
        """Take bytes that now stand in the file."""
        self._hash.update(data)

    def value(self) -> str:
        """Return what a seal here must state."""
        return self._hash.hexdigest()


@dataclass(frozen=True, slots=True, kw_only=True)
class Verification:
    """What a check of a run log found, over all of its parts."""

    state: State
    path: str
    """The part that `first_bad_line` is in, else the last part."""
    good_lines: int
    """Lines, over all parts, before the first that is not good."""
    good_until_time: float
    """Time of the last good record, from the start of the run [s]."""
    first_bad_line: int | None
    """Number, from 1, in `path`, of the first line that can be shown bad; None if none can."""
    sealed: bool
    """Whether the log was closed by a final seal that holds."""
    seal: str
    """The last seal that holds; empty if there is none."""
    reason: str
    """The finding in words."""


@dataclass(slots=True)
class _Stretch:
    """Bytes between two seals: where they begin, and what the check needs to go through them line by line."""

    offset: int = 0
    line: int = 1
    crc: int = 0
    end: int | None = None
    """Offset behind the closing seal's line; None for the unsealed tail."""


class SealScan:
    """Check the chain of one part as its bytes go by, without reading them twice.

    Parameters
    ----------
    start : str
        The seal that the part must continue from.
    """

    def __init__(self, start: str = FIRST_SEAL) -> None:
        self._chain = Chain(start)
        self._offset = 0
        self._last_crc = 0
        self.lines = 0
        self.open = _Stretch()
        """The stretch since the last seal."""
        self.bad: _Stretch | None = None
        """The first stretch whose seal does not hold."""
        self.last: Record | None = None
        """The last seal met, if it holds."""
        self.time = 0.0

    def feed(self, data: bytes) -> list[tuple[int, int, Record | None]]:
        """Take whole lines; return where in `data` the seals stand, as (begin, end, record or None if unreadable)."""
        found: list[tuple[int, int, Record | None]] = []
        seals, lines = _seals_in(data)
        begin = done = 0
        for number, at, end in seals:
            self._pass(data, begin, at, number - done)
            found.append((at, end, self._seal(data[at:end], at)))
            begin, done = at, number
        self._pass(data, begin, len(data), lines - done)
        self._offset += len(data)
        return found

    def _pass(self, data: bytes, begin: int, end: int, lines: int) -> None:
        if end > begin:
            self._chain.add(memoryview(data)[begin:end])
            self.lines += lines
            self._last_crc = stated_crc(data[max(begin, end - 12) : end]) or 0

    def _seal(self, line: bytes, at: int) -> Record | None:
        try:
            record = RECORDS.decode(line)
        except (msgspec.DecodeError, UnicodeDecodeError):
            return None  # then the next seal does not hold either, and the line check finds this one
        offset = self._offset + at
        holds = record.seal == self._chain.value() and record.lines == self.lines
        if not holds and self.bad is None:
            self.bad = self.open
            self.bad.end = offset + len(line)
        self.last = record if holds else None
        self.time = record.t if self.bad is None else self.time
        self.open = _Stretch(offset=offset, line=self.lines + 1, crc=self._last_crc)
        self._chain.restart(record.seal or "")
        return record


def _seals_in(data: bytes) -> tuple[list[tuple[int, int, int]], int]:
    """Return the seals in whole lines, as (lines before it, begin, end), and the number of all lines.

    Looking at one byte of each line takes a fifth of the time of `bytes.find` and `bytes.count`.
    """
    text = np.frombuffer(data, dtype=np.uint8)
    ends = np.flatnonzero(text == ord("\n")) + 1
    begins = np.concatenate(([0], ends))[: ends.size]
    perhaps = np.flatnonzero(text[np.minimum(begins + _TELLING, len(data) - 1)] == SEAL_MARK[_TELLING])
    spans = zip(perhaps.tolist(), begins[perhaps].tolist(), ends[perhaps].tolist(), strict=True)
    return [one for one in spans if data.startswith(SEAL_MARK, one[1])], ends.size


def _lines_of(file: BinaryIO, stretch: _Stretch) -> Iterator[bytes]:
    file.seek(stretch.offset)
    left = float("inf") if stretch.end is None else stretch.end - stretch.offset
    while left > 0:
        line = file.readline(LINE_LIMIT)
        if not line:
            return
        left -= len(line)
        yield line


@dataclass(slots=True)
class _Walk:
    """What going through a stretch line by line showed."""

    good: int = 0
    time: float = 0.0
    bad: bytes | None = None
    """The first line that is not as it was written."""
    crc: int = 0
    """What the line before it states."""

    @property
    def torn(self) -> bool:
        """Whether the bad line is merely an unfinished last one."""
        return (
            self.bad is not None
            and not self.bad.endswith(b"\n")
            and not line_holds(self.bad[:-1] + b"\n", self.crc)
        )


def _walk(path: Path, stretch: _Stretch) -> _Walk:
    walk = _Walk(crc=stretch.crc)
    with path.open("rb") as file:
        for line in _lines_of(file, stretch):
            try:
                time = RECORDS.decode(line).t
            except (msgspec.DecodeError, UnicodeDecodeError):
                time = None
            if time is None or not line_holds(line, walk.crc):
                walk.bad = line
                break
            walk.crc = stated_crc(line) or 0
            walk.good += 1
            walk.time = max(walk.time, time)
    return walk


def judge(scan: SealScan, path: Path) -> Verification:
    """Return what a finished scan of one part says, going line by line only through the stretch in doubt."""
    stretch = scan.bad or scan.open
    walk = _walk(path, stretch)
    state, first_bad, reason = _finding(path, scan, stretch, walk)
    last = scan.last if scan.bad is None else None
    return Verification(
        state=state,
        path=str(path),
        good_lines=(first_bad or stretch.line + walk.good) - 1,
        good_until_time=max(scan.time, walk.time),
        first_bad_line=first_bad,
        sealed=state == "intact",
        seal=(last.seal or "") if last is not None else "",
        reason=reason,
    )


def _finding(path: Path, scan: SealScan, stretch: _Stretch, walk: _Walk) -> tuple[State, int | None, str]:
    line = stretch.line + walk.good
    behind = walk.good - 1
    if scan.bad is not None and walk.bad is None:
        first = stretch.line
        return "changed", first, f"something in lines {first} to {line - 1} is not as it was written"
    if scan.bad is None and walk.good and scan.last is not None and scan.last.end is not None:
        if behind or walk.bad is not None:
            return "changed", stretch.line + 1, "something stands behind the final seal"
        if scan.last.next is not None and not beside(path, scan.last.next).exists():
            return "cut short", None, f"the next part, {scan.last.next}, is missing"
        return "intact", None, "every seal holds, up to the final one"
    if scan.bad is not None or (walk.bad is not None and not walk.torn):
        return "changed", line, f"line {line} is not as it was written"
    unfinished = " and an unfinished line" if walk.torn else ""
    return "cut short", None, f"no final seal; the last seal is followed by {behind} good lines{unfinished}"


def opened(path: Path) -> BinaryIO:
    """Open a part for reading.

    Raises
    ------
    LogError
        It cannot be opened, or is no file but a pipe or a device, of which a reader could wait for ever.
    """
    try:
        mode = path.stat().st_mode
        if not (stat.S_ISREG(mode) or stat.S_ISDIR(mode)):
            raise LogError(f"{path}: cannot be read: a pipe or a device; expected a run log")
        return path.open("rb")
    except OSError as cause:
        raise LogError(f"{path}: cannot be read: {cause.strerror}; expected a run log") from cause


def scan_part(path: Path, start: str) -> SealScan:
    """Read one part from end to end through a `SealScan`."""
    scan = SealScan(start)
    rest: list[bytes] = []
    with opened(path) as file:
        while chunk := file.read(CHUNK):
            cut = chunk.rfind(b"\n") + 1
            if cut:
                scan.feed(b"".join([*rest, chunk[:cut]]))
                rest = []
            rest.append(chunk[cut:])
            if len(rest) * CHUNK > LINE_LIMIT:
                break
    return scan


def header_of(path: Path) -> Header:
    """Return the header of a part.

    Raises
    ------
    LogError
        The file cannot be opened, or does not begin as a run log does.
    """
    with opened(path) as file:
        return read_header(file.readline(LINE_LIMIT), path)


def beside(path: Path, name: str) -> Path:
    """Return the part called `name` in the folder of `path`; a name that would leave the folder is refused."""
    if Path(name).name != name or "\\" in name or not name:
        raise LogError(f"{path}: names another part {name!r}; expected a plain file name")
    return path.with_name(name)


def first_part(path: Path) -> Path:
    """Return the first part of the log that `path` is a part of.

    Raises
    ------
    LogError
        An earlier part is missing or is no run log.
    """
    part = path
    for _ in range(_MOST_PARTS):
        previous = header_of(part).previous
        if previous is None:
            return part
        part = beside(part, previous.name)
    raise LogError(f"{path}: its parts name one another in a circle")


def combined(parts: list[Verification]) -> Verification:
    """Return one finding over the parts of a log, in order: the first that is not intact decides."""
    before = 0
    for one in parts:
        if one.state != "intact":
            break
        before += one.good_lines
    else:
        before -= one.good_lines
    return replace(one, good_lines=before + one.good_lines)


def verify_log(path: Path) -> Verification:
    """Check a run log: all of its parts, every byte up to the last seal, and line by line what stands behind it.

    Parameters
    ----------
    path : Path
        Any part of the log.

    Returns
    -------
    Verification
        "intact": closed, and every seal holds. "cut short": good as far as it goes, without a final seal (the
        program was killed, or still writes it). "changed": some byte is not as it was written.

    Raises
    ------
    LogError
        The file cannot be opened or is no run log.
    """
    part: Path | None = first_part(path)
    found: list[Verification] = []
    while part is not None and len(found) < _MOST_PARTS:
        scan = scan_part(part, found[-1].seal if found else FIRST_SEAL)
        found.append(judge(scan, part))
        part = _next(part, scan)
    return combined(found)


def _next(part: Path, scan: SealScan) -> Path | None:
    if scan.last is None or scan.last.next is None:
        return None
    following = beside(part, scan.last.next)
    return following if following.exists() else None
