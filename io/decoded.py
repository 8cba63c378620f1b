"""What every decoder hands on: readings, counted faults, and the rules that a row of numbers must meet; SI inside.

The two line forms that fill it stand in `io.columns` and `io.iec61162`.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from eastfall.io.arrivals import LineBlock
from eastfall.io.framing import LINE_LIMIT, has_long_line
from eastfall.io.safetext import safe
from eastfall.physics.readings import CHANNELS, Readings
from eastfall.physics.settings import DEGREE

EXAMPLES = 4
"""Bad lines quoted for each block at most."""
_QUOTED = 60
"""Characters of a bad line that are quoted."""
CLOCK_SET = 10.0
"""A clock that goes back by more than this [s] has been set anew; a smaller step is a line out of order."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Quantity:
    """One named quantity of a line: where it goes, in what unit it comes, and what is believed of it."""

    channel: str
    factor: float
    """SI units per unit of the line."""
    lowest: float
    highest: float
    """Inclusive, in the unit of the line; a value outside is a fault."""
    fault: str
    needed: bool = True
    """Whether an empty field is a fault; where not, it is NaN."""
    shift: float = 0.0
    """Added after the factor."""


# The bounds only tell a number from rubbish; they are wider than any shaft (common practice, no source).
QUANTITIES: dict[str, Quantity] = {
    "time_s": Quantity(channel="time", factor=1.0, lowest=-1e12, highest=1e12, fault="time out of range"),
    "depth_m": Quantity(channel="depth", factor=1.0, lowest=-2e4, highest=2e4, fault="depth out of range"),
    "tilt_a_deg": Quantity(
        channel="tilt_a", factor=DEGREE, lowest=-90.0, highest=90.0, fault="tilt out of range"
    ),
    "tilt_b_deg": Quantity(
        channel="tilt_b", factor=DEGREE, lowest=-90.0, highest=90.0, fault="tilt out of range"
    ),
    "east_mm": Quantity(channel="east", factor=1e-3, lowest=-1e6, highest=1e6, fault="offset out of range"),
    "north_mm": Quantity(channel="north", factor=1e-3, lowest=-1e6, highest=1e6, fault="offset out of range"),
    "azimuth_deg": Quantity(
        channel="azimuth",
        factor=DEGREE,
        lowest=-360.0,
        highest=360.0,
        fault="azimuth out of range",
        needed=False,
    ),
    "temperature_c": Quantity(
        channel="temperature",
        factor=1.0,
        shift=273.15,
        lowest=-100.0,
        highest=300.0,
        fault="temperature out of range",
        needed=False,
    ),
    "supply_v": Quantity(
        channel="supply", factor=1.0, lowest=-1e3, highest=1e3, fault="supply out of range", needed=False
    ),
    "face_deg": Quantity(
        channel="face", factor=DEGREE, lowest=0.0, highest=180.0, fault="face out of range", needed=False
    ),
}
IGNORED = "-"

FAULTS: dict[str, str] = {
    "line too long": "less than 4096 bytes",
    "checksum missing": "a checksum after *",
    "checksum wrong": "the checksum of the line",
    "not plain text": "printable ASCII characters",
    "wrong number of fields": "as many fields as the site file names",
    "empty field": "a number in every needed field",
    "not a number": "decimal numbers",
    "time out of range": "seconds within ±1e12",
    "depth out of range": "metres within ±20000",
    "tilt out of range": "degrees within ±90",
    "offset out of range": "millimetres within ±1000000",
    "azimuth out of range": "degrees within ±360",
    "temperature out of range": "degrees Celsius from -100 to 300",
    "supply out of range": "volts within ±1000",
    "face out of range": "0 or 180 degrees",
    "not a sentence": "$, a talker, DPT or XDR, fields, * and two hexadecimal digits",
    "sentence too long": "at most 82 characters with the line end",
    "sentence without partner": "a depth sentence, then one with the tilts",
    "repeated quantity": "each quantity once in a sentence",
    "tilt missing": "an angle for each axis that the site file names",
    "depth missing": "a depth in metres",
    "clock stepped back": "a time not before the line ahead; the time is held",
    "clock set back": "a clock that goes on; the step is taken out from here on",
}
"""Every kind of fault that a line can have, and what was expected instead."""
KINDS = ("", *FAULTS)
CODE = {kind: code for code, kind in enumerate(KINDS)}
UNUSED, PARTNER = -1, -2
"""Codes of lines that are no fault and give no reading: empty or of no interest; spoken for by a later line."""

Codes = NDArray[np.int8]
Table = NDArray[np.float64]
Example = tuple[int, str, str, str]


def believed(name: str, value: float) -> bool:
    """Tell whether a value in SI units lies within the bounds of a quantity."""
    quantity = QUANTITIES[name]
    return quantity.lowest * quantity.factor <= value <= quantity.highest * quantity.factor


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Decoded:
    """What a block of lines said.

    Every line is a reading, a rejected line, unused (empty, or a sentence of no interest), or a partner whose content
    went into the reading of a later line; a decoder may hold back one line as its pending partner.
    """

    readings: Readings
    faults: Mapping[str, int] = field(default_factory=dict)
    """Counted by kind; "clock stepped back" and "clock set back" are faults of lines that are used all the same."""
    rejected: NDArray[np.float64] = field(default_factory=lambda: np.empty(0))
    """Host times of the bad lines [s], shape (m,)."""
    examples: tuple[Example, ...] = ()
    """The first bad lines and the last: (line number, kind of fault, safe text, what was expected)."""
    unused: int = 0
    partners: int = 0


class Decoder(Protocol):
    """Blocks of lines in, readings out; state only where a line needs the one before it."""

    def decode(self, block: LineBlock) -> Decoded:
        """Decode a block; no exception leaves it, whatever the bytes are."""
        ...

    @property
    def pending(self) -> int:
        """Lines held back for a partner: 0 or 1."""
        ...


class InstrumentClock:
    """Keeps an instrument's own time from going back.

    A line whose time is before the line ahead of it keeps that line's time ("clock stepped back"). A step of more
    than `CLOCK_SET` is a clock that has been set anew or started again ("clock set back"): from there on the step is
    added, so that time goes on from where it stood instead of standing still for as long as the step was.
    """

    def __init__(self) -> None:
        self._latest = -np.inf
        self._added = 0.0

    def forward(self, time: NDArray[np.float64]) -> tuple[NDArray[np.float64], dict[str, int]]:
        """Return times that do not fall, shape (n,) [s], and the faults counted."""
        out = np.empty_like(time)
        faults = {"clock stepped back": 0, "clock set back": 0}
        begin = 0
        while begin < time.size:
            raw = time[begin:] + self._added
            latest = np.maximum.accumulate(np.concatenate([[self._latest], raw]))
            behind = latest[:-1] - raw
            jumps = np.flatnonzero(behind > CLOCK_SET)
            end = int(jumps[0]) if jumps.size else raw.size
            out[begin : begin + end] = latest[1 : end + 1]
            faults["clock stepped back"] += int(np.count_nonzero(behind[:end] > 0.0))
            self._latest = float(latest[end])
            begin += end
            if jumps.size:
                faults["clock set back"] += 1
                self._added = self._latest - float(time[begin])
        return out, {kind: count for kind, count in faults.items() if count}


def too_long(block: LineBlock) -> Codes:
    """Return the codes that a block of lines begins with: 0, or that of a line too long."""
    codes = np.zeros(len(block), dtype=np.int8)
    if len(block.data) > LINE_LIMIT and has_long_line(block.data):
        ends = np.flatnonzero(np.frombuffer(block.data, np.uint8) == ord("\n"))
        codes[np.diff(ends, prepend=-1) > LINE_LIMIT] = CODE["line too long"]
    return codes


class Assembler:
    """Judges rows of numbers and turns them into readings.

    Parameters
    ----------
    names : sequence of str, length k
        Keys of `QUANTITIES`, one for each column of the rows.
    """

    def __init__(self, names: Sequence[str]) -> None:
        self._quantities = [QUANTITIES[name] for name in names]
        self._lowest = np.array([one.lowest for one in self._quantities])
        self._highest = np.array([one.highest for one in self._quantities])
        self._factors = np.array([one.factor for one in self._quantities])
        self._shifts = np.array([one.shift for one in self._quantities])
        self._channels = np.array([CHANNELS.index(one.channel) for one in self._quantities])
        self._clock = InstrumentClock() if "time_s" in names else None

    def decoded(
        self, table: Table, codes: Codes, block: LineBlock, numbers: NDArray[np.int_] | None = None
    ) -> Decoded:
        """Return what a block of lines said.

        Parameters
        ----------
        table : ndarray, shape (n, k)
            Numbers in the unit of their key, NaN where a field is empty; anything in rows that give no reading.
        codes : ndarray, shape (n,)
            For each line 0, an index into `KINDS`, `UNUSED` or `PARTNER`; range faults are entered here.
        block : LineBlock
            The lines.
        numbers : ndarray, shape (n,), optional
            Line numbers, where they do not simply count on from the block's first.
        """
        self._judge(table, codes)
        good = codes == 0
        whole = bool(good.all())
        kept = table if whole else table[good]
        data = np.full((len(CHANNELS), kept.shape[0]), np.nan)
        data[0] = data[1] = block.times if whole else block.times[good]
        data[self._channels] = (kept * self._factors + self._shifts).T
        faults: dict[str, int] = {}
        if self._clock is not None:
            data[0], faults = self._clock.forward(data[0])
        if whole:
            return Decoded(readings=Readings(data), faults=faults)
        if numbers is None:
            numbers = np.arange(block.first_line, block.first_line + len(block))
        return _with_faults(Readings(data), faults, codes, block, numbers)

    def _judge(self, table: Table, codes: Codes) -> None:
        inside = (table >= self._lowest) & (table <= self._highest)
        for place, one in enumerate(self._quantities):
            if one.channel == "face":
                inside[:, place] &= (table[:, place] == 0.0) | (table[:, place] == 180.0)
        if inside.all():
            return
        # What is NaN is an empty field that may be empty; needed ones were refused before.
        outside = ~inside & ~np.isnan(table)
        for place, one in enumerate(self._quantities):
            codes[outside[:, place] & (codes == 0)] = CODE[one.fault]


def _with_faults(
    readings: Readings, faults: dict[str, int], codes: Codes, block: LineBlock, numbers: NDArray[np.int_]
) -> Decoded:
    bad = np.flatnonzero(codes > 0)
    counts = np.bincount(codes[bad], minlength=len(KINDS)) if bad.size else np.zeros(0, dtype=np.intp)
    faults |= {KINDS[code]: int(counts[code]) for code in np.flatnonzero(counts).tolist()}
    return Decoded(
        readings=readings,
        faults=faults,
        rejected=block.times[bad],
        examples=_examples(bad, codes, block, numbers),
        unused=int(np.count_nonzero(codes == UNUSED)),
        partners=int(np.count_nonzero(codes == PARTNER)),
    )


def _examples(
    bad: NDArray[np.intp], codes: Codes, block: LineBlock, numbers: NDArray[np.int_]
) -> tuple[Example, ...]:
    if not bad.size:
        return ()
    if bad.size > EXAMPLES:  # the last one always: it is shown as the latest bad line of its link
        bad = np.append(bad[: EXAMPLES - 1], bad[-1])
    lines = block.lines()
    return tuple(
        (
            int(numbers[number]),
            KINDS[codes[number]],
            safe(lines[number], _QUOTED),
            FAULTS[KINDS[codes[number]]],
        )
        for number in bad.tolist()
    )
