"""Lines as a bad cable makes them: copies of good lines, damaged so that no reader can take them for good ones."""

from collections.abc import Callable

import numpy as np

from eastfall.io.sitefile import LinkSettings

_Damage = Callable[[bytes, bytes, np.random.Generator], bytes]

_CONTROLS = (b"\x00", b"\x07", b"\x1b[2J", b"\x08\x08", b"\x9b31m", b"\x7f")
_OVERLONG = 6000
"""Bytes; more than any reader of short lines should keep."""


def broken_kinds(settings: LinkSettings) -> tuple[str, ...]:
    """Return the kinds of damage that can be told from a good line in this line form."""
    checked = settings.checksum != "none" or settings.form == "iec61162"
    return tuple(kind for kind in _DAMAGES if checked or kind != "checksum")


def broken_line(kind: str, body: bytes, settings: LinkSettings, rng: np.random.Generator) -> bytes:
    """Damage a good line.

    Parameters
    ----------
    kind : str
        One of `broken_kinds`.
    body : bytes
        The good line without its end.
    settings : LinkSettings
        The form of the line.
    rng : numpy Generator
        Chooses where.

    Returns
    -------
    bytes
        The damaged line without an end; it holds neither line feed nor carriage return.
    """
    delimiter = b"," if settings.form == "iec61162" else settings.delimiter.encode()
    return _DAMAGES[kind](body, delimiter, rng)


def _truncated(body: bytes, delimiter: bytes, rng: np.random.Generator) -> bytes:
    """Cut off the end and at least one delimiter with it, so that a field is missing."""
    last = body.rfind(delimiter)
    return body[: int(rng.integers(1, last + 1))] if last > 0 else b"-"


def _garbled(body: bytes, _delimiter: bytes, rng: np.random.Generator) -> bytes:
    """Overwrite digits by bytes of no number, at the front where a number always stands."""
    digits = [place for place, one in enumerate(body) if chr(one).isdigit()]
    damaged = bytearray(body)
    for place in {digits[0], *rng.choice(digits, size=2).tolist()}:
        damaged[place] = int(rng.integers(0xA1, 0xFF))
    return bytes(damaged)


def _checksum(body: bytes, _delimiter: bytes, rng: np.random.Generator) -> bytes:
    """Change one digit of the checksum."""
    place = int(rng.integers(body.rfind(b"*") + 1, len(body)))
    now = body[place : place + 1]
    others = [one for one in b"0123456789ABCDEF" if one != now.upper()[0]]
    return body[:place] + bytes([others[int(rng.integers(len(others)))]]) + body[place + 1 :]


def _doubled(body: bytes, _delimiter: bytes, _rng: np.random.Generator) -> bytes:
    """Run two lines together, as where a line end was lost."""
    return body + body


def _overlong(body: bytes, _delimiter: bytes, _rng: np.random.Generator) -> bytes:
    return body + b"7" * _OVERLONG


def _control(body: bytes, _delimiter: bytes, rng: np.random.Generator) -> bytes:
    """Put control characters into the first number."""
    first = next(place for place, one in enumerate(body) if chr(one).isdigit())
    return body[: first + 1] + _CONTROLS[int(rng.integers(len(_CONTROLS)))] + body[first + 1 :]


_DAMAGES: dict[str, _Damage] = {
    "truncated": _truncated,
    "garbled": _garbled,
    "checksum": _checksum,
    "doubled": _doubled,
    "overlong": _overlong,
    "control": _control,
}
