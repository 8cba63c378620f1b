r"""The columns form: one line, one reading, fields in the order that the site file names them.

Conventions of this form:

- Fields stand between single delimiters; blanks and tabs around a number are ignored. With a blank as the delimiter
  any run of blanks and tabs is one delimiter, and blanks at either end of the line are ignored.
- A number is an optional sign, decimal digits with at most one point, and an optional exponent. Words (nan, inf) are
  no numbers. Where the site file says so the sign before the fraction is a comma; a point is no part of a number then.
- An empty field means that the channel did not speak: NaN for azimuth, temperature, supply and face; a fault for time,
  depth, tilts and offsets, which a reading is nothing without.
- A line with a field too many or too few is refused whole: which of them is missing would be a guess. So is a line
  with any number out of range.
- An empty line is unused and no fault. A checksum, where the site file names one, is as `io.checksum` states.

Blocks of many lines are read all at once by `io.decimals`; lines that it refuses, and small blocks, go through the
careful reader here. Both give the same numbers to the last bit.
"""

import re
from collections.abc import Iterator, Sequence
from typing import Literal

import numpy as np

from eastfall.io import checksum, decimals
from eastfall.io.arrivals import LineBlock
from eastfall.io.decoded import (
    CODE,
    IGNORED,
    QUANTITIES,
    UNUSED,
    Assembler,
    Codes,
    Decoded,
    Table,
    too_long,
)
from eastfall.io.framing import count_lines
from eastfall.physics.errors import ParameterError

_MANY = 50
"""From this many lines on, all at once is faster (measured: one by one 77 µs for 10 lines, 210 for 50; at once 205)."""

_NUMBER = rb"[+-]?(?:\d++(?:\.\d*+)?|\.\d++)(?:[eE][+-]?\d++)?"
_NOT_TEXT = re.compile(rb"[^\t -~]")
_CANNOT_DELIMIT = frozenset(b"0123456789+-.eE*$\n\r\0")
_COMMA_FOR_POINT = bytes.maketrans(b",.", b".,")
"""Both are changed over, so that 1.234,5 is as little a number as 1,234.5 is with points."""
DecimalSign = Literal["point", "comma"]
_CHECKSUM_CODES = np.array([CODE[one] for one in checksum.CHECKSUM_FAULTS], dtype=np.int8)


class ColumnsDecoder:
    """Decodes the columns form.

    Parameters
    ----------
    columns : sequence of str
        Names of the fields in order: keys of `io.decoded.QUANTITIES`, or "-" for a field to ignore.
    delimiter : str
        One ASCII character that no number holds.
    kind : str
        Of the checksum.
    decimal : str
        Sign before the fraction of a number.

    Raises
    ------
    ParameterError
        An unknown or repeated column, nothing but ignored ones, or a delimiter that cannot be one.
    """

    pending = 0

    def __init__(
        self,
        columns: Sequence[str],
        delimiter: str = ",",
        kind: checksum.Checksum = "none",
        decimal: DecimalSign = "point",
    ) -> None:
        names = [name for name in columns if name != IGNORED]
        if not names or len(set(names)) < len(names) or not set(names) <= QUANTITIES.keys():
            raise ParameterError(
                "columns", ", ".join(columns), "", f"each once, of {', '.join(QUANTITIES)}, or -"
            )
        if len(delimiter) != 1 or not delimiter.isascii() or ord(delimiter) in _CANNOT_DELIMIT:
            raise ParameterError("delimiter", repr(delimiter), "", "one character that no number holds")
        self._comma = decimal == "comma"
        if self._comma and delimiter == ",":
            raise ParameterError("delimiter", repr(delimiter), "", "another one than the decimal comma")
        self._names = names
        self._columns = tuple(columns)
        self._kept = np.array([name != IGNORED for name in columns])
        self._needed = [QUANTITIES[name].needed for name in names]
        self._delimiter = delimiter.encode()
        self._blank = delimiter == " "
        self._kind = kind
        self._assembler = Assembler(names)
        self._line = re.compile(self._pattern())

    def _pattern(self) -> bytes:
        """Return what a good line looks like: one group for each kept column."""
        pad = {b" ": b"", b"\t": b" *+"}.get(self._delimiter, rb"[ \t]*+")
        number = pad + b"(" + _NUMBER + b")" + pad
        perhaps = pad + b"(" + _NUMBER + b")?+" + pad
        anything = b"[^" + re.escape(self._delimiter) + b"]*+"
        fields = [
            anything if name == IGNORED else number if QUANTITIES[name].needed else perhaps
            for name in self._columns
        ]
        return re.escape(self._delimiter).join(fields)

    def decode(self, block: LineBlock) -> Decoded:
        """Decode a block of lines."""
        codes = too_long(block)
        table = np.full((len(block), len(self._names)), np.nan, order="F")  # column by column is quicker
        line = 0
        for piece in _pieces(block.data):
            part = slice(line, line + count_lines(piece))
            self._read(piece, table[part], codes[part])
            line = part.stop
        return self._assembler.decoded(table, codes, block)

    def _read(self, data: bytes, table: Table, codes: Codes) -> None:
        if self._kind != "none":
            data, wrong = checksum.bodies(self._kind, data)
            codes[:] = np.where(codes == 0, _CHECKSUM_CODES[wrong], codes)
        if self._comma:
            data = data.translate(_COMMA_FOR_POINT)
        if self._blank:
            data = _with_single_blanks(data)
        if len(codes) < _MANY:
            which = np.flatnonzero(codes == 0).tolist()
            lines = data.split(b"\n")
            self._read_lines([lines[one] for one in which], which, table, codes)
        else:
            self._read_at_once(data, table, codes)

    def _read_at_once(self, data: bytes, table: Table, codes: Codes) -> None:
        """Read what is plain all at once, and the rest line by line."""
        fields = decimals.fields_of(data, self._delimiter[0])
        counts = decimals.counts_of(fields, len(codes), len(self._columns))
        fits = codes == 0 if counts is None else (counts == len(self._columns)) & (codes == 0)
        all_fit = bool(fits.all())
        kept = fields
        if not all_fit:
            kept = decimals.chosen(fields, np.repeat(fits, len(self._columns) if counts is None else counts))
        if not self._kept.all():
            kept = decimals.chosen(kept, np.tile(self._kept, int(np.count_nonzero(fits))))
        if b" " in data or b"\t" in data:
            kept = decimals.trimmed(kept)
        values, plain = decimals.plain_numbers(kept)
        values = values.reshape(-1, len(self._names))
        if all_fit and plain.all():
            table[:] = values
            return
        table[fits] = values
        done = np.zeros(len(codes), dtype=bool)
        done[fits] = plain.reshape(values.shape).all(axis=1)
        which = np.flatnonzero(~done & (codes == 0)).tolist()
        self._read_lines(decimals.lines_of(data, fields, which), which, table, codes)

    def _read_lines(self, lines: list[bytes], which: list[int], table: Table, codes: Codes) -> None:
        """Read lines one by one; `which` are their rows in the table."""
        fullmatch = self._line.fullmatch
        read, rows = [], []
        for number, line in zip(which, lines, strict=True):
            found = fullmatch(line)
            words = found.groups() if found else ()
            if any(words):
                read.append(number)
                full = all(words)
                rows.append(
                    [*map(float, words)] if full else [float(one) if one else np.nan for one in words]
                )
            else:
                codes[number] = self._fault(line)
        if rows:
            table[read] = rows

    def _fault(self, line: bytes) -> int:
        """Return the code of what is wrong with a line that the pattern refuses."""
        if not line.strip(b" \t"):
            return UNUSED
        if _NOT_TEXT.search(line):
            return CODE["not plain text"]
        fields = line.split(self._delimiter)
        if len(fields) != len(self._columns):
            return CODE["wrong number of fields"]
        kept = [field.strip(b" \t") for field, keep in zip(fields, self._kept, strict=True) if keep]
        if not any(kept) or any(need and not one for need, one in zip(self._needed, kept, strict=True)):
            return CODE["empty field"]
        return CODE["not a number"]


def _pieces(data: bytes) -> Iterator[bytes]:
    """Cut whole lines into stretches of whole lines."""
    if len(data) <= decimals.PIECE:
        yield data
        return
    begin = 0
    while begin < len(data):
        end = data.rfind(b"\n", begin, begin + decimals.PIECE) + 1 or data.index(b"\n", begin) + 1
        yield data[begin:end]
        begin = end


def _with_single_blanks(data: bytes) -> bytes:
    """Return lines with one blank between fields and none at either end."""
    codes = np.frombuffer(data.replace(b"\t", b" "), np.uint8)
    blank, line_end = codes == ord(" "), codes == ord("\n")
    after = np.concatenate([[True], (blank | line_end)[:-1]])
    before = np.concatenate([line_end[1:], [True]])
    kept = ~(blank & after)
    codes, before = codes[kept], before[kept]
    trimmed: bytes = codes[~((codes == ord(" ")) & before)].tobytes()
    return trimmed
