"""Replay: the live run's findings at any pace, from any jump, and while another still writes."""

from pathlib import Path

import numpy as np
import pytest
from record_help import SITE_TEXT, STARTED, block, site, writer

from eastfall.io.arrivals import LineBlock, RunEvent
from eastfall.io.logtail import last_time
from eastfall.io.pipeline import merged
from eastfall.io.reduce import reduce_file
from eastfall.io.replay import Replay
from eastfall.io.replayindex import Index, split
from eastfall.io.run import RunUpdate
from eastfall.io.runlog import RunLogWriter, read_log
from eastfall.physics.findings import Findings

LOGS = sorted((Path(__file__).parents[2] / "replay_logs").glob("*.eastfall.jsonl"))
GUIDED = next(one for one in LOGS if "sandrigg" in one.name)


def _same(first: Findings, second: Findings) -> None:
    assert np.array_equal(first.rows.data, second.rows.data, equal_nan=True)
    assert first.stations == second.stations
    assert first.alarms == second.alarms


def _all(updates: list[RunUpdate]) -> Findings:
    return merged([one for update in updates for one in update.findings])


def _played(path: Path, pace: float) -> tuple[Findings, Replay]:
    replay = Replay(path)
    updates = []
    time = 0.0
    while not replay.ended:
        time += pace
        updates.append(replay.advance(time))
    replay.close()
    return _all(updates), replay


@pytest.mark.invariant
@pytest.mark.parametrize("log", LOGS, ids=lambda one: one.name.split("_")[0])
def test_findings_do_not_depend_on_the_pace(log: Path) -> None:
    """Played in steps of 4.3 s, of 37 s and at once, a run gives the same findings to the last bit, and the result."""
    at_once, whole = _played(log, 1e9)
    result = reduce_file(log).result
    assert whole.pipeline.survey.result() == result
    for pace in (4.3, 37.0):
        found, replay = _played(log, pace)
        _same(found, at_once)
        assert replay.pipeline.survey.result() == result


def test_what_stands_at_an_instant_does_not_depend_on_how_one_got_there() -> None:
    """Forward in steps, by a jump, and back from the end: the same answer, alarms and health."""
    instant = 120.0
    walked, jumped, back = Replay(GUIDED), Replay(GUIDED), Replay(GUIDED)
    for time in np.arange(0.0, instant, 1.7):
        walked.advance(float(time))
    back.advance(1e9)
    assert back.ended
    updates = [walked.advance(instant), jumped.seek(instant), back.seek(instant)]
    assert back.restarts == 1
    assert {one.time for one in updates} == {instant}
    for one in updates[1:]:
        assert (one.standing, one.alarms, one.health) == (
            updates[0].standing,
            updates[0].alarms,
            updates[0].health,
        )
    _same(_all([updates[1]]), _all([updates[2]]))
    for replay in (walked, jumped, back):
        replay.close()


def test_a_step_brings_what_arrived_at_the_next_instant() -> None:
    """Stepping from the start visits every recorded instant in order, and then ends the run."""
    with read_log(GUIDED) as reader:
        arrivals = list(reader)
    instants = sorted(
        {t for one in arrivals for t in (one.times.tolist() if isinstance(one, LineBlock) else [one.time])}
    )
    replay = Replay(GUIDED)
    visited = [replay.step().time for _ in range(20)]
    assert sorted(set(visited)) == instants[: len(set(visited))]
    assert len(set(visited)) >= 19
    replay.close()


def test_jumps_find_stations_alarms_passes_notes_and_depths() -> None:
    """Each mark's time is where the thing happens: just before it is not there, at it it is."""
    replay = Replay(GUIDED)
    index = replay.index
    assert [one.text for one in index.of("pass")] == ["pass 1, down", "pass 2, up"]
    # 37 taken in passing, and halts at the collar (renewing that station), and at the bottom.
    assert len(index.of("station")) == 40
    alarm = index.of("alarm")[0]
    assert not replay.seek(alarm.time - 1.0).alarms
    assert [one.name for one in replay.seek(alarm.time + 1.0).alarms] == ["warning limit"]
    down = index.time_of_depth(228.0)
    assert down is not None
    up = index.time_of_depth(228.0, after=index.of("pass")[1].time)
    assert up is not None
    assert down < index.of("pass")[1].time < up
    for time in (down, up):
        standing = replay.seek(time).standing
        assert standing is not None
        assert (
            abs(standing.depth - 228.0) < 2.0
        )  # the probe makes 0.75 m between readings, and slows at the ends
    assert index.time_of_depth(5000.0) is None
    replay.close()


def _timed_log(folder: Path) -> Path:
    """Write a log whose instrument's clock is 1000 s ahead of the run's."""
    columns = 'columns = ["time_s", "depth_m", "tilt_a_deg", "tilt_b_deg"]\n'
    log = RunLogWriter.create(folder, site(SITE_TEXT + columns), started_at=STARTED)
    for n in range(200):
        log.raw(block(b"%.2f,%.2f,0.01,0.01" % (1000 + n / 4, n / 4), time=n / 4, first=n + 1))
    log.event(RunEvent(time=49.0, name="note", fields={"text": "\x1b[31mhere", "who": "R. Vane"}))
    log.close(50.0)
    return log.path


def test_marks_are_on_the_recordings_clock_whatever_the_instruments_says(tmp_path: Path) -> None:
    """With an instrument clock 1000 s ahead, a station 40 m down at 1 m/s is at 40 s of the recording."""
    replay = Replay(_timed_log(tmp_path))
    stations = {round(one.depth): one.time for one in replay.index.of("station")}
    assert stations[40] == pytest.approx(40.0, abs=0.5)
    (note,) = replay.index.of("note")
    assert (note.time, note.text) == (49.0, "\\x1b[31mhere · R. Vane")
    assert replay.index.time_of_depth(30.0) == pytest.approx(30.0, abs=0.3)
    replay.close()


def test_a_follower_sees_what_the_writer_writes_and_the_end(tmp_path: Path) -> None:
    """Following a growing log gives each reading at once, and in the end the findings of the finished run."""
    log = writer(tmp_path)
    replay = Replay(log.path, follow=True)
    updates = []
    for n in range(200):
        log.raw(block(b"%.2f,0.0100,0.0050" % (n / 4), time=n / 4, first=n + 1))
        updates.append(replay.catch_up(n / 4))
        assert updates[-1].health.frames == n + 1
        assert not replay.ended
    silent = replay.catch_up(60.0)
    assert [one.name for one in silent.alarms] == ["feed silent"]
    updates.append(silent)
    log.event(RunEvent(time=61.0, name="end"))
    log.close(61.0)
    updates.append(replay.catch_up(61.0))
    assert replay.ended
    assert replay.pipeline.survey.result() == reduce_file(log.path).result
    _same(_all(updates), _played(log.path, 1e9)[0])
    replay.close()


@pytest.mark.invariant
def test_a_jump_in_pieces_ends_where_a_jump_at_once_does(tmp_path: Path) -> None:
    """Stopped every so many lines on the way, a jump brings the same findings, none of its steps more than a block."""
    log = writer(tmp_path)
    for n in range(60_000):
        log.raw(block(b"%.2f,0.0100,0.0050" % (0.01 * (n % 20_000)), time=n / 200, first=n + 1))
    log.close(300.0)
    at_once, in_pieces = Replay(log.path), Replay(log.path)
    whole = at_once.seek(290.0)
    updates = [in_pieces.seek(290.0, most=5000)]
    while in_pieces.on_the_way:
        assert updates[-1].time < 290.0
        updates.append(in_pieces.advance(290.0, most=5000))
    assert 2 < len(updates) < 12
    assert max(len(one) for update in updates for one in [_all([update]).rows]) < 40_000
    _same(_all(updates), _all([whole]))
    assert updates[-1].time == whole.time == 290.0
    assert (updates[-1].standing, updates[-1].health) == (whole.standing, whole.health)
    at_once.close()
    in_pieces.close()


def test_what_if_lists_the_differences_and_leaves_the_recording_alone() -> None:
    """Another latitude gives another expected offset and is named; the file's bytes stay."""
    before = GUIDED.read_bytes()
    with read_log(GUIDED) as reader:
        text = reader.header.site
    other = site(text.replace("latitude_deg = 63.27", "latitude_deg = 0.0"))
    plain, changed = Replay(GUIDED), Replay(GUIDED, other)
    assert plain.differences == ()
    assert changed.differences == (("site.latitude_deg", 63.27, 0.0),)
    east = [one.seek(60.0).standing.expected_east for one in (plain, changed)]  # type: ignore[union-attr]
    # the lean of a moving line goes with the cosine of latitude: 1 at the equator
    assert east[0] / east[1] == pytest.approx(np.cos(np.radians(63.27)), rel=0.01)
    assert GUIDED.read_bytes() == before
    plain.close()
    changed.close()


def test_a_capture_replays_by_its_interval(tmp_path: Path) -> None:
    """A plain capture plays at the stated pace and ends at its last line."""
    path = tmp_path / "capture.txt"
    path.write_bytes(b"".join(b"%.2f,0.01,0.01\n" % (n / 4) for n in range(200)))
    replay = Replay(path, site(), interval=0.25)
    assert replay.duration == 49.75
    standing = replay.advance(20.0).standing
    assert standing is not None
    assert standing.depth == 20.0
    replay.advance(1e9)
    assert replay.ended
    assert replay.pipeline.survey.result() == reduce_file(path, site=site(), interval=0.25).result
    replay.close()


@pytest.mark.invariant
@pytest.mark.parametrize("count", [1, 2, 3])
def test_split_blocks_join_to_the_block(count: int) -> None:
    """Cut anywhere, the two parts hold the block's lines, times and numbers."""
    whole = block(b"a", b"", b"ccc", b"d", time=1.0, step=0.5, first=7)
    left, right = split(whole, count)
    assert left.data + right.data == whole.data
    assert np.array_equal(np.concatenate([left.times, right.times]), whole.times)
    assert (left.first_line, right.first_line, len(left)) == (7, 7 + count, count)


def test_the_last_time_is_read_from_the_end(tmp_path: Path) -> None:
    """The duration comes from the last part's tail, also over very long records."""
    log = writer(tmp_path, roll_bytes=50_000)
    for n in range(10):
        log.raw(block(b"x" * 4000, time=float(n)))
    log.raw(block(*[b"y" * 4000] * 40, time=11.0))
    assert last_time(log.path) == 11.0
    log.close(12.5)
    assert last_time(min(tmp_path.iterdir())) == 12.5


def test_depth_is_found_between_samples() -> None:
    """Between two samples the instant is interpolated; before the asked instant nothing is found."""
    index = Index(marks=(), times=np.array([0.0, 1.0, 2.0, 3.0]), depths=np.array([0.0, 10.0, 10.0, 0.0]))
    assert index.time_of_depth(5.0) == 0.5
    assert index.time_of_depth(5.0, after=1.0) == 2.5
    assert index.time_of_depth(10.0) == 1.0
    assert index.time_of_depth(11.0) is None
    assert Index(marks=(), times=np.empty(0), depths=np.empty(0)).time_of_depth(1.0) is None


def test_a_changed_record_is_told_once_all_of_it_was_read(tmp_path: Path) -> None:
    """Played to its end, or read through for its index: one digit in one line is another."""
    copy = tmp_path / "copy.eastfall.jsonl"
    lines = GUIDED.read_bytes().splitlines(keepends=True)
    at = len(lines) // 2
    lines[at] = lines[at].replace(b'"t":', b'"t": ', 1)
    copy.write_bytes(b"".join(lines))
    for path, words in ((GUIDED, ""), (copy, f"line {at + 1} is not as it was written")):
        played, indexed = Replay(path), Replay(path)
        assert played.advance(1.0).health.log_state == "replay"
        last = played.seek(played.duration + 1.0)
        assert played.ended
        assert played.changed == indexed.index.changed == words
        state = "changed" if words else "replay"
        assert last.health.log_state == indexed.advance(1.0).health.log_state == state
        played.close()
        indexed.close()
