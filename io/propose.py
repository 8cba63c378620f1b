"""A line form proposed from raw lines: what could read them and why; a person decides whether it is so.

The checks are those of the decoders themselves. What a column of numbers is follows from how the numbers behave: a
clock rises evenly, depth moves smoothly and goes far, tilts are small and restless. These are rules of thumb (common
practice, no source), and each is told with the proposal.
"""

import re
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from eastfall.io import checksum
from eastfall.io.arrivals import LineBlock
from eastfall.io.checksum import Checksum
from eastfall.io.columnguess import Guess, guessed, numbers_in
from eastfall.io.columns import DecimalSign
from eastfall.io.decoded import IGNORED, QUANTITIES
from eastfall.io.forms import decoder_for
from eastfall.io.readerkeys import Form
from eastfall.io.sitefile import LinkSettings
from eastfall.physics.errors import ParameterError

MOST_LINES = 200
"""The newest lines that are looked at."""
_CUT_UP = 40
"""Lines that every delimiter is tried on."""
_FEWEST = 5
"""Lines from which on columns are guessed."""
_MOST = 0.8
"""Share of the lines that must agree on a checksum, or on the number of fields."""
_DELIMITERS = ",;\t|/:!#&@~_ "
"""Tried in this order; a blank comes last because it also stands beside other delimiters."""
_COMMA_NUMBER = re.compile(rb"[+-]?\d*,\d+(?:[eE][+-]?\d+)?")
_COMMA_FOR_POINT = bytes.maketrans(b",.", b".,")
_SPOKEN = {" ": "blank", "\t": "tab"}


@dataclass(frozen=True, slots=True, kw_only=True)
class Proposal:
    """What the lines look like.

    Parameters
    ----------
    form : str or None
        None when the lines say too little, or are rubbish.
    columns : tuple of str
        As in the site file; empty when they cannot be told.
    fields : int
        How many stand in a line; 0 for sentences.
    lines, read : int
        Lines looked at that are not empty, and those of them that the proposed form makes use of.
    speed_is_doubtful : bool
        The bytes look as they do at a wrong serial speed.
    reasons : tuple of str
        Why, in words, one sentence each.
    """

    form: Form | None = None
    delimiter: str = ","
    columns: tuple[str, ...] = ()
    checksum: Checksum = "none"
    decimal: DecimalSign = "point"
    fields: int = 0
    lines: int = 0
    read: int = 0
    speed_is_doubtful: bool = False
    reasons: tuple[str, ...] = ()

    def link(self, url: str, baud: int) -> LinkSettings | None:
        """Return the settings of a link with this form; None where there is none that could read a line."""
        if self.form is None or not any(one != IGNORED for one in self.columns):
            return None
        return LinkSettings(
            url=url,
            baud=baud,
            form=self.form,
            columns=self.columns,
            delimiter=self.delimiter,
            checksum=self.checksum,
            decimal=self.decimal,
        )


def propose(lines: Sequence[bytes], rate: float | None = None) -> Proposal:
    r"""Propose a line form.

    Parameters
    ----------
    lines : sequence of bytes
        As they came, oldest first, with or without line ends; any bytes at all.
    rate : float, optional
        Lines in a second, as they came: tells a clock from a counter.

    Returns
    -------
    Proposal
        With a reason for each part of it.
    """
    kept = [one for line in lines[-MOST_LINES:] if (one := line.strip(b"\r\n")).strip()]
    if not kept:
        return Proposal(reasons=("no line has come yet",))
    rubbish = sum(not _is_text(one) for one in kept)
    if 2 * rubbish > len(kept):
        return Proposal(
            lines=len(kept),
            speed_is_doubtful=True,
            reasons=(
                f"{rubbish} of {len(kept)} lines hold bytes that are no text: try another serial speed",
            ),
        )
    text = [one for one in kept if _is_text(one)]
    return _with_check(_sentences(text) or _columns(text, rate), kept)


def _is_text(line: bytes) -> bool:
    return all(32 <= byte < 127 or byte == 9 for byte in line)


def _with_check(found: Proposal, lines: list[bytes]) -> Proposal:
    """Let the decoder itself read the lines, and tell how many it could."""
    settings = found.link("", 9600)
    if settings is None:
        return replace(found, lines=len(lines))
    used = _used(settings, lines)
    return replace(
        found,
        lines=len(lines),
        read=used,
        reasons=(f"this form makes use of {used} of {len(lines)} lines", *found.reasons),
    )


def _block(lines: Sequence[bytes]) -> LineBlock:
    return LineBlock(
        data=b"".join(one + b"\n" for one in lines), times=np.arange(len(lines), dtype=float), first_line=1
    )


def _used(settings: LinkSettings, lines: Sequence[bytes]) -> int:
    try:
        decoder = decoder_for(settings)
    except ParameterError:
        return 0
    said = decoder.decode(_block(lines))
    return len(said.readings) + said.partners + decoder.pending


# Sentences.


def _sentences(lines: list[bytes]) -> Proposal | None:
    """Return the sentence form if the lines are sentences that speak of something that this program reads."""
    begun = [one for one in lines if one[:1] in (b"$", b"!")]
    right = [one for one in begun if not checksum.verified("xor", one.rstrip())[1]]
    if len(right) < _MOST * len(lines) or not right:
        return None
    spoken = [name for name in QUANTITIES if name != "time_s" and _speaks(right, name)]
    if not spoken:
        return None
    return Proposal(
        form="iec61162",
        columns=tuple(spoken),
        checksum="none",
        reasons=(
            f"{len(right)} of {len(lines)} lines are sentences with the right checksum",
            "they speak of " + ", ".join(spoken),
        ),
    )


def _speaks(lines: list[bytes], name: str) -> bool:
    settings = LinkSettings(url="", form="iec61162", columns=(name,))
    said = decoder_for(settings).decode(_block(lines)).readings
    return bool(np.isfinite(said.column(QUANTITIES[name].channel)).any())


# Columns.


def _columns(lines: list[bytes], rate: float | None) -> Proposal:
    kind, why_sum = _checksum_of(lines)
    bodies = lines
    if kind != "none":
        bodies = [body for body, fault in (checksum.verified(kind, one) for one in lines) if not fault]
    delimiter, fields, why_cut = _delimiter_of(bodies)
    why = (why_sum, *why_cut)
    decimal, why_sign = _decimal_of(bodies, delimiter)
    why = (*why, *why_sign)
    rows = [row for one in bodies if len(row := _cut(one, delimiter)) == fields]
    if decimal == "comma":
        rows = [[one.translate(_COMMA_FOR_POINT) for one in row] for row in rows]
    if len(rows) < _FEWEST:
        more = f"{len(rows)} lines alike; {_FEWEST} are needed to tell what the fields are"
        return Proposal(
            checksum=kind, delimiter=delimiter, decimal=decimal, fields=fields, reasons=(*why, more)
        )
    guesses = guessed(numbers_in(rows), rows, rate)
    return Proposal(
        form="columns",
        decimal=decimal,
        columns=tuple(one.name for one in guesses),
        checksum=kind,
        delimiter=delimiter,
        fields=fields,
        reasons=(*why, *_told(guesses), *_missing(guesses)),
    )


def _told(guesses: Sequence[Guess]) -> list[str]:
    return [f"field {place}: {one.name}, {one.why}" for place, one in enumerate(guesses, start=1)]


def _missing(guesses: Sequence[Guess]) -> tuple[str, ...]:
    names = {one.name for one in guesses}
    if not names & {"tilt_a_deg", "tilt_b_deg", "east_mm", "north_mm"}:
        return ("no field looks like a tilt or an offset; let the probe move and look again",)
    return ()


def _checksum_of(lines: list[bytes]) -> tuple[Checksum, str]:
    kinds: tuple[Checksum, ...] = ("xor", "crc16-modbus")
    for kind in kinds:
        right = sum(not checksum.verified(kind, one)[1] for one in lines)
        if right >= _MOST * len(lines):
            return kind, f"checksum {kind} is right in {right} of {len(lines)} lines"
    starred = sum(b"*" in one[-6:] for one in lines)
    if starred >= _MOST * len(lines):
        return "none", "the lines end in * and something that is neither checksum known here"
    return "none", "no checksum at the end of the lines"


def _delimiter_of(lines: list[bytes]) -> tuple[str, int, tuple[str, ...]]:
    """Return the delimiter that cuts most lines alike into most numbers, the number of fields, and why."""
    scores = []
    lines = lines[-_CUT_UP:]
    for place, delimiter in enumerate(_DELIMITERS):
        rows = [_cut(one, delimiter) for one in lines]
        fields, alike = max(Counter(map(len, rows)).items(), key=lambda one: one[1], default=(1, 0))
        pieces = sum(bool(field) for row in rows for field in row)
        numeric = sum(_is_number(field, delimiter) for row in rows for field in row)
        # A cut that makes words of what stood together is worth less than one that leaves numbers whole.
        scores.append((alike * (2 * numeric - pieces), -place, delimiter, fields, alike))
    _, _, delimiter, fields, alike = max(scores)
    shown = _SPOKEN.get(delimiter, delimiter)
    if fields == 1:
        return ",", 1, ("one field a line: no delimiter is seen",)
    return delimiter, fields, (f"{alike} of {len(lines)} lines have {fields} fields with {shown!r} between",)


def _decimal_of(lines: list[bytes], delimiter: str) -> tuple[DecimalSign, tuple[str, ...]]:
    """Return the sign before the fraction, and why: a comma where more fields are numbers with it than with a point."""
    if delimiter == ",":
        return "point", ()
    fields = [field for one in lines[-_CUT_UP:] for field in _cut(one, delimiter)]
    commas = sum(bool(_COMMA_NUMBER.fullmatch(one)) for one in fields)
    points = sum(b"." in one and _is_number(one, ",") for one in fields)
    if commas <= points:
        return "point", ()
    return "comma", (f"{commas} of {len(fields)} fields are numbers with a decimal comma",)


def _cut(line: bytes, delimiter: str) -> list[bytes]:
    if delimiter == " ":
        return line.split() or [b""]
    return [one.strip(b" \t") for one in line.split(delimiter.encode())]


def _is_number(field: bytes, delimiter: str) -> bool:
    """Tell whether a field is a number, with a decimal comma too where the comma does not cut."""
    plain = field if delimiter == "," else field.replace(b",", b".")
    return bool(np.isfinite(numbers_in([[plain]])[0, 0]))
