r"""The IEC 61162-1 form: DPT and XDR sentences into readings.

Conventions of this form; the standard leaves the names and the pairing to the maker of the instrument:

- A sentence is `$`, two letters or digits for the talker, the type, comma-separated fields, `*` and the checksum, which
  is required. With its line end it has 82 characters at most.
- `$..DPT,depth,offset,range`: depth and offset in metres. The reading's depth is depth + offset, offset 0 where it is
  empty: the standard lets the offset carry the depth from the transducer to the water line (positive) or to the keel
  (negative), and in a shaft it carries it from the sheave or encoder zero to the collar. The range is not used.
- `$..XDR,type,value,unit,name,…`, groups of four. Used are, by type and unit, and then by name in either case:
  A, D (angle, degrees): A, PITCH, PTCH are tilt A; B, ROLL are tilt B; AZIMUTH, AZ, HEADING are the azimuth; FACE is
  the face. D, M (displacement, metres): EAST and NORTH are direct offsets, DEPTH and an empty name are depth. C, C
  (temperature, degrees Celsius) is the temperature whatever the name; U, V (voltage) is the supply. Other groups are
  ignored. An empty value is a fault for a quantity that the site file's `columns` name and a reading needs, else NaN.
- `columns` in the site file says which quantities this link speaks, in any order. Where it names a depth and a tilt or
  offset, they may come in one XDR, or as a DPT (or XDR with the depth alone) and then an XDR with the rest: the second
  completes the reading and gives it its time. A second sentence of the same half means that the first stays without
  its partner, a fault; a depth is never used twice. Where `columns` names only one half, every sentence that carries it
  is a reading.
- Other well-formed sentences, among them proprietary ones and those that begin with `!`, are unused and no fault.

References
----------
IEC 61162-1, Maritime navigation and radiocommunication equipment and systems, digital interfaces, part 1: single talker
and multiple listeners; sentences DPT and XDR.
"""

import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from eastfall.io.arrivals import LineBlock
from eastfall.io.checksum import verified
from eastfall.io.decoded import (
    CODE,
    IGNORED,
    PARTNER,
    QUANTITIES,
    UNUSED,
    Assembler,
    Codes,
    Decoded,
    Table,
    too_long,
)
from eastfall.physics.errors import ParameterError

LONGEST = 80
"""Characters without the line end; 82 with it."""

_NUMBER = re.compile(rb"[+-]?(?:\d++(?:\.\d*+)?|\.\d++)")
_NOT_TEXT = re.compile(rb"[^ -~]")
_FORMATTED = re.compile(rb"\$[0-9A-Za-z]{3,}(?:,[^$!*]*)?")
_ADDRESS = re.compile(rb"(?!P)[0-9A-Z]{2}(?:DPT|XDR)")
_ANGLES = {
    b"A": "tilt_a_deg",
    b"PITCH": "tilt_a_deg",
    b"PTCH": "tilt_a_deg",
    b"B": "tilt_b_deg",
    b"ROLL": "tilt_b_deg",
    b"AZIMUTH": "azimuth_deg",
    b"AZ": "azimuth_deg",
    b"HEADING": "azimuth_deg",
    b"FACE": "face_deg",
}
_DISPLACEMENTS = {b"EAST": "east_mm", b"NORTH": "north_mm", b"DEPTH": "depth_m", b"": "depth_m"}
_FACTOR = {"east_mm": 1000.0, "north_mm": 1000.0}
"""From the metres of the sentence to the unit of the key."""
_SIDEWAYS = frozenset({"tilt_a_deg", "tilt_b_deg", "east_mm", "north_mm"})

Values = dict[str, float]
Places = NDArray[np.int_]


class _SentenceFault(Exception):  # noqa: N818 (it never leaves this module)
    """Why a sentence is refused; its text is a key of `io.decoded.FAULTS`."""


@dataclass(frozen=True, slots=True)
class _Held:
    """A sentence that waits for its partner in a later block."""

    line: bytes
    time: float
    number: int


class SentenceDecoder:
    """Decodes IEC 61162-1 sentences.

    Parameters
    ----------
    columns : sequence of str
        What the link speaks, in any order: keys of `io.decoded.QUANTITIES` without `time_s`; "-" is ignored.

    Raises
    ------
    ParameterError
        A column that these sentences cannot carry, or none at all.
    """

    def __init__(self, columns: Sequence[str]) -> None:
        names = [name for name in dict.fromkeys(columns) if name != IGNORED]
        if not names or "time_s" in names or not set(names) <= QUANTITIES.keys():
            raise ParameterError(
                "columns", ", ".join(columns), "", "what DPT and XDR sentences carry; no time_s among them"
            )
        self._names = names
        self._needed = frozenset(name for name in names if QUANTITIES[name].needed)
        self._side = self._needed & _SIDEWAYS
        self._pairs = bool(self._side) and "depth_m" in self._needed
        self._held: _Held | None = None
        self._assembler = Assembler(names)

    @property
    def pending(self) -> int:
        """Sentences that wait for their partner: 0 or 1."""
        return int(self._held is not None)

    def decode(self, block: LineBlock) -> Decoded:
        """Decode a block of lines; a sentence held back from before is judged again as the first of them."""
        block, numbers = self._with_held(block)
        codes = too_long(block)
        table = np.full((len(block), len(self._names)), np.nan)
        waiting: tuple[int, Values] | None = None
        for number, line in enumerate(block.lines()):
            if codes[number] == 0:
                values = self._values(line, number, codes)
                if values is not None:
                    waiting = self._place(number, values, waiting, table, codes)
        if waiting is not None:
            block, table, codes, numbers = self._hold(waiting[0], block, table, codes, numbers)
        return self._assembler.decoded(table, codes, block, numbers)

    def _with_held(self, block: LineBlock) -> tuple[LineBlock, Places]:
        numbers = np.arange(block.first_line, block.first_line + len(block))
        held, self._held = self._held, None
        if held is None:
            return block, numbers
        whole = LineBlock(
            data=held.line + b"\n" + block.data,
            times=np.concatenate([[held.time], block.times]),
            first_line=block.first_line,
            link=block.link,
        )
        return whole, np.concatenate([[held.number], numbers])

    def _hold(
        self, which: int, block: LineBlock, table: Table, codes: Codes, numbers: Places
    ) -> tuple[LineBlock, Table, Codes, Places]:
        """Take the sentence that still waits out of its block."""
        lines = block.lines()
        self._held = _Held(lines[which], float(block.times[which]), int(numbers[which]))
        rest = np.arange(len(block)) != which
        left = LineBlock(
            data=b"".join(line + b"\n" for line, keep in zip(lines, rest, strict=True) if keep),
            times=block.times[rest],
            first_line=block.first_line,
            link=block.link,
        )
        return left, table[rest], codes[rest], numbers[rest]

    def _place(
        self, number: int, values: Values, waiting: tuple[int, Values] | None, table: Table, codes: Codes
    ) -> tuple[int, Values] | None:
        """Enter a sentence in the table or let it wait; return the sentence that waits after it."""
        depth, side = "depth_m" in values, bool(values.keys() & self._side)
        if self._pairs and depth != side:
            if depth:
                self._orphan(waiting, codes)
                return number, values
            if waiting is None:
                codes[number] = CODE["sentence without partner"]
                return None
            codes[waiting[0]] = PARTNER
            values = waiting[1] | values
        elif self._needed and not (depth or side):
            codes[number] = UNUSED
            return waiting
        else:
            self._orphan(waiting, codes)
        table[number] = [values.get(name, np.nan) for name in self._names]
        return None

    @staticmethod
    def _orphan(waiting: tuple[int, Values] | None, codes: Codes) -> None:
        if waiting is not None:
            codes[waiting[0]] = CODE["sentence without partner"]

    def _values(self, line: bytes, number: int, codes: Codes) -> Values | None:
        """Return what a sentence says of the link's quantities; None, with its code, if that is nothing."""
        try:
            fields = _fields(line)
            values = self._spoken(fields) if fields else {}
        except _SentenceFault as fault:
            codes[number] = CODE[str(fault)]
            return None
        if not values:
            codes[number] = UNUSED
            return None
        return values

    def _spoken(self, fields: list[bytes]) -> Values:
        kind, groups = fields[0][2:], fields[1:]
        if kind == b"DPT":
            return self._depth(groups)
        if len(groups) % 4:
            raise _SentenceFault("wrong number of fields")
        values: Values = {}
        for place in range(0, len(groups), 4):
            name = _name_of(groups[place], groups[place + 2], groups[place + 3])
            if name in self._names:
                if name in values:
                    raise _SentenceFault("repeated quantity")
                values[name] = self._number(name, groups[place + 1]) * _FACTOR.get(name, 1.0)
        if values.keys() & self._side and not values.keys() >= self._side:
            raise _SentenceFault("tilt missing")
        return values

    def _depth(self, fields: list[bytes]) -> Values:
        if not 1 <= len(fields) <= 3:
            raise _SentenceFault("wrong number of fields")
        if "depth_m" not in self._names:
            return {}
        offset = fields[1] if len(fields) > 1 and fields[1] else b"0"
        return {"depth_m": self._number("depth_m", fields[0]) + self._number("depth_m", offset)}

    def _number(self, name: str, field: bytes) -> float:
        if not field and name not in self._needed:
            return float("nan")
        if not field:
            raise _SentenceFault("empty field")
        if not _NUMBER.fullmatch(field):
            raise _SentenceFault("not a number")
        return float(field)


def _fields(line: bytes) -> list[bytes]:
    """Return the fields of a DPT or XDR sentence, its address first; nothing for any other good sentence."""
    line = line.strip(b" \t")
    if not line:
        return []
    if _NOT_TEXT.search(line):
        raise _SentenceFault("not plain text")
    if line[:1] not in (b"$", b"!"):
        raise _SentenceFault("not a sentence")
    if len(line) > LONGEST:
        raise _SentenceFault("sentence too long")
    body, fault = verified("xor", b"$" + line[1:])
    if fault:
        raise _SentenceFault(fault)
    if not _FORMATTED.fullmatch(body):
        raise _SentenceFault("not a sentence")
    fields = body[1:].upper().split(b",")
    used = line[:1] == b"$" and _ADDRESS.fullmatch(fields[0])
    return fields if used else []


def _name_of(kind: bytes, unit: bytes, name: bytes) -> str | None:
    """Return the quantity that a group of an XDR sentence speaks of."""
    match (kind, unit):
        case (b"A", b"D"):
            return _ANGLES.get(name)
        case (b"D", b"M"):
            return _DISPLACEMENTS.get(name)
        case (b"C", b"C"):
            return "temperature_c"
        case (b"U", b"V"):
            return "supply_v"
    return None
