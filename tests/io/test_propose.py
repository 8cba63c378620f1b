"""Proposing a line form: what an emulated instrument sends is recognised again, and no bytes whatever do harm."""

from functools import cache
from itertools import chain

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from eastfall.io.broken import broken_line
from eastfall.io.checksum import with_checksum
from eastfall.io.emulator import Emulator, demo_site
from eastfall.io.forms import decoder_for
from eastfall.io.propose import Proposal, propose
from eastfall.io.sitefile import LinkSettings
from eastfall.io.wording import LineWriter
from eastfall.physics.settings import Kind

pytestmark = pytest.mark.invariant
LINES = 60


@cache
def sent(kind: Kind, rate: float = 5.0) -> tuple[dict[str, float], ...]:
    """Return what the emulated instrument of a kind of run measures, so often a second from the tenth second on."""
    scene = Emulator(demo_site(kind), seed=3, rate=rate).scene
    count = LINES if scene.count is None else min(LINES, scene.count)
    first = 0.0 if kind == "drop" else 10.0
    said = scene.sample(first + np.arange(count) * scene.interval, np.random.default_rng(8))
    azimuth = 0.5 + 0.9 * np.sin(np.arange(count) / 9.0) + 3.0
    return tuple(
        {name: float(column[row]) for name, column in said.items()}
        | {"azimuth": float(azimuth[row]), "face": np.pi * (row // 8 % 2)}
        for row in range(count)
    )


def worded(kind: Kind, form: LinkSettings, rate: float = 5.0) -> list[bytes]:
    """Return the lines of one link."""
    writer = LineWriter(form)
    return list(chain.from_iterable(writer.bodies(one) for one in sent(kind, rate)))


@st.composite
def column_forms(draw: st.DrawFn) -> LinkSettings:
    """Draw a form of a guided run: the tilts side by side, the rest anywhere, temperature ahead of supply.

    An azimuth comes only with a clock: without one, a slowly turning probe could as well be the depth, and the depth
    the clock.
    """
    parts = [("depth_m",), ("tilt_a_deg", "tilt_b_deg")]
    parts += draw(st.sampled_from([[], [("time_s",)], [("time_s",), ("azimuth_deg",)]]))
    parts += draw(st.sampled_from([[], [("temperature_c",)], [("temperature_c", "supply_v")]]))
    parts += draw(st.sampled_from([[], [("face_deg",)], [("-",)]]))
    order = draw(st.permutations(parts))
    return LinkSettings(
        url="x",
        columns=tuple(chain.from_iterable(order)),
        delimiter=draw(st.sampled_from([",", ";", "\t", " ", "|", ":", "/", "_"])),
        checksum=draw(st.sampled_from(["none", "xor", "crc16-modbus"])),
    )


@settings(max_examples=60, deadline=None)
@given(column_forms())
def test_form_of_a_moving_probe_is_found_again(form: LinkSettings) -> None:
    """Delimiter, checksum, number of fields and every column come out as the lines were made."""
    lines = worded("guided", form)
    found = propose(lines)
    assert found.link("x", 9600) == form
    assert (found.fields, found.read, found.lines) == (len(form.columns), LINES, LINES)


@settings(max_examples=30, deadline=None)
@given(column_forms(), st.integers(0, 2**32 - 1))
def test_a_few_broken_lines_change_nothing(form: LinkSettings, seed: int) -> None:
    """With every tenth line damaged the proposal is the same, and so many fewer are read."""
    rng = np.random.default_rng(seed)
    lines = worded("guided", form)
    for place in range(4, LINES, 10):
        lines[place] = broken_line("truncated", lines[place], form, rng)
    found = propose(lines)
    assert found.link("x", 9600) == form
    assert found.read == LINES - LINES // 10


@settings(max_examples=20, deadline=None)
@given(st.sampled_from([",", ";", " "]), st.sampled_from(["none", "xor"]), st.booleans())
def test_offsets_of_a_plumb_line_are_no_tilts(delimiter: str, checksum: str, timed: bool) -> None:
    """A line that swings at one depth: the depth stands still and what swings is east and north."""
    columns = ("depth_m", "east_mm", "north_mm")
    form = LinkSettings(
        url="x",
        columns=("time_s", *columns) if timed else columns,
        delimiter=delimiter,
        checksum=checksum,  # type: ignore[arg-type]
    )
    assert propose(worded("hung", form)).columns == form.columns


def test_what_swings_to_both_sides_is_no_depth() -> None:
    """With the depth on another link, a whole swing goes as far below zero as above, and is not taken for one."""
    form = LinkSettings(url="x", columns=("time_s", "east_mm", "north_mm"))
    found = propose(worded("hung", form, rate=1.0)).columns  # a minute: one swing takes 41 s
    assert found[1:] == form.columns[1:]
    assert found[0] in {
        "time_s",
        "depth_m",
    }  # alone beside offsets, an even rise can be either: it is said so


def test_landing_marks_of_a_drop_are_offsets() -> None:
    """A few marks at the bottom are enough for depth and offsets."""
    form = LinkSettings(url="x", columns=("time_s", "depth_m", "east_mm", "north_mm"))
    assert propose(worded("drop", form)).columns == form.columns


_SPOKEN = ("tilt_a_deg", "tilt_b_deg", "temperature_c", "supply_v", "azimuth_deg")


@settings(max_examples=25, deadline=None)
@given(st.sets(st.sampled_from(_SPOKEN), min_size=1), st.booleans())
def test_sentences_say_themselves_what_they_speak_of(spoken: set[str], depth: bool) -> None:
    """From DPT and XDR sentences exactly the quantities come out that were put in, and every line is used."""
    names = {"depth_m"} | spoken if depth else spoken
    form = LinkSettings(url="x", form="iec61162", columns=tuple(sorted(names)))
    found = propose(worded("guided", form))
    assert found.form == "iec61162"
    assert set(found.columns) == names
    # Beside a depth and no tilt the other quantities come in sentences of their own, which then say nothing.
    if not depth or names & {"tilt_a_deg", "tilt_b_deg"}:
        assert found.read == found.lines


def test_sentence_that_says_nothing_readable_is_cut_like_columns() -> None:
    """A line that begins with $ and carries the right checksum, but is neither DPT nor XDR, is read by its fields."""
    lines = [
        with_checksum(
            "xor", b"$IN,%.3f,%.4f,%.4f" % (one["depth"], 57.3 * one["tilt_a"], 57.3 * one["tilt_b"])
        )
        for one in sent("guided")
    ]
    found = propose(lines)
    assert (found.form, found.checksum) == ("columns", "xor")
    assert found.columns == ("-", "depth_m", "tilt_a_deg", "tilt_b_deg")
    assert found.read == LINES


@settings(max_examples=40, deadline=None)
@given(
    st.lists(st.binary(min_size=3, max_size=40).map(lambda raw: bytes(128 | one for one in raw)), min_size=1)
)
def test_bytes_that_are_no_text_hint_at_the_speed(lines: list[bytes]) -> None:
    """All rubbish: nothing is proposed but another serial speed."""
    found = propose(lines)
    assert found.speed_is_doubtful
    assert found.link("x", 9600) is None
    assert "serial speed" in found.reasons[0]


@settings(max_examples=150, deadline=None)
@given(
    st.lists(
        st.one_of(st.binary(max_size=60), st.text("0123456789.,;*$ -+eE\tAB", max_size=40).map(str.encode)),
        max_size=30,
    )
)
def test_whatever_comes_a_proposal_can_be_used(lines: list[bytes]) -> None:
    """No bytes raise; a form that is proposed is one that a decoder accepts, and its count is that decoder's."""
    found = propose(lines)
    assert found.reasons
    assert 0 <= found.read <= found.lines <= len(lines)
    form = found.link("x", 9600)
    if form is not None:
        decoder_for(form)
    named = [one for one in found.columns if one != "-"]
    assert len(named) == len(set(named))


@pytest.mark.parametrize(
    ("lines", "says"),
    [
        ([], "no line has come yet"),
        ([b"", b"\r\n"], "no line has come yet"),
        ([b"12,5;3,4;1,0"] * 6, "18 of 18 fields are numbers with a decimal comma"),
        ([b"1.0,2.0*ZZ"] * 6, "the lines end in * and something that is neither checksum known here"),
        ([b"1.0,2.0"] * 4, "4 lines alike; 5 are needed to tell what the fields are"),
        ([b"7"] * 6, "one field a line: no delimiter is seen"),
        ([b"100.0,1,2"] * 6, "no field looks like a tilt or an offset; let the probe move and look again"),
    ],
)
def test_what_cannot_be_told_is_said_in_words(lines: list[bytes], says: str) -> None:
    """Each gap in the proposal has its own sentence."""
    assert says in propose(lines).reasons


def test_only_the_newest_lines_count() -> None:
    """After the speed was set right, the rubbish from before is forgotten."""
    form = LinkSettings(url="x", columns=("depth_m", "tilt_a_deg", "tilt_b_deg"))
    lines = [b"\xff\x80\xfe"] * 500 + worded("guided", form) * 4
    assert propose(lines).link("x", 9600) == form


def test_empty_fields_are_left_to_quantities_that_may_be_empty() -> None:
    """A column with gaps is no depth and no tilt."""
    lines = [
        b"%.3f,%s,%.4f,%.4f" % (one["depth"], b"" if row % 3 else b"14.2", one["tilt_a"], one["tilt_b"])
        for row, one in enumerate(sent("guided"))
    ]
    found = propose(lines)
    assert found.columns == ("depth_m", "temperature_c", "tilt_a_deg", "tilt_b_deg")
    assert found.read == LINES


def test_proposal_without_a_named_column_is_no_link() -> None:
    """A form of ignored fields alone could read nothing."""
    assert Proposal(form="columns", columns=("-", "-")).link("x", 9600) is None


@pytest.mark.parametrize(
    ("rate", "name"), [(None, "time_s"), (0.5, "time_s"), (1.0, "time_s"), (10.0, "-"), (0.1, "-")]
)
def test_a_counter_is_no_clock(rate: float | None, name: str) -> None:
    """What rises by one a line, ten lines in a second, would make a line ten times too slow."""
    lines = [
        b"%d,%.3f,%.4f,%.4f" % (row, one["depth"], one["tilt_a"], one["tilt_b"])
        for row, one in enumerate(sent("guided"))
    ]
    found = propose(lines, rate)
    assert found.columns == (name, "depth_m", "tilt_a_deg", "tilt_b_deg")
    assert any("a counter, or no clock in seconds" in one for one in found.reasons) == (name == "-")


def test_decimal_commas_are_proposed_and_read() -> None:
    """The lines of a form with decimal commas, another column order and a checksum give that form back."""
    form = LinkSettings(
        url="x",
        columns=("temperature_c", "depth_m", "tilt_a_deg", "tilt_b_deg"),
        delimiter=";",
        decimal="comma",
        checksum="xor",
    )
    found = propose(worded("guided", form))
    assert found.decimal == "comma"
    assert found.delimiter == ";"
    assert found.checksum == "xor"
    assert found.columns[1:] == form.columns[1:]
    assert found.read == found.lines
