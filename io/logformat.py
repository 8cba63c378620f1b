"""The shape of a run log on disk, schema 1: record types, line checks, file names; writing it is `runlog`'s.

A run log is JSON Lines, UTF-8, one record a line, each line ended by one line feed. Bytes from instruments are
kept as text by Latin-1, one character a byte, so nothing is lost whatever they are.

header    ``{"eastfall":"run log","schema":1,"program":…,"started_at":…,"kind":…,"part":1,"previous":null,…,"site":…}``
raw       ``{"t":1.25,"raw":["line","line"]}``, and ``"link":1`` behind it for any link but the first
event     ``{"t":1.25,"event":"acknowledge","fields":{…}}``
seal      ``{"seal":"<64 hex digits>","t":5.0,"lines":312,"end":null,"next":null}``; `end` is "closed" or "rolled"

Every line ends with ``,"crc":"<8 hex digits>"}``: the CRC-32 of the line before that point, continued from the CRC
that the line before states. It costs next to nothing and names the line where the seals only name the stretch.
"""

import re
import unicodedata
import zlib
from pathlib import Path
from typing import Any

import msgspec
import numpy as np

from eastfall.io.arrivals import TOLD
from eastfall.io.errors import LogError

SCHEMA = 1
SUFFIX = ".eastfall.jsonl"
FIRST_SEAL = "0" * 64
SEAL_MARK = b'{"seal":'
EVENT_MARK = b',"event":"'
TOLD_MARK = EVENT_MARK + TOLD.encode() + b'"'
"""Of the change of an alarm, which the program tells; a replay finds it anew."""
_CHECK = b',"crc":"%08x"}\n'
CHECK_LENGTH = len(_CHECK % 0)
LONGEST = 1e12
"""Largest time that a record may state, either sign [s], as for an instrument's; beyond it the record is damaged."""
LINE_LIMIT = 64 << 20
"""Longest record that a reader accepts [bytes]; a longer one is no run log."""


class Previous(msgspec.Struct, frozen=True):
    """The part before this one, and the seal that it was closed with."""

    name: str
    seal: str


class Header(msgspec.Struct, frozen=True, kw_only=True):
    """First record of every part."""

    eastfall: str
    schema: int
    program: str = ""
    started_at: str = ""
    kind: str = ""
    part: int = 1
    previous: Previous | None = None
    source: str = ""
    site: str = ""


class RawRecord(msgspec.Struct, omit_defaults=True):
    """Lines that arrived together, as written."""

    t: float
    raw: list[str]
    link: int = 0


class EventRecord(msgspec.Struct):
    """Something that happened to the run, as written."""

    t: float
    event: str
    fields: dict[str, Any]


class SealRecord(msgspec.Struct):
    """The chain's value over everything before it in this part, as written."""

    seal: str
    t: float
    lines: int
    end: str | None = None
    next: str | None = None


class Record(msgspec.Struct, gc=False):
    """Any record but the header, as read."""

    t: float = 0.0
    raw: list[str] | None = None
    link: int = 0
    event: str | None = None
    fields: dict[str, Any] | None = None
    seal: str | None = None
    lines: int = 0
    end: str | None = None
    next: str | None = None


RECORDS = msgspec.json.Decoder(Record)
_HEADERS = msgspec.json.Decoder(Header)


def _plain_number(value: object) -> object:
    """Return a numpy scalar as the plain number that it is, anything else as text."""
    return value.item() if isinstance(value, np.generic) else str(value)


_ENCODER = msgspec.json.Encoder(enc_hook=_plain_number)


def _plain(value: object) -> object:
    """Return `value` with every text made encodable: a lone surrogate becomes a visible escape."""
    if isinstance(value, str):
        return value.encode("utf-8", "backslashreplace").decode("utf-8")
    if isinstance(value, dict):
        return {_plain(str(key)): _plain(one) for key, one in value.items()}
    if isinstance(value, (list, tuple)):
        return [_plain(one) for one in value]
    return value


def encode(record: msgspec.Struct) -> bytes:
    """Return a record as JSON without its closing brace, ready for `checked`."""
    try:
        return _ENCODER.encode(record)[:-1]
    except UnicodeEncodeError:
        return _ENCODER.encode(_plain(msgspec.to_builtins(record, enc_hook=_plain_number)))[:-1]


def checked(body: bytes, crc: int) -> tuple[bytes, int]:
    """Return the finished line for `body`, and its CRC-32 continued from `crc`."""
    crc = zlib.crc32(body, crc)
    return body + _CHECK % crc, crc


def stated_crc(line: bytes) -> int | None:
    """Return the CRC-32 that a line states, or None if it states none."""
    try:
        return int(line[-11:-3], 16)
    except ValueError:
        return None


def line_holds(line: bytes, crc: int) -> bool:
    """Return whether a line, line feed included, is to the byte what `checked` made of it after `crc`."""
    body = line[:-CHECK_LENGTH]
    wanted: bytes = body + _CHECK % zlib.crc32(body, crc)
    return line == wanted


def read_header(line: bytes, path: Path) -> Header:
    """Return the header of a run log.

    Raises
    ------
    LogError
        The line is not the header of a run log, or of one that only a newer program can read.
    """
    try:
        header = _HEADERS.decode(line)
    except (msgspec.DecodeError, UnicodeDecodeError) as cause:
        raise LogError(f"{path}, line 1: expected the header of an eastfall run log") from cause
    if header.eastfall != "run log" or header.schema < 1:
        raise LogError(f"{path}, line 1: expected the header of an eastfall run log")
    if header.schema > SCHEMA:
        raise LogError(
            f"{path}, line 1: schema {header.schema} comes from a newer eastfall ({header.program!r}); "
            f"this one reads up to {SCHEMA}: update eastfall"
        )
    return header


def is_run_log(path: Path) -> bool:
    """Return whether a file begins like a run log (False when it cannot be read)."""
    try:
        with path.open("rb") as file:
            return file.read(12) == b'{"eastfall":'
    except OSError:
        return False


def file_name(site: str, started: str, part: int = 1) -> str:
    """Return the name of a part: the site in plain ASCII, the start, the part; safe on every file system."""
    plain = unicodedata.normalize("NFKD", site).encode("ascii", "ignore").decode()
    slug = re.sub(r"[^a-z0-9]+", "-", plain.lower()).strip("-")[:60].strip("-") or "site"
    tail = f".part-{part:04d}" if part > 1 else ""
    return f"{slug}_{started}{tail}{SUFFIX}"
