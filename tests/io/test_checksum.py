"""Line checksums against published check values and sentences, an independent reader, and a division by hand."""

import pynmea2
import pytest
from hypothesis import given
from hypothesis import strategies as st

from eastfall.io.checksum import (
    CHECKSUM_FAULTS,
    WIDTH,
    Checksum,
    bodies,
    checksum_of,
    crc16_modbus,
    verified,
    with_checksum,
    xor,
)

KINDS: list[Checksum] = ["xor", "crc16-modbus"]
BODY = st.binary(max_size=40).map(lambda one: one.replace(b"\n", b"").replace(b"\r", b""))

# Check value of the nine digits, Catalogue of parametrised CRC algorithms, entry CRC-16/MODBUS: 0x4B37.
CRC_CHECK_VALUE = 0x4B37
# Frame 02 07 and its CRC 41 12, low byte first: an example of the MODBUS over Serial Line guide (from memory,
# unconfirmed; the place in the guide too).
FRAME, FRAME_CRC = bytes([0x02, 0x07]), 0x1241


@pytest.mark.published
def test_crc16_modbus_has_the_published_check_value() -> None:
    """The CRC of "123456789" is 0x4B37, and that of the guide's example frame 0x1241."""
    assert crc16_modbus(b"123456789") == CRC_CHECK_VALUE
    assert crc16_modbus(FRAME) == FRAME_CRC


@pytest.mark.published
@pytest.mark.parametrize(
    ("sentence", "fault"),
    [
        # Sentences in print: pitch and roll, and depth below transducer; the third with a wrong checksum (46 is right).
        (b"$WIXDR,A,+02.9,D,PITCH,A,+00.7,D,ROLL*07", ""),
        (b"$SDDPT,76.1,0.0,100*7A", ""),
        (b"$IIXDR,A,5.7,D,PTCH,A,-11.5,D,ROLL*67", "checksum wrong"),
        (b"$IIXDR,A,5.7,D,PTCH,A,-11.5,D,ROLL*46", ""),
        (b"$SDDPT,76.1,0.0,100*7a", ""),
        (b"$SDDPT,76.1,0.0,100*7A  ", ""),
        (b"$SDDPT,76.1,0.0,100", "checksum missing"),
        (b"$SDDPT,76.1,0.0,100*7", "checksum missing"),
        (b"", "checksum missing"),
    ],
)
def test_published_sentences_verify(sentence: bytes, fault: str) -> None:
    """The exclusive-or between $ and * is the stated one, in either case and with blanks behind."""
    assert verified("xor", sentence)[1] == fault


@pytest.mark.independent
@given(st.text(st.characters(min_codepoint=32, max_codepoint=126, exclude_characters="*$"), max_size=60))
def test_xor_agrees_with_pynmea2(text: str) -> None:
    """The exclusive-or of any sentence is pynmea2's."""
    assert xor(text.encode()) == pynmea2.NMEASentence.checksum(text)


@pytest.mark.independent
@given(st.binary(max_size=30))
def test_crc_is_the_remainder_of_the_bitwise_division(data: bytes) -> None:
    """The table gives what the division by x^16 + x^15 + x^2 + 1 gives bit by bit."""
    crc = 0xFFFF
    for byte in data:
        for place in range(8):
            odd = (crc ^ (byte >> place)) & 1
            crc = (crc >> 1) ^ (0xA001 * odd)
    assert crc16_modbus(data) == crc


@pytest.mark.invariant
@pytest.mark.parametrize("kind", KINDS)
@given(body=BODY)
def test_what_is_written_verifies(kind: Checksum, body: bytes) -> None:
    """A line with its checksum gives its body back, and with one digit changed it is refused."""
    line = with_checksum(kind, body)
    assert verified(kind, line) == (body, "")
    wrong = line[:-1] + (b"0" if line[-1:] != b"0" else b"1")
    assert verified(kind, wrong)[1] == "checksum wrong"


@pytest.mark.parametrize("end", [b"**2", b"*2 ", b"*+2", b"*2*", b"* 2", b"**", b"*\t"])
def test_a_star_or_a_blank_for_a_digit_is_no_checksum_among_many_lines_either(end: bytes) -> None:
    """What ends like a checksum and is none has one fault, alone and in a block."""
    for kind in KINDS:
        line = b"1,2" + (end if kind == "xor" else end[:1] + b"00" + end[1:])
        _, faults = bodies(kind, (line + b"\n") * 70)
        assert {CHECKSUM_FAULTS[one] for one in faults.tolist()} == {verified(kind, line)[1]}


@pytest.mark.invariant
@pytest.mark.parametrize("kind", KINDS)
@given(
    lines=st.lists(st.tuples(BODY, st.integers(0, 5)), min_size=1, max_size=12),
    repeat=st.sampled_from([1, 70]),
)
def test_many_lines_at_once_say_what_each_says_alone(
    kind: Checksum, lines: list[tuple[bytes, int]], repeat: int
) -> None:
    """Bodies and faults of a block are those of its lines, whatever is wrong with them."""
    block = [_spoilt(kind, body, how) for body, how in lines] * repeat
    kept, faults = bodies(kind, b"".join(one + b"\n" for one in block))
    alone = [verified(kind, one) for one in block]
    assert [CHECKSUM_FAULTS[one] for one in faults.tolist()] == [fault for _, fault in alone]
    assert kept.split(b"\n")[:-1] == [b"" if fault else body for body, fault in alone]


def _spoilt(kind: Checksum, body: bytes, how: int) -> bytes:
    line = with_checksum(kind, body)
    digits = len(line) - WIDTH[kind]
    return (
        line,
        line + b" ",
        line[:-1],
        body,
        line[:digits] + b"G" * WIDTH[kind],
        line[:digits] + line[digits:].lower(),
    )[how]


def test_no_checksum_leaves_the_line_alone() -> None:
    """Kind "none" adds nothing."""
    assert with_checksum("none", b"1,2") == b"1,2"
    assert checksum_of("none", b"1,2") == b""
