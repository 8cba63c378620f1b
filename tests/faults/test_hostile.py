"""Hostile input: whatever is fed, the outcome is a result or the program's own error, inert on a terminal."""

import csv
import io
import json
import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parent))

from fuzz_shapes import any_run, any_site
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from eastfall.io.errors import InputError
from eastfall.io.export import guarded
from eastfall.io.reduce import reduce_file
from eastfall.io.runlog import verify_log
from eastfall.io.safetext import safe
from eastfall.io.sitefile import parse_site
from eastfall.io.tables import reduce_table
from eastfall.physics.errors import EastfallError

ROOT = Path(__file__).parents[2]
LOG = (ROOT / "replay_logs" / "carnwick-pit_20260504T073000Z.eastfall.jsonl").read_bytes()

CAPTURE_SITE = """
[site]
latitude_deg = 57.3
[shaft]
depth_m = 300.0
[run]
kind = "{kind}"
[[link]]
url = "-"
form = "{form}"
columns = [{columns}]
checksum = "{checksum}"
"""

FORMS = [
    ("guided", "columns", '"depth_m", "tilt_a_deg", "tilt_b_deg"', "none"),
    ("hung", "columns", '"time_s", "depth_m", "east_mm", "north_mm"', "xor"),
    ("drop", "columns", '"depth_m", "east_mm", "north_mm"', "crc16-modbus"),
    ("guided", "iec61162", '"depth_m", "tilt_a_deg", "tilt_b_deg"', "none"),
]

# Bytes as instruments send them, and bytes as they never should.
LINES = st.one_of(
    st.binary(max_size=200),
    st.text(alphabet="0123456789.,-+eE*$ \r\n\tnaif", max_size=120).map(str.encode),
    st.sampled_from(
        [b"\x1b[2J", b"\x1b]0;owned\x07", b"[bold]x[/bold]", b"=cmd|' /C calc'!A0", b"\x00" * 50, b"9" * 5000]
    ),
    st.lists(st.floats(allow_nan=True, allow_infinity=True), min_size=1, max_size=6).map(
        lambda row: ",".join(map(repr, row)).encode() + b"\n"
    ),
)
FUZZ = settings(
    deadline=None,
    max_examples=60,
    suppress_health_check=[HealthCheck.function_scoped_fixture, HealthCheck.too_slow],
)


@pytest.mark.invariant
@pytest.mark.parametrize(("kind", "form", "columns", "checksum"), FORMS)
@FUZZ
@given(data=st.lists(LINES, max_size=20).map(b"\n".join))
def test_any_capture_gives_a_result_or_the_programs_own_error(tmp_path, kind, form, columns, checksum, data):
    """Any bytes as a capture: numbers that JSON can hold, or one line of refusal that is safe to print."""
    site = parse_site(CAPTURE_SITE.format(kind=kind, form=form, columns=columns, checksum=checksum), "s.toml")
    path = tmp_path / "capture"
    path.write_bytes(data)
    try:
        table = reduce_table(reduce_file(path, site=site, interval=1.0))
    except InputError as error:
        assert safe(str(error)) == str(error)
    else:
        json.dumps(table, allow_nan=False)


@pytest.mark.invariant
@FUZZ
@given(at=st.integers(0, len(LOG) - 1), byte=st.integers(0, 255))
def test_any_changed_byte_of_a_log_is_found_and_read_without_a_crash(tmp_path, at, byte):
    """One byte of a sealed log replaced by any other: verify says changed; reduce gives a result or its own error."""
    changed = LOG[:at] + bytes([byte]) + LOG[at + 1 :]
    path = tmp_path / "x.eastfall.jsonl"
    path.write_bytes(changed)
    try:
        state = verify_log(path).state
    except InputError:
        state = "unreadable"
    assert (state == "intact") == (changed == LOG)
    try:
        json.dumps(reduce_table(reduce_file(path)), allow_nan=False)
    except EastfallError as error:
        assert str(error)


@pytest.mark.invariant
@FUZZ
@given(end=st.integers(0, len(LOG)), tail=st.binary(max_size=30))
def test_a_log_cut_anywhere_with_rubbish_behind_is_read_as_far_as_it_goes(tmp_path, end, tail):
    """Cut at any byte, any rubbish after it: a result or the program's own error, never anything else."""
    path = tmp_path / "x.eastfall.jsonl"
    path.write_bytes(LOG[:end] + tail)
    try:
        found = reduce_file(path)
    except InputError as error:
        assert str(error)
    else:
        assert found.frames <= 36
        assert found.seal_state in {"intact", "cut short", "changed"}


@pytest.mark.invariant
@given(st.text(max_size=100))
def test_safe_text_holds_no_control_character_and_keeps_what_is_printable(text):
    """Escapes, bells, bidirectional overrides and line ends come out as visible text; the rest as it was."""
    out = safe(text)
    assert all(one.isprintable() for one in out)
    if text.isprintable() and "\\" not in text:
        assert out == text


@pytest.mark.invariant
@given(st.text(max_size=60))
def test_no_text_cell_of_a_csv_is_a_formula(text):
    """A spreadsheet that opens the cell sees text: it does not begin with =, +, -, @, tab or carriage return."""
    out = io.StringIO(newline="")
    csv.writer(out).writerow([guarded(text)])
    (cell,) = next(csv.reader(io.StringIO(out.getvalue(), newline="")))
    assert cell.lstrip(" ")[:1] not in set("=+-@\t\r")


@pytest.mark.parametrize(
    "name",
    [
        "../../etc/passwd",
        "/abs/olute",
        "a\x00b",
        "..",
        "con",
        "x" * 300,
        "=1+1",
        "\x1b[31m",
        "[b]name[/b]",
        "",
    ],
)
def test_a_site_name_never_leaves_the_folder_of_the_log(tmp_path, name):
    """Path tricks, control characters, over-long and empty names: the log lies in its folder under a plain name."""
    from datetime import UTC, datetime

    from eastfall.io.runlog import RunLogWriter

    text = CAPTURE_SITE.format(
        kind="guided", form="columns", columns='"depth_m", "tilt_a_deg"', checksum="none"
    )
    named = text.replace("[site]", f"[site]\nname = {json.dumps(name[:200])}", 1)
    log = RunLogWriter.create(
        tmp_path / "runs", parse_site(named, "s.toml"), started_at=datetime(2026, 1, 2, tzinfo=UTC)
    )
    log.close(0.0)
    assert log.path.parent == tmp_path / "runs"
    assert log.path.name.isascii()
    assert log.path.name.isprintable()
    assert not set(log.path.name) & set('/\\:*?"<>|=[]')


class Drawn:
    """Choices of a property test."""

    def __init__(self, data: st.DataObject) -> None:
        self._data = data

    def whole(self, low: int, high: int) -> int:
        """Return a whole number from `low` to `high`."""
        return self._data.draw(st.integers(low, high))

    def number(self, low: float, high: float) -> float:
        """Return a number from `low` to `high`."""
        return self._data.draw(st.floats(low, high))


SAME = settings(FUZZ, derandomize=True)
"""So much can come of these that new cases are looked for on demand, by `fuzz_inputs.py`."""


@pytest.mark.invariant
@SAME
@given(st.data())
def test_any_settings_within_their_ranges_give_numbers_that_json_holds_or_one_line(data):
    """Known keys with values from end to end of their range: predictions, budget, line and a run, or a refusal."""
    try:
        any_site(Drawn(data))
    except EastfallError as error:
        assert safe(str(error)) == str(error)


@pytest.mark.invariant
@SAME
@given(st.data())
def test_any_events_and_lines_in_a_log_that_is_whole_are_worked_through_or_refused(tmp_path, data):
    """Reduced, reported and replayed, forth and back; what a log can say at its worst comes out printable."""
    try:
        any_run(Drawn(data), tmp_path)
    except EastfallError as error:
        assert safe(str(error)) == str(error)
