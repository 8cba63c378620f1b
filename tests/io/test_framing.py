"""The splitter: every byte comes out in a line, waits within the bound, or is counted as cut."""

from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from eastfall.io.framing import LINE_LIMIT, Splitter, has_long_line
from eastfall.physics.errors import ParameterError

STREAMS = st.lists(
    st.sampled_from([b"\r", b"\n", b"\r\n", b"\n\r", b"12.5,0.1", b"\x00", b"\xff\x1b", b",", b"x" * 9]),
    max_size=60,
).map(b"".join)


def _fed(splitter: Splitter, pieces: list[bytes]) -> bytes:
    return b"".join(splitter.feed(one) for one in pieces)


def _cuts(data: bytes, places: list[int]) -> list[bytes]:
    edges = [0, *sorted(place % (len(data) + 1) for place in places), len(data)]
    return [data[a:b] for a, b in pairwise(edges)]


@pytest.mark.parametrize("end", [b"\n", b"\r\n", b"\r"])
def test_all_three_line_ends_give_the_same_lines(end: bytes) -> None:
    """LF, CR LF and a lone CR each end one line."""
    splitter = Splitter()
    assert splitter.feed(b"a" + end + b"b" + end + b"c") == b"a\nb\n"
    assert splitter.pending == b"c"


def test_a_line_end_cut_in_two_is_one_line_end() -> None:
    """CR at the end of one piece and LF at the start of the next make no empty line."""
    splitter = Splitter()
    assert _fed(splitter, [b"a\r", b"\nb\r", b"c\n", b"\n"]) == b"a\nb\nc\n\n"


@pytest.mark.invariant
@given(STREAMS, st.lists(st.integers(0, 10_000), max_size=20), st.sampled_from([1, 2, 5, 16, LINE_LIMIT]))
def test_lines_do_not_depend_on_how_the_bytes_came(data: bytes, places: list[int], limit: int) -> None:
    """Whole, in random pieces and byte by byte, the same lines, the same rest and the same cut come out."""
    whole, pieces, single = (Splitter(limit) for _ in range(3))
    lines = whole.feed(data)
    assert _fed(pieces, _cuts(data, places)) == lines
    assert _fed(single, [data[i : i + 1] for i in range(len(data))]) == lines
    assert whole.pending == pieces.pending == single.pending
    assert whole.cut == pieces.cut == single.cut


@pytest.mark.invariant
@given(STREAMS, st.sampled_from([1, 2, 5, 16, LINE_LIMIT]))
def test_every_byte_is_in_a_line_or_pending_or_cut(data: bytes, limit: int) -> None:
    """Bytes out, bytes waiting and bytes cut add up to the bytes in; no line or rest is longer than the limit."""
    splitter = Splitter(limit)
    lines = splitter.feed(data)
    put_in = sum(len(one) for one in data.replace(b"\r\n", b"\n").replace(b"\r", b"\n").split(b"\n"))
    assert put_in == len(lines) - lines.count(b"\n") + len(splitter.pending) + splitter.cut
    assert all(len(one) <= limit for one in lines.split(b"\n"))
    assert len(splitter.pending) < limit


def test_a_megabyte_without_a_line_end_is_held_in_four_kilobytes() -> None:
    """An endless line is cut at the limit at once, its rest counted, and the next line is whole again."""
    splitter = Splitter()
    out = b"".join(splitter.feed(b"7" * 1000) for _ in range(1000))
    assert out == b"7" * LINE_LIMIT + b"\n"
    assert splitter.pending == b""
    assert splitter.feed(b"77\n1,2,3\n") == b"1,2,3\n"
    assert splitter.cut == 1_000_000 + 2 - LINE_LIMIT


def test_control_bytes_stay_in_their_line() -> None:
    """NUL and every other control byte but CR and LF is kept: the record is of what came."""
    odd = bytes(code for code in range(256) if code not in b"\r\n")
    assert Splitter().feed(odd + b"\n") == odd + b"\n"


def test_a_line_whose_end_will_not_come_is_given_back_once() -> None:
    """What waits when a link is lost is no part of what comes after."""
    splitter = Splitter()
    splitter.feed(b"51")
    assert splitter.cut_off() == b"51"
    assert splitter.feed(b"2.3,1\n") == b"2.3,1\n"
    assert splitter.cut_off() == b""


@pytest.mark.invariant
@given(st.lists(st.integers(0, 40), max_size=30), st.integers(1, 24))
def test_a_long_line_is_never_overlooked(lengths: list[int], limit: int) -> None:
    """Where a line reaches the limit, the window search says so."""
    data = b"".join(b"x" * one + b"\n" for one in lengths)
    if any(one >= limit for one in lengths):
        assert has_long_line(data, limit)


def test_a_limit_below_one_is_refused() -> None:
    """The bound is a positive number of bytes."""
    with pytest.raises(ParameterError, match="limit is 0 bytes; expected 1 or more"):
        Splitter(0)
