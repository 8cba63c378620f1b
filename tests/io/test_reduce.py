"""Reduce: a whole recording or capture through the engine gives the live run's findings; bad input is explained."""

import json
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from record_help import SITE_TEXT, block, site, writer, written

from eastfall.io.arrivals import LineBlock, RunEvent
from eastfall.io.capture import CaptureReader
from eastfall.io.errors import CaptureError, LogError
from eastfall.io.pipeline import Pipeline
from eastfall.io.reduce import reduce_file
from eastfall.io.runlog import read_log
from eastfall.io.tables import reduce_table
from eastfall.io.whatif import differences, settings_of
from eastfall.physics.errors import EastfallError

LOGS = sorted((Path(__file__).parents[2] / "replay_logs").glob("*.eastfall.jsonl"))
TIMED = SITE_TEXT + 'columns = ["time_s", "depth_m", "tilt_a_deg", "tilt_b_deg"]\n'


def _lines(count: int = 400, *, timed: bool = False) -> list[bytes]:
    """Return a run down a guide at 1 m/s that leans by 0.01° at four lines a second."""
    return [
        (b"%.2f," % (n / 4) if timed else b"") + b"%.2f,%.4f,0.0050" % (n / 4, 0.01 + 0.002 * np.sin(n / 9))
        for n in range(count)
    ]


@pytest.mark.parametrize("log", LOGS, ids=lambda one: one.name.split("_")[0])
def test_reduction_equals_the_pipeline_fed_record_by_record(log: Path) -> None:
    """Large merged blocks give, to the last bit, what the recorded batches one by one give."""
    found = reduce_file(log)
    with read_log(log, merge=False) as reader:
        pipeline = Pipeline(reader.site())
        for arrival in reader:
            pipeline.take(arrival)
        pipeline.close(reader.last_time)
    assert found.result == pipeline.survey.result()
    assert found.frames == pipeline.frames > 0
    assert dict(found.faults) == dict(pipeline.faults)
    assert found.seal_state == "intact"


def test_a_capture_and_a_log_of_the_same_lines_come_to_the_same_stations(tmp_path: Path) -> None:
    """Lines with their interval stated give the stations that the same lines recorded at that pace give."""
    lines = _lines()
    log = writer(tmp_path)
    for number, line in enumerate(lines):
        log.raw(block(line, time=number / 4, first=number + 1))
    log.close(100.0)
    capture = tmp_path / "capture.txt"
    capture.write_bytes(b"\r\n".join(lines))  # without a final line end, as a cut capture has it
    from_log, from_capture = reduce_file(log.path), reduce_file(capture, site=site(), interval=0.25)
    assert from_log.result.stations == from_capture.result.stations
    assert len(from_log.result.stations) >= 9
    assert from_capture.frames == 400
    assert (from_capture.seal_state, from_capture.started_at) == ("", None)


def test_the_instruments_own_clock_serves_a_capture(tmp_path: Path) -> None:
    """With time_s in the lines no interval is needed, and the stations are those of the stated interval."""
    own, paced = tmp_path / "own.txt", tmp_path / "paced.txt"
    own.write_bytes(b"\n".join(_lines(timed=True)) + b"\n")
    paced.write_bytes(b"\n".join(_lines()) + b"\n")
    first, second = reduce_file(own, site=site(TIMED)), reduce_file(paced, site=site(), interval=0.25)
    for told in ("time", "name", "old", "new", "depth"):
        assert [getattr(one, told) for one in first.result.alarms] == [
            getattr(one, told) for one in second.result.alarms
        ]
    assert replace(first.result, alarms=()) == replace(second.result, alarms=())
    assert first.result.alarms
    for found in (first, second):
        assert all(one["host_time_s"] is None for one in reduce_table(found)["alarms"])


def test_a_log_cut_short_reduces_to_what_is_good(tmp_path: Path) -> None:
    """Without its end the log gives what came before, and says that it is cut short."""
    log = writer(tmp_path)
    for number, line in enumerate(_lines()):
        log.raw(block(line, time=number / 4, first=number + 1))
    cut = tmp_path / "cut.eastfall.jsonl"
    cut.write_bytes(log.path.read_bytes() + b'{"t":100.0,"raw":["99')
    log.close(100.0)
    found = reduce_file(cut)
    assert (found.frames, found.seal_state) == (400, "cut short")
    assert found.result.stations


def test_what_people_said_is_kept_and_the_recording_is_not_touched(tmp_path: Path) -> None:
    """Notes come out with who wrote them; reducing under other settings lists them and changes no byte."""
    log = writer(tmp_path)
    for number, line in enumerate(_lines()):
        log.raw(block(line, time=number / 4, first=number + 1))
    log.event(RunEvent(time=100.0, name="note", fields={"text": "wet", "who": "R. Vane"}))
    log.close(100.0)
    before = log.path.read_bytes()
    other = site(SITE_TEXT.replace("57.30", "45.0").replace("action_mm = 25.0", "action_mm = 20.0"))
    plain, changed = reduce_file(log.path), reduce_file(log.path, site=other)
    assert [one.fields["text"] for one in plain.events] == ["wet"]
    assert plain.differences == ()
    assert changed.differences == (("site.latitude_deg", 57.3, 45.0), ("limits.action_mm", 25.0, 20.0))
    assert plain.result.stations != changed.result.stations
    assert log.path.read_bytes() == before


def test_settings_are_listed_with_what_was_given_and_what_is_default() -> None:
    """Every key of the site file appears once, in its unit, with whether it stands in the file."""
    found = {one.key: one for one in settings_of(site())}
    assert found["site.latitude_deg"].given
    assert found["site.latitude_deg"].value == 57.3
    assert not found["instrument.u_tilt_deg"].given
    assert (found["instrument.u_tilt_deg"].value, found["instrument.u_tilt_deg"].unit) == (0.002, "deg")
    assert found["limits.warning_mm"].value == 15.0
    assert differences(site(), site()) == ()


def test_links_read_otherwise_are_a_difference(tmp_path: Path) -> None:
    """A what-if that reads the columns in another order says so; where the lines came from is no difference."""
    swapped = site(SITE_TEXT + 'columns = ["depth_m", "tilt_b_deg", "tilt_a_deg"]\n')
    (only,) = differences(site(), swapped)
    assert only.key == "link[0].columns"
    assert differences(site(), site(SITE_TEXT.replace('url = "-"', 'url = "/dev/ttyUSB0"'))) == ()
    log = writer(tmp_path)
    log.raw(block(*_lines(40), step=0.25))
    log.close(10.0)
    bare = site(SITE_TEXT.split("[[link]]", maxsplit=1)[0])
    assert reduce_file(log.path, site=bare).frames == 40


@pytest.mark.parametrize(
    ("content", "interval", "expected"),
    [
        (b"", 1.0, "is empty"),
        (
            b"hello\nworld\nagain\nmore\n",
            1.0,
            r'none of its 4 lines .* line 1 "hello": wrong number of fields',
        ),
        (b"\n\nhello\n\nworld\n", 1.0, r'of its 5 lines .*: line 3 "hello": .*; line 5 "world": wrong'),
        (b"\n\n", 1.0, "of its 2 lines .*: the first of them are empty"),
        (b"1;2;3\n", 1.0, r"the form columns \(depth_m, tilt_a_deg, tilt_b_deg; delimiter ','\)"),
        (b"\x1b[2J\x07,1,2\n", 1.0, r"\\x1b\[2J\\x07"),
        (b"\x00" * 9000, 1.0, "none of its 1 lines"),
        (b"5000.0,0.1,0.1\n", 1.0, "reads well, but gives no reading inside the shaft"),
        (b"1.0,0.1,0.1\n", None, "carry no time_s; expected an interval"),
        (b"1.0,0.1,0.1\n", -1.0, "expected more than 0 s"),
    ],
)
def test_a_capture_that_does_not_fit_is_explained_with_its_first_lines(
    tmp_path: Path, content: bytes, interval: float | None, expected: str
) -> None:
    """One clear line: the file, how its lines were read, the first of them made safe, and what was expected."""
    path = tmp_path / "capture.txt"
    path.write_bytes(content)
    with pytest.raises(CaptureError, match=expected) as caught:
        reduce_file(path, site=site(), interval=interval)
    text = str(caught.value)
    assert text.startswith(str(path))
    assert text.isprintable()


def test_files_that_are_not_there_or_need_a_site_are_one_clear_line(tmp_path: Path) -> None:
    """A missing file, a folder, and a capture without a site file are each refused with their path."""
    capture = tmp_path / "capture.txt"
    capture.write_bytes(b"1,2,3\n")
    with pytest.raises(CaptureError, match="expected one, or a capture with a site file"):
        reduce_file(capture)
    for path in (tmp_path / "none.jsonl", tmp_path):
        with pytest.raises(LogError, match="cannot be read"):
            reduce_file(path)


@pytest.mark.skipif(not sys.platform.startswith("linux"), reason="reads /proc")
def test_memory_is_flat_over_ten_times_the_file(tmp_path: Path) -> None:
    """The peak of a process that reduces a capture of ten times the size grows by less than 12 MB."""
    script = (
        f"import sys;from pathlib import Path;sys.path.insert(0,{str(Path(__file__).parent)!r});"
        "from record_help import site;"
        "from eastfall.io.reduce import reduce_file;reduce_file(Path(sys.argv[1]),site=site(),interval=0.01);"
        "print(next(l for l in open('/proc/self/status') if l.startswith('VmHWM')).split()[1])"
    )
    peaks = []
    for count in (50_000, 500_000):
        depth = 470.0 - 470.0 * np.cos(np.arange(count) * (2 * np.pi / count))
        path = tmp_path / f"{count}.txt"
        path.write_text("".join(f"{z:.3f},0.0100,0.0050\n" for z in depth), encoding="ascii")
        done = subprocess.run(
            [sys.executable, "-c", script, str(path)], check=True, capture_output=True, text=True
        )
        peaks.append(int(done.stdout) / 1024)
    assert peaks[1] - peaks[0] < 12.0, peaks


def test_the_json_of_a_reduction_is_plain() -> None:
    """What reduce prints survives a strict JSON round trip for every kind of demo run."""
    for log in LOGS:
        table = reduce_table(reduce_file(log))
        assert json.loads(json.dumps(table, allow_nan=False)) == table
        assert table["stations"]


def test_line_numbers_count_on_over_the_blocks_of_a_capture(tmp_path: Path) -> None:
    """Blocks of a large capture are numbered and timed through."""
    path = tmp_path / "big.txt"
    path.write_bytes(b"1.00,0.01,0.01\n" * 200_000)
    with CaptureReader(path, 0.5) as reader:
        blocks = [one for one in reader if isinstance(one, LineBlock)]
    assert len(blocks) > 2
    before = np.cumsum([len(one) for one in blocks])
    assert [one.first_line for one in blocks[1:]] == (before[:-1] + 1).tolist()
    assert blocks[-1].times[-1] == 99_999.5


@pytest.fixture(scope="module")
def small_log(tmp_path_factory: pytest.TempPathFactory) -> bytes:
    """Return the bytes of a short log with a note."""
    return written(tmp_path_factory.mktemp("small"), seconds=12, rate=2).read_bytes()


@given(data=st.data())
def test_a_log_of_any_bytes_gives_a_result_or_the_programs_own_error(
    tmp_path_factory: pytest.TempPathFactory, small_log: bytes, data: st.DataObject
) -> None:
    """Pieces of a log cut, repeated, overwritten and mixed with rubbish never end in any other exception."""
    parts = data.draw(
        st.lists(
            st.one_of(
                st.binary(max_size=30),
                st.sampled_from(small_log.splitlines(keepends=True)),
                st.sampled_from(
                    [b'{"t":1e999,"raw":["1,2,3"]}\n', b'{"t":-5,"raw":["1,2,3"]}\n', b'{"t":9}\n']
                ),
                st.sampled_from(
                    [b'{"t":1,"event":"end","fields":{}}\n', b'{"t":1,"event":"shelve","fields":[]}\n']
                ),
                st.sampled_from(
                    [b'{"seal":"","t":1,"lines":2,"end":"rolled","next":"../x"}\n', b'{"seal":null}\n']
                ),
                st.tuples(st.integers(0, len(small_log)), st.integers(0, 400)).map(
                    lambda cut: small_log[cut[0] : cut[0] + cut[1]]
                ),
            ),
            max_size=8,
        )
    )
    path = tmp_path_factory.mktemp("any") / "any.eastfall.jsonl"
    path.write_bytes(
        (small_log if data.draw(st.booleans()) else small_log.splitlines(keepends=True)[0]) + b"".join(parts)
    )
    try:
        found = reduce_file(path)
    except EastfallError as error:
        assert str(error).isprintable()
    else:
        assert found.seal_state in {"intact", "cut short", "changed"}
        assert (found.seal_state == "intact") == (path.read_bytes() == small_log)


def test_a_mark_in_front_of_a_capture_costs_no_reading(tmp_path: Path) -> None:
    """An editor's byte order mark is no part of the first line: with and without it the same stations come out."""
    plain, marked = tmp_path / "plain.txt", tmp_path / "marked.txt"
    text = b"".join(one.rstrip(b"\n") + b"\r\n" for one in _lines(200))
    plain.write_bytes(text)
    marked.write_bytes(b"\xef\xbb\xbf" + text)
    found = [reduce_file(path, site=site(), interval=0.25) for path in (plain, marked)]
    assert [one.frames for one in found] == [200, 200]
    assert found[0].result.stations == found[1].result.stations
