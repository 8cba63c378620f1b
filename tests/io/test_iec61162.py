"""The IEC 61162-1 form: sentences in print, an independent reader, pairing, and cutting."""

from itertools import pairwise

import numpy as np
import pynmea2
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from eastfall.io.arrivals import LineBlock
from eastfall.io.checksum import with_checksum
from eastfall.io.decoded import Decoded
from eastfall.io.forms import decoder_for
from eastfall.io.iec61162 import SentenceDecoder
from eastfall.io.sitefile import LinkSettings
from eastfall.physics.errors import ParameterError
from eastfall.physics.readings import Readings
from eastfall.physics.settings import DEGREE

# Sentences in print: pitch and roll; depth; pitch and roll with a wrong checksum (46 is right).
ATTITUDE = b"$WIXDR,A,+02.9,D,PITCH,A,+00.7,D,ROLL*07"
DEPTH = b"$SDDPT,76.1,0.0,100*7A"
WRONG = b"$IIXDR,A,5.7,D,PTCH,A,-11.5,D,ROLL*67"
BOTH = ("depth_m", "tilt_a_deg", "tilt_b_deg")


def sentence(body: str) -> bytes:
    """Return a sentence with its checksum."""
    return with_checksum("xor", b"$" + body.encode())


def decode(*lines: bytes, columns: tuple[str, ...] = BOTH) -> Decoded:
    """Decode lines a second apart with a fresh decoder."""
    data = b"".join(one + b"\n" for one in lines)
    block = LineBlock(data=data, times=np.arange(len(lines), dtype=float), first_line=1)
    return decoder_for(LinkSettings(url="-", form="iec61162", columns=columns)).decode(block)


@pytest.mark.published
def test_published_depth_and_attitude_make_one_reading() -> None:
    """DPT and then XDR are one reading at the time of the second: 76.1 m, 2.9° and 0.7°."""
    found = decode(DEPTH, ATTITUDE)
    assert (len(found.readings), found.partners, dict(found.faults)) == (1, 1, {})
    assert found.readings.depth.tolist() == [76.1]
    assert found.readings.column("tilt_a").tolist() == [pytest.approx(2.9 * DEGREE, rel=1e-15)]
    assert found.readings.column("tilt_b").tolist() == [pytest.approx(0.7 * DEGREE, rel=1e-15)]
    assert found.readings.time.tolist() == [1.0]


@pytest.mark.published
def test_published_wrong_checksum_is_a_fault() -> None:
    """The sentence in print with checksum 67 where 46 is right is counted and used for nothing."""
    found = decode(DEPTH, WRONG, WRONG.replace(b"67", b"46"))
    assert dict(found.faults) == {"checksum wrong": 1}
    assert found.readings.column("tilt_b").tolist() == [pytest.approx(-11.5 * DEGREE, rel=1e-15)]


@pytest.mark.independent
@given(
    depth=st.decimals(-100, 9000, places=2),
    offset=st.one_of(st.none(), st.decimals(-20, 20, places=1)),
    tilts=st.tuples(st.decimals(-90, 90, places=3), st.decimals(-90, 90, places=3)),
    warmth=st.decimals(-40, 80, places=1),
)
def test_pynmea2_reads_the_same_numbers(
    depth: object, offset: object, tilts: tuple[object, object], warmth: object
) -> None:
    """Depth with offset, tilts and temperature of sentences that pynmea2 accepts are those that pynmea2 reads."""
    first = sentence(f"SDDPT,{depth},{'' if offset is None else offset},")
    second = sentence(f"WIXDR,A,{tilts[0]},D,PITCH,C,{warmth},C,PROBE,A,{tilts[1]},D,ROLL")
    found = decode(first, second, columns=(*BOTH, "temperature_c"))
    dpt, xdr = (pynmea2.parse(one.decode(), check=True) for one in (first, second))
    assert not found.faults
    assert found.readings.depth[0] == float(dpt.depth) + float(dpt.offset or 0)
    values = {xdr.data[i + 3]: float(xdr.data[i + 1]) for i in range(0, len(xdr.data), 4)}
    assert found.readings.column("tilt_a")[0] == values["PITCH"] * DEGREE
    assert found.readings.column("tilt_b")[0] == values["ROLL"] * DEGREE
    assert found.readings.column("temperature")[0] == values["PROBE"] + 273.15


@pytest.mark.parametrize(
    ("body", "kind"),
    [
        ("WIXDR,A,1,D", "wrong number of fields"),
        ("WIXDR,A,1,D,A,A,2,D", "wrong number of fields"),
        ("SDDPT", "wrong number of fields"),
        ("SDDPT,1,2,3,4", "wrong number of fields"),
        ("SDDPT,,0.0,100", "empty field"),
        ("WIXDR,A,,D,A,A,2,D,B", "empty field"),
        ("WIXDR,A,1e1,D,A,A,2,D,B", "not a number"),
        ("SDDPT,nan,0.0", "not a number"),
        ("WIXDR,A,1,D,A,C,20,C,T", "tilt missing"),
        ("WIXDR,A,1,D,A,A,2,D,PITCH,A,1,D,B", "repeated quantity"),
        ("WIXDR,A,1,D,A,A,2,D,B," + "C,20,C,SOMELONGNAME," * 3 + "C,20,C,SOMELONGNAME", "sentence too long"),
        ("WI$XDR,A,1,D,A,A,2,D,B", "not a sentence"),
        ("WIXDR,A,1,D,A*00,A,2,D,B", "not a sentence"),
    ],
)
def test_each_fault_has_its_kind(body: str, kind: str) -> None:
    """A sentence that cannot be used is one counted fault of its kind; a good pair behind it is read."""
    found = decode(sentence(body), DEPTH, ATTITUDE)
    assert dict(found.faults) == {kind: 1}
    assert len(found.readings) == 1
    assert found.examples[0][:2] == (1, kind)


@pytest.mark.parametrize(
    ("line", "kind"),
    [
        (DEPTH[:-3], "checksum missing"),
        (DEPTH[1:], "not a sentence"),
        (DEPTH + DEPTH, "checksum wrong"),
        (DEPTH.replace(b"76", b"7\x006"), "not plain text"),
        (b"\xa4" + DEPTH, "not plain text"),
        (b"7" * 4096, "line too long"),
    ],
)
def test_damaged_lines_are_counted(line: bytes, kind: str) -> None:
    """Damage on the cable is told apart from what a sentence may say."""
    found = decode(line, DEPTH, ATTITUDE)
    assert dict(found.faults) == {kind: 1}
    assert len(found.readings) == 1


def test_a_tilt_out_of_range_is_a_fault_and_takes_its_depth_with_it() -> None:
    """The depth that went before is never used for another attitude."""
    found = decode(DEPTH, sentence("WIXDR,A,91,D,A,A,0,D,B"), ATTITUDE)
    assert dict(found.faults) == {"tilt out of range": 1, "sentence without partner": 1}
    assert len(found.readings) == 0


def test_the_longest_sentence_is_82_characters_with_its_end() -> None:
    """Eighty characters without the line end are read, eighty-one are not (IEC 61162-1)."""
    just = sentence("WIXDR,A,1.0,D,A,A,2.0,D,B,C,20.0,C," + "X" * (80 - 39))
    assert len(just) == 80
    assert len(decode(DEPTH, just).readings) == 1
    over = sentence("WIXDR,A,1.0,D,A,A,2.0,D,B,C,20.0,C," + "X" * (81 - 39))
    assert dict(decode(DEPTH, over).faults) == {"sentence too long": 1}


def test_a_half_without_its_partner_is_a_fault_and_no_guess() -> None:
    """Two depths running, or an attitude without a depth, cost a fault each; a depth is not used twice."""
    found = decode(DEPTH, DEPTH, ATTITUDE, ATTITUDE)
    assert dict(found.faults) == {"sentence without partner": 2}
    assert found.rejected.tolist() == [0.0, 3.0]
    assert found.readings.time.tolist() == [2.0]


def test_one_sentence_may_say_all() -> None:
    """An XDR with depth and both angles is a reading by itself, names in either case."""
    found = decode(sentence("WIXDR,D,512.3,M,depth,A,1,D,a,A,-2,D,b"))
    assert found.readings.depth.tolist() == [512.3]
    assert found.readings.column("tilt_b").tolist() == [-2 * DEGREE]


@pytest.mark.parametrize(
    ("columns", "readings"),
    [
        (("depth_m",), 2),
        (("tilt_a_deg", "tilt_b_deg"), 1),
        (("temperature_c",), 1),
        (("east_mm", "north_mm"), 1),
    ],
)
def test_columns_say_which_half_a_link_speaks(columns: tuple[str, ...], readings: int) -> None:
    """Where the site file names one half, each sentence that carries it is a reading and the rest is unused."""
    lines = [DEPTH, sentence("WIXDR,D,1.5,M,EAST,D,-2.5,M,NORTH,C,20,C,T"), DEPTH, ATTITUDE]
    found = decode(*lines, columns=columns)
    assert not found.faults
    assert len(found.readings) == readings
    assert len(found.readings) + found.unused == len(lines)


def test_offsets_in_metres_become_metres() -> None:
    """EAST and NORTH groups in metres are direct offsets."""
    found = decode(sentence("WIXDR,D,1.5,M,EAST,D,-2.5,M,NORTH"), columns=("east_mm", "north_mm"))
    assert found.readings.column("east").tolist() == [pytest.approx(1.5, rel=1e-15)]
    assert found.readings.column("north").tolist() == [pytest.approx(-2.5, rel=1e-15)]


def test_other_sentences_are_unused_and_no_fault() -> None:
    """Position, proprietary and encapsulated sentences on the same line do not count as faults."""
    others = [sentence("GPZDA,160012.71,11,03,2004,-1,00"), sentence("PXYZ,1,2"), sentence("AIXDX,1")]
    encapsulated = b"!" + sentence("AIVDM,1,1,,A,1,0")[1:]
    found = decode(DEPTH, *others, encapsulated, b"", ATTITUDE)
    assert (dict(found.faults), found.unused, len(found.readings)) == ({}, 5, 1)


LINES = st.lists(
    st.one_of(
        st.sampled_from(
            [DEPTH, ATTITUDE, WRONG, b"", DEPTH[:9], DEPTH + ATTITUDE, sentence("WIXDR,C,20,C,T")]
        ),
        st.binary(max_size=90).map(lambda one: one.replace(b"\n", b"")),
        st.text("0123456789,.ADMCDPTXR+-", max_size=60).map(lambda one: sentence("WIXDR," + one)),
    ),
    max_size=25,
)


@pytest.mark.invariant
@settings(max_examples=100)
@given(
    LINES, st.lists(st.integers(0, 30), max_size=8), st.sampled_from([BOTH, ("depth_m",), ("tilt_a_deg",)])
)
def test_every_line_is_accounted_for_and_cutting_changes_nothing(
    lines: list[bytes], places: list[int], columns: tuple[str, ...]
) -> None:
    """Readings, faults, unused, partners and the one held back add up, the same however the lines are cut."""
    times = np.arange(len(lines), dtype=float)
    edges = sorted({0, len(lines), *(one % (len(lines) + 1) for one in places)})
    results = []
    for cuts in (edges, [0, len(lines)], list(range(len(lines) + 1))):
        decoder = SentenceDecoder(columns)
        parts = [
            decoder.decode(
                LineBlock(data=b"".join(x + b"\n" for x in lines[a:b]), times=times[a:b], first_line=a + 1)
            )
            for a, b in pairwise(cuts)
        ]
        readings = Readings.joined([one.readings for one in parts])
        rejected = [time for one in parts for time in one.rejected.tolist()]
        others = sum(one.unused + one.partners for one in parts)
        assert len(lines) == len(readings) + len(rejected) + others + decoder.pending
        assert decoder.pending <= 1
        results.append((readings.data.tobytes(), sorted(rejected), decoder.pending))
    assert results[0] == results[1] == results[2]


def test_a_line_number_stays_with_a_sentence_held_back() -> None:
    """A depth that waited over a block's end and finds no partner is quoted by its own number."""
    decoder = SentenceDecoder(BOTH)
    first = LineBlock(data=b"\n" + DEPTH + b"\n\n\n", times=np.arange(4.0), first_line=1)
    assert decoder.decode(first).unused == 3
    assert decoder.pending == 1
    found = decoder.decode(LineBlock(data=DEPTH + b"\n", times=np.array([9.0]), first_line=5))
    assert found.examples[0][:2] == (2, "sentence without partner")
    assert found.rejected.tolist() == [1.0]


@pytest.mark.parametrize("columns", [("time_s", "depth_m"), ("-",), ("deep",)])
def test_columns_that_sentences_cannot_carry_are_refused(columns: tuple[str, ...]) -> None:
    """An instrument clock is not in these sentences."""
    with pytest.raises(ParameterError, match="expected what DPT and XDR sentences carry"):
        SentenceDecoder(columns)
