"""Text made harmless: nothing that a terminal acts on comes out of `safe`."""

import json

import pytest
from hypothesis import given
from hypothesis import strategies as st

from eastfall.io.safetext import safe, safe_json


@pytest.mark.parametrize(
    ("given_text", "shown"),
    [
        ("512.3,0.01", "512.3,0.01"),
        ("\x1b[2J", r"\x1b[2J"),
        ("a\tb\r\n", r"a\x09b\x0d\x0a"),
        (b"\x9b31m\x00\xff", "\\x9b31m\\x00ÿ"),
        ("\u202egpj", r"\u202egpj"),
        ("\u2028", r"\u2028"),
        ("\U000e0041", r"\U000e0041"),
        ("Förderturm № 2 ±5°", "Förderturm № 2 ±5°"),
    ],
)
def test_controls_read_as_escapes_and_print_stays(given_text: str | bytes, shown: str) -> None:
    """Control, formatting and unassigned characters show as escapes; printable text is as it was."""
    assert safe(given_text) == shown


@pytest.mark.invariant
@given(st.one_of(st.text(), st.binary()), st.one_of(st.none(), st.integers(3, 40)))
def test_whatever_goes_in_printable_text_of_the_width_comes_out(text: str | bytes, width: int | None) -> None:
    """The result holds printable characters alone, is never wider than asked, and made safe again is the same."""
    out = safe(text, width)
    assert out.isprintable()
    assert safe(out) == out
    if width is not None:
        assert len(out) <= width


def test_longer_text_ends_in_dots() -> None:
    """Text that does not fit says so."""
    assert safe("0123456789", 8) == "01234..."
    assert safe("01234567", 8) == "01234567"


@pytest.mark.invariant
@given(
    st.recursive(st.text(), lambda inner: st.dictionaries(st.text(), inner) | st.lists(inner), max_leaves=5)
)
def test_json_without_control_characters_reads_as_the_same(value: object) -> None:
    """Escapes of both control blocks and of what turns or hides text stand for the very characters."""
    text = safe_json(json.dumps(value, ensure_ascii=False, indent=1))
    assert json.loads(text) == value
    assert text.replace("\n", "").isprintable()
