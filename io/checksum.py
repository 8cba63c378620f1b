r"""Line checksums: the exclusive-or of IEC 61162-1 and the CRC-16 of Modbus, for one line and for many at once.

Conventions, for lines without their end:

- `xor`: the line ends in `*HH`, two hexadecimal digits, upper case when written and either case when read. They are
  the exclusive-or of every byte before the `*`, from after the `$` where the line begins with one. So a line of the
  columns form with this checksum and an IEC 61162-1 sentence are summed alike.
- `crc16-modbus`: the line ends in `*HHHH`, four hexadecimal digits, the most significant first: the CRC-16 of every
  byte before the `*`, a leading `$` included.

References
----------
IEC 61162-1, Maritime navigation and radiocommunication equipment: the sentence's checksum field.
MODBUS over Serial Line, Specification and Implementation Guide V1.02 (2006), section 6.2.2: polynomial 0xA001
(reflected 0x8005), start 0xFFFF, no final exclusive-or. Check value of "123456789": 0x4B37 (Catalogue of parametrised
CRC algorithms, CRC-16/MODBUS).
"""

from functools import reduce
from operator import xor as exclusive_or
from typing import Literal

import numpy as np
from numpy.typing import NDArray

Checksum = Literal["none", "xor", "crc16-modbus"]
WIDTH = {"xor": 2, "crc16-modbus": 4}
"""Hexadecimal digits after the `*`."""
CHECKSUM_FAULTS = ("", "checksum missing", "checksum wrong")
_MANY = 64
"""From this many lines on, all at once is faster than one by one (measured: 64 lines of 30 bytes)."""


def _crc_entry(byte: int) -> int:
    for _ in range(8):
        byte = (byte >> 1) ^ (0xA001 if byte & 1 else 0)
    return byte


_CRC_TABLE = tuple(_crc_entry(byte) for byte in range(256))
_CRC_ARRAY = np.array(_CRC_TABLE, dtype=np.int64)
_HEX = np.full(256, -1, dtype=np.int64)
_HEX[np.frombuffer(b"0123456789abcdefABCDEF", np.uint8)] = [*range(16), *range(10, 16)]


def xor(data: bytes) -> int:
    """Return the exclusive-or of all bytes, 0 to 255."""
    return reduce(exclusive_or, data, 0)


def crc16_modbus(data: bytes) -> int:
    """Return the CRC-16 of Modbus, 0 to 65535."""
    crc = 0xFFFF
    for byte in data:
        crc = (crc >> 8) ^ _CRC_TABLE[(crc ^ byte) & 0xFF]
    return crc


def checksum_of(kind: Checksum, body: bytes) -> bytes:
    """Return the hexadecimal digits that follow the `*` after `body`.

    Parameters
    ----------
    kind : str
        "xor" or "crc16-modbus"; "none" gives an empty string.
    body : bytes
        Everything before the `*`.
    """
    if kind == "xor":
        return b"%02X" % xor(body.removeprefix(b"$"))
    if kind == "crc16-modbus":
        return b"%04X" % crc16_modbus(body)
    return b""


def with_checksum(kind: Checksum, body: bytes) -> bytes:
    """Return `body` as a line that carries its checksum."""
    return body if kind == "none" else body + b"*" + checksum_of(kind, body)


def verified(kind: Checksum, line: bytes) -> tuple[bytes, str]:
    """Take the checksum off a line.

    Parameters
    ----------
    kind : str
        "xor" or "crc16-modbus".
    line : bytes
        A line without its end.

    Returns
    -------
    body : bytes
        What stood before the `*`; the whole line where there is no checksum.
    fault : str
        Empty if the checksum is right, else "checksum missing" or "checksum wrong".
    """
    body, star, digits = line.rpartition(b"*")
    digits = digits.rstrip()
    if not star or len(digits) != WIDTH[kind]:
        return line, "checksum missing"
    return body, "" if digits.upper() == checksum_of(kind, body) else "checksum wrong"


def bodies(kind: Checksum, data: bytes) -> tuple[bytes, NDArray[np.int8]]:
    """Take the checksums off many lines; what `verified` says of one.

    Parameters
    ----------
    kind : str
        "xor" or "crc16-modbus".
    data : bytes
        Whole lines, each ending in a line feed.

    Returns
    -------
    bodies : bytes
        As many lines: the bodies, and an empty line for each whose checksum is missing or wrong.
    faults : ndarray, shape (n,)
        For each line an index into `CHECKSUM_FAULTS`.
    """
    count = data.count(b"\n")
    if count < _MANY:
        told = [verified(kind, line) for line in data.split(b"\n")[:-1]]
        kept = b"".join((b"" if fault else body) + b"\n" for body, fault in told)
        return kept, np.array([CHECKSUM_FAULTS.index(fault) for _, fault in told], dtype=np.int8)
    return _many_bodies(kind, data)


def _many_bodies(kind: Checksum, data: bytes) -> tuple[bytes, NDArray[np.int8]]:
    codes = np.frombuffer(data, np.uint8)
    ends = np.flatnonzero(codes == ord("\n"))
    starts = np.concatenate([[0], ends[:-1] + 1])
    stars = ends - WIDTH[kind] - 1
    usual = stars > starts
    usual &= codes[stars] == ord("*")
    stated = _stated(kind, codes, stars[usual])
    usual[usual] = stated >= 0
    right = usual.copy()
    right[usual] = stated[stated >= 0] == _summed(kind, codes, starts[usual], stars[usual])
    faults = np.where(right, 0, CHECKSUM_FAULTS.index("checksum wrong")).astype(np.int8)
    stops = np.where(right, stars, starts)
    kept = np.zeros(codes.size + 1, dtype=np.int8)
    np.add.at(kept, starts, 1)
    np.add.at(kept, stops, -1)
    keep = np.cumsum(kept[:-1], dtype=np.int8).astype(bool)
    keep[ends] = True
    if not usual.all():  # blanks behind the checksum, none, or no digits: few lines, told one by one
        return _with_unusual(kind, data, np.flatnonzero(~usual), codes[keep].tobytes(), faults)
    return codes[keep].tobytes(), faults


def _with_unusual(
    kind: Checksum, data: bytes, which: NDArray[np.intp], kept: bytes, faults: NDArray[np.int8]
) -> tuple[bytes, NDArray[np.int8]]:
    lines, done = data.split(b"\n"), kept.split(b"\n")
    for number in which.tolist():
        body, fault = verified(kind, lines[number])
        done[number] = b"" if fault else body
        faults[number] = CHECKSUM_FAULTS.index(fault)
    return b"\n".join(done), faults


def _stated(kind: Checksum, codes: NDArray[np.uint8], stars: NDArray[np.intp]) -> NDArray[np.int64]:
    """Return what the digits after the `*` say; -1 or less where they are not hexadecimal."""
    value = np.zeros(stars.size, dtype=np.int64)
    for place in range(1, WIDTH[kind] + 1):
        digit = _HEX[codes[stars + place]]
        value = np.where(digit < 0, -(1 << 40), value * 16 + digit)
    return value


def _summed(
    kind: Checksum, codes: NDArray[np.uint8], starts: NDArray[np.intp], stops: NDArray[np.intp]
) -> NDArray[np.int64]:
    """Return the checksum of each span, none of them empty."""
    if not starts.size:
        return np.empty(0, dtype=np.int64)
    if kind == "xor":
        sums = np.bitwise_xor.reduceat(codes, np.column_stack([starts, stops]).ravel())[::2].astype(np.int64)
        return np.where(codes[starts] == ord("$"), sums ^ ord("$"), sums)
    crc, at = np.full(starts.size, 0xFFFF, dtype=np.int64), starts.copy()
    live = np.arange(starts.size)
    while live.size:
        now = crc[live]
        crc[live] = (now >> 8) ^ _CRC_ARRAY[(now ^ codes[at[live]]) & 0xFF]
        at[live] += 1
        live = live[at[live] < stops[live]]
    return crc
