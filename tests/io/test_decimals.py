"""Numbers read many at once against Python's own `float`, bit for bit."""

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from eastfall.io.decimals import counts_of, fields_of, plain_numbers, trimmed

DIGITS = st.text("0123456789", max_size=9)
PLAIN = st.builds(
    "{}{}{}{}".format, st.sampled_from(["", "+", "-"]), DIGITS, st.sampled_from(["", "."]), DIGITS
)
BLANKS = st.text(" \t", max_size=30)
ODD = st.text(st.sampled_from("0123456789+-.eE ,_xnaif:/\x00\xff"), max_size=12)


def _is_number(text: str) -> bool:
    body = text[1:] if text[:1] in ("+", "-") else text
    whole, _, part = body.partition(".")
    return body.isascii() and all(one in "0123456789" for one in whole + part) and bool(whole + part)


@pytest.mark.invariant
@settings(max_examples=150)
@given(st.lists(st.one_of(PLAIN, ODD), min_size=1, max_size=20))
@example(
    ["-0.0", "+0", ".5", "5.", ".", "-", "", "99999999.99999999", "12345678.1234567", "123456789", "1e5"]
)
def test_what_is_taken_for_plain_is_float_to_the_last_bit(words: list[str]) -> None:
    """A field that is called plain is a decimal number and has the value of `float`; no plain number is refused."""
    words = [one.replace(",", "") for one in words]
    data = ",".join(words).encode("latin-1") + b"\n"
    fields = fields_of(data, ord(","))
    assert counts_of(fields, 1, len(words)) is None
    assert counts_of(fields, 1, len(words) + 1).tolist() == [len(words)]
    values, plain = plain_numbers(fields)
    for word, value, good in zip(words, values.tolist(), plain.tolist(), strict=True):
        if good:
            assert _is_number(word)
            assert np.float64(value).tobytes() == np.float64(word).tobytes()
        elif _is_number(word):
            whole, _, part = word.lstrip("+-").partition(".")
            assert len(whole) > 8 or len(part) > 8 or int(whole + part) >= 2**53


@pytest.mark.invariant
@given(st.lists(st.tuples(BLANKS, PLAIN, BLANKS), min_size=1, max_size=8))
def test_blanks_around_a_field_are_trimmed(words: list[tuple[str, str, str]]) -> None:
    """Up to 24 blanks on either side change nothing; a wider field is left to the careful reader, never misread."""
    data = ",".join("".join(one) for one in words).encode() + b"\n"
    bare = ",".join(one[1] for one in words).encode() + b"\n"
    values, plain = plain_numbers(trimmed(fields_of(data, ord(","))))
    expected, good = plain_numbers(fields_of(bare, ord(",")))
    narrow = np.array([max(len(one[0]), len(one[2])) <= 24 for one in words])
    assert not (plain & ~good).any()
    assert np.array_equal(plain[narrow], good[narrow])
    assert values[plain].tobytes() == expected[plain].tobytes()


@pytest.mark.invariant
def test_every_short_decimal_reads_as_float_does() -> None:
    """A hundred thousand drawn numbers of one to eight digits on either side of the point agree with `float`."""
    rng = np.random.default_rng(5)
    whole = rng.integers(0, 10 ** rng.integers(1, 9, 100_000))
    places = rng.integers(0, 9, 100_000)
    words = [
        f"{a}.{b:0{n}d}"[: len(str(a)) + 1 + n]
        for a, n, b in zip(whole, places, rng.integers(0, 10**8, 100_000), strict=True)
    ]
    words = [one for one in words if int(one.replace(".", "")) < 2**53]
    values, plain = plain_numbers(fields_of("\n".join(words).encode() + b"\n", ord(",")))
    assert plain.all()
    assert values.tobytes() == np.array([float(one) for one in words]).tobytes()
