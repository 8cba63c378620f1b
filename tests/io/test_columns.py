"""The columns form: what each line says, what each fault is called, and that cutting and speed change nothing."""

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from eastfall.io.arrivals import LineBlock
from eastfall.io.checksum import with_checksum
from eastfall.io.columns import _MANY, ColumnsDecoder
from eastfall.io.decoded import FAULTS, QUANTITIES, Decoded
from eastfall.io.forms import decoder_for
from eastfall.io.framing import LINE_LIMIT
from eastfall.io.sitefile import LinkSettings
from eastfall.physics.errors import ParameterError
from eastfall.physics.readings import Readings

NAMES = ("depth_m", "tilt_a_deg", "tilt_b_deg", "temperature_c")
GOOD = b"512.30,-0.0213,+0.4,18.5\n"


def block(data: bytes, first: int = 1, start: float = 0.0) -> LineBlock:
    """Return lines that came a tenth of a second apart."""
    count = data.count(b"\n")
    return LineBlock(data=data, times=start + 0.1 * np.arange(count), first_line=first)


def decode(data: bytes, names: tuple[str, ...] = NAMES, **options: str) -> Decoded:
    """Decode with a fresh decoder."""
    return decoder_for(LinkSettings(url="-", columns=names, **options)).decode(block(data))  # type: ignore[arg-type]


def cut(data: bytes, places: list[int]) -> list[LineBlock]:
    """Cut a stream of lines into blocks at some of its lines."""
    lines = data.splitlines(keepends=True)
    edges = sorted({0, len(lines), *(one % (len(lines) + 1) for one in places)})
    times = 0.1 * np.arange(len(lines))
    return [
        LineBlock(data=b"".join(lines[a:b]), times=times[a:b], first_line=a + 1) for a, b in pairwise(edges)
    ]


def same(one: Readings, other: Readings) -> bool:
    """Return whether two blocks are the same to the last bit, NaN where NaN."""
    return one.data.tobytes() == other.data.tobytes()


def test_units_become_si() -> None:
    """Degrees, millimetres and Celsius become radians, metres and kelvin, each in its channel."""
    names = tuple(QUANTITIES)
    line = b"12.5,512.3,90,-45,1500,-2.5,180,20,11.9,180\n"
    found = decode(line, names).readings
    expected = {
        "time": 12.5,
        "host_time": 0.0,
        "depth": 512.3,
        "tilt_a": np.pi / 2,
        "tilt_b": -np.pi / 4,
        "east": 1.5,
        "north": -0.0025,
        "azimuth": np.pi,
        "temperature": 293.15,
        "supply": 11.9,
        "face": np.pi,
    }
    for name, value in expected.items():
        assert found.column(name)[0] == pytest.approx(value, rel=1e-15, abs=1e-300), name


@pytest.mark.parametrize(
    ("line", "kind"),
    [
        (b"512.30,-0.02,0.4", "wrong number of fields"),
        (b"512.30,-0.02,0.4,18,1", "wrong number of fields"),
        (b",-0.02,0.4,18", "empty field"),
        (b"512.30, ,0.4,18", "empty field"),
        (b"512.30,nan,0.4,18", "not a number"),
        (b"512.30,inf,0.4,18", "not a number"),
        (b"512.30,-,0.4,18", "not a number"),
        (b"512.30,1_0,0.4,18", "not a number"),
        (b"512.30,0x1,0.4,18", "not a number"),
        (b"512.30,1 2,0.4,18", "not a number"),
        (b"512..30,1,0.4,18", "not a number"),
        (b"512.30,90.01,0.4,18", "tilt out of range"),
        (b"512.30,0.4,-1e2,18", "tilt out of range"),
        (b"20000.1,0.4,0.4,18", "depth out of range"),
        (b"1e999,0.4,0.4,18", "depth out of range"),
        (b"512.30,0.4,0.4,999", "temperature out of range"),
        (b"512.30,0.4\x00,0.4,18", "not plain text"),
        (b"512.30,0.4,\xb10.4,18", "not plain text"),
        (b"512.30,\xd9\xa1,0.4,18", "not plain text"),
        (b"\x1b[2J512.30,0.4,0.4,18", "not plain text"),
        (b"7" * LINE_LIMIT, "line too long"),
    ],
)
@pytest.mark.parametrize("others", [1, _MANY])
def test_each_fault_has_its_kind(line: bytes, kind: str, others: int) -> None:
    """A bad line is one counted fault of its kind with its time and an example, and good lines around it are read."""
    found = decode(GOOD * others + line + b"\n" + GOOD)
    assert dict(found.faults) == {kind: 1}
    assert len(found.readings) == others + 1
    assert found.rejected.tolist() == [pytest.approx(0.1 * others)]
    number, told, text, expected = found.examples[0]
    assert (number, told, expected) == (others + 1, kind, FAULTS[kind])
    assert text.isprintable()


@pytest.mark.parametrize(
    "line",
    [
        b" 512.30 ,\t-0.0213,+0.40 , 18.50",
        b"5123e-1,-.0213,4.E-1,18.5",
        b"+512.3000000000,-0.0213,0.4,1.85e1",
    ],
)
@pytest.mark.parametrize("others", [1, _MANY])
def test_spellings_of_one_number_are_one_number(line: bytes, others: int) -> None:
    """Blanks, signs, exponents and trailing zeros do not change what a line says."""
    found = decode(GOOD * others + line + b"\n")
    assert not found.faults
    assert found.readings.data[2:, -1].tobytes() == found.readings.data[2:, 0].tobytes()


@pytest.mark.parametrize("others", [0, _MANY])
def test_an_empty_optional_field_is_nan(others: int) -> None:
    """A temperature that is not there is NaN; the rest of the line is a reading."""
    found = decode(GOOD * others + b"512.30,-0.02,0.4,\n")
    assert not found.faults
    assert np.isnan(found.readings.column("temperature")[-1])
    assert found.readings.depth[-1] == 512.3


def test_an_empty_line_is_unused_and_no_fault() -> None:
    """Lines of nothing but blanks are neither readings nor faults."""
    found = decode(GOOD + b"\n \t \n" + GOOD)
    assert (len(found.readings), found.unused, dict(found.faults)) == (2, 2, {})


@pytest.mark.parametrize("others", [1, _MANY])
def test_an_ignored_column_may_hold_anything(others: int) -> None:
    """What stands under "-" is not looked at, as long as it is text without the delimiter."""
    names = ("-", "depth_m", "-", "tilt_a_deg")
    found = decode(b"OK 7.,5.5,,1.5\n" * others + b"#!,5.5,n/a.x,1.5\n", names)
    assert not found.faults
    assert set(found.readings.depth.tolist()) == {5.5}


@pytest.mark.parametrize(
    ("delimiter", "line"),
    [
        (" ", b"  512.30   -0.02\t0.4 18 "),
        ("\t", b"512.30\t-0.02\t 0.4\t18"),
        (";", b"512.30;-0.02;0.4;18"),
        ("|", b"512.30|-0.02|0.4|18"),
    ],
)
@pytest.mark.parametrize("others", [1, _MANY])
def test_other_delimiters(delimiter: str, line: bytes, others: int) -> None:
    """A blank stands for any run of blanks and tabs; every other delimiter stands for itself."""
    found = decode((line + b"\n") * others, NAMES, delimiter=delimiter)
    assert not found.faults
    assert found.readings.column("depth").tolist() == [512.3] * others


@pytest.mark.parametrize("kind", ["xor", "crc16-modbus"])
@pytest.mark.parametrize("others", [1, 70])
def test_checksums_are_asked_for_and_held(kind: str, others: int) -> None:
    """With a checksum named, a line without one or with a wrong one is a fault, whatever its numbers are."""
    right = with_checksum(kind, GOOD.strip())  # type: ignore[arg-type]
    wrong = right.replace(b"512", b"513")
    found = decode(b"\n".join([*[right] * others, wrong, GOOD.strip(), b""]), checksum=kind)
    assert len(found.readings) == others
    assert dict(found.faults) == {"checksum wrong": 1, "checksum missing": 1}


def test_a_leading_dollar_is_outside_the_exclusive_or() -> None:
    """With "xor" the sum begins after a $: the characters -,1.5 give 2B by hand, with the $ they would give 0F."""
    found = decode(b"$-,1.5*2B\n$-,1.5*0F\n", ("-", "depth_m"), checksum="xor")
    assert found.readings.depth.tolist() == [1.5]
    assert dict(found.faults) == {"checksum wrong": 1}


FIELD = st.one_of(
    st.floats(-95.0, 95.0).map(lambda x: f"{x:.4f}"),
    st.floats(-95.0, 95.0).map(repr),
    st.sampled_from(
        [
            "",
            " ",
            "nan",
            "-0.0",
            "+7",
            ".5",
            "5.",
            "1e1",
            "1e400",
            "--1",
            "1.2.3",
            " 12 ",
            "\t3",
            "OK",
            "é",
            "\x00",
            "9" * 30,
        ]
    ),
)
LINE = st.one_of(st.lists(FIELD, min_size=4, max_size=4), st.lists(FIELD, max_size=6)).map(
    lambda fields: ",".join(fields).encode()
)
STREAM = st.lists(LINE, max_size=12).map(lambda lines: b"".join(one + b"\n" for one in lines))


@pytest.mark.invariant
@settings(max_examples=100)
@given(STREAM, st.sampled_from(["depth_m", "time_s", "-"]))
def test_many_at_once_and_one_by_one_agree_to_the_last_bit(stream: bytes, first: str) -> None:
    """A block read at once gives the readings and faults of its lines read singly, bit for bit."""
    names = (first, "tilt_a_deg", "tilt_b_deg", "temperature_c")
    data = stream * (1 + _MANY // max(stream.count(b"\n"), 1))
    at_once = decode(data, names)
    decoder = ColumnsDecoder(names)
    singly = [decoder.decode(one) for one in cut(data, list(range(data.count(b"\n") + 1)))]
    assert same(at_once.readings, Readings.joined([one.readings for one in singly]))
    counts: dict[str, int] = {}
    for one in singly:
        for kind, count in one.faults.items():
            counts[kind] = counts.get(kind, 0) + count
    assert dict(at_once.faults) == counts
    assert at_once.rejected.tolist() == [time for one in singly for time in one.rejected.tolist()]


@pytest.mark.invariant
@settings(max_examples=100)
@given(
    st.binary(max_size=400),
    STREAM,
    st.binary(max_size=400),
    st.sampled_from([",", " ", "\t"]),
    st.sampled_from(["none", "xor", "crc16-modbus"]),
)
def test_every_line_is_accounted_for_whatever_the_bytes_are(
    before: bytes, stream: bytes, behind: bytes, delimiter: str, kind: str
) -> None:
    """With rubbish before, between and behind, every line is read, rejected or empty, and nothing is raised."""
    data = (before + b"\n" + stream + behind + b"\n" + stream) * 3
    found = decode(data, NAMES, delimiter=delimiter, checksum=kind)
    assert data.count(b"\n") == len(found.readings) + found.rejected.size + found.unused
    assert sum(found.faults.values()) == found.rejected.size


@pytest.mark.invariant
def test_rubbish_costs_no_good_line() -> None:
    """Every good line between lines of random bytes is read as it would be alone."""
    rng = np.random.default_rng(3)
    pieces, good = [], 0
    for _ in range(300):
        pieces.append(rng.bytes(int(rng.integers(0, 60))).replace(b"\n", b"") + b"\n")
        pieces.append(GOOD)
        good += 1
    found = decode(b"".join(pieces))
    assert (found.readings.depth == 512.3).sum() == good


def test_a_clock_that_steps_back_is_held() -> None:
    """A time before the one ahead of it keeps that one and is counted; the reading is used."""
    names = ("time_s", "depth_m", "tilt_a_deg")
    found = decode(b"1,5,0\n3,6,0\n2,7,0\n4,8,0\n4,8,0\n", names)
    assert found.readings.time.tolist() == [1.0, 3.0, 3.0, 4.0, 4.0]
    assert dict(found.faults) == {"clock stepped back": 1}
    assert found.rejected.size == 0


def test_a_clock_set_back_goes_on_from_where_it_stood() -> None:
    """A restart of the instrument's clock costs the step, not the time until the old value is reached again."""
    names = ("time_s", "depth_m", "tilt_a_deg")
    found = decode(b"100,5,0\n101,6,0\n0.5,7,0\n1.5,8,0\n2.5,8,0\n", names)
    assert found.readings.time.tolist() == [100.0, 101.0, 101.0, 102.0, 103.0]
    assert dict(found.faults) == {"clock set back": 1}


@pytest.mark.invariant
@given(st.lists(st.integers(-40, 40), min_size=1, max_size=30), st.lists(st.integers(0, 40), max_size=6))
def test_the_instrument_clock_does_not_depend_on_the_blocks(steps: list[int], places: list[int]) -> None:
    """Times and faults of a clock that jumps about are the same however the lines are cut, and never fall."""
    names = ("time_s", "depth_m", "tilt_a_deg")
    data = b"".join(b"%d,1,0\n" % one for one in np.cumsum(steps))
    whole = decode(data, names)
    decoder = ColumnsDecoder(names)
    parts = [decoder.decode(one) for one in cut(data, places)]
    joined = Readings.joined([one.readings for one in parts])
    assert same(whole.readings, joined)
    assert sum(whole.faults.values()) == sum(sum(one.faults.values()) for one in parts)
    assert (np.diff(joined.time) >= 0.0).all()


def test_without_a_time_column_the_clock_is_the_hosts() -> None:
    """The time of a reading is when its line arrived."""
    found = decode(GOOD * 3)
    assert found.readings.time.tolist() == found.readings.host_time.tolist() == pytest.approx([0.0, 0.1, 0.2])


@pytest.mark.parametrize(
    ("names", "delimiter", "words"),
    [
        (("depth_m", "depth_m"), ",", "columns is depth_m, depth_m"),
        (("-",), ",", "columns is -"),
        (("deep",), ",", "columns is deep"),
        (NAMES, ".", "delimiter is '.'"),
        (NAMES, "é", "delimiter is 'é'"),
        (NAMES, "\n", "delimiter is"),
        (NAMES, "", "delimiter is"),
    ],
)
def test_unusable_settings_are_refused(names: tuple[str, ...], delimiter: str, words: str) -> None:
    """Columns that say nothing or one thing twice, and delimiters that numbers hold, are refused in words."""
    with pytest.raises(ParameterError, match=words):
        ColumnsDecoder(names, delimiter)


@given(data=st.data())
def test_decimal_commas_are_read_as_points_are(data: st.DataObject) -> None:
    """Comma and point changed over in every line, few or many: the same numbers and the same faults, to the bit."""
    field = st.sampled_from(
        [b"512.30", b"-0.0213", b"+.4", b"18", b"1,5", b"1.5.2", b"", b"x", b" 7.25 ", b"1e2"]
    )
    lines = data.draw(st.lists(st.lists(field, min_size=3, max_size=5), max_size=2 * _MANY))
    text = b"".join(b";".join(one) + b"\n" for one in lines)
    points = decode(text, delimiter=";")
    commas = decode(text.translate(bytes.maketrans(b",.", b".,")), delimiter=";", decimal="comma")
    assert same(points.readings, commas.readings)
    assert points.faults == commas.faults


def test_a_decimal_comma_comes_after_the_checksum_and_leaves_points_out() -> None:
    """The sum is that of the line as sent; a number with points in it is none; the comma cannot part fields too."""
    line = with_checksum("crc16-modbus", b"512,30;-0,5;1.234,5;18") + b"\n"
    good = with_checksum("crc16-modbus", b"512,30;-0,5;0,25;18") + b"\n"
    found = decode(good + line, delimiter=";", decimal="comma", checksum="crc16-modbus")
    assert found.readings.depth.tolist() == [512.3]
    assert found.faults == {"not a number": 1}
    with pytest.raises(ParameterError, match="another one than the decimal comma"):
        ColumnsDecoder(NAMES, ",", decimal="comma")
