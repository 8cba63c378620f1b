"""A run of several links: live, replayed at any pace and reduced, its findings are the same to the last bit."""

from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from record_help import STARTED

from eastfall.io.arrivals import Arrival, LineBlock, RunEvent
from eastfall.io.pipeline import Pipeline, merged
from eastfall.io.reduce import reduce_file
from eastfall.io.replay import Replay
from eastfall.io.runlog import RunLogWriter, read_log
from eastfall.io.sitefile import parse_site
from eastfall.physics.findings import Findings

SITE = """
[site]
name = "Gannet Sump"
latitude_deg = 57.3
[shaft]
depth_m = 120.0
[run]
kind = "guided"
station_every_m = 2.0
[limits]
warning_mm = 0.5
action_mm = 1.0
feed_silent_s = 1.0
bad_lines_per_minute = 2
on_delay_s = 0.3
[[link]]
url = "winch"
columns = ["depth_m"]
latency_s = 0.15
[[link]]
url = "probe"
columns = ["time_s", "tilt_a_deg", "tilt_b_deg"]
[[link]]
url = "warmth"
columns = ["temperature_c"]
"""
WINCH, PROBE, WARMTH = range(3)
RATE = 1.25
"""The probe's clock runs so much faster than the host's."""
BAD = b"12.3;#"


def _line(link: int, time: float) -> bytes:
    tilt = 0.05 + 0.04 * np.sin(3.0 * time)
    if link == PROBE:
        return b"%.3f,%.4f,%.4f" % (1000.0 + RATE * time, tilt, -tilt)
    return b"%.3f" % (0.8 * time + 0.1 if link == WINCH else 8.0)


def _lines(seed: int, bad: int, silence: float) -> list[tuple[float, int, bytes]]:
    """Return (time, link, line) of some 20 s in the order of arrival, with bad lines and a silence on each link."""
    rng = np.random.default_rng(seed)
    lines = []
    for link, every in ((WINCH, 0.31), (PROBE, 0.1), (WARMTH, 0.7)):
        times = np.round(np.arange(1, int(20 / every)) * every + 0.013 * link, 6)
        wrong = set(rng.integers(0, times.size, bad).tolist())
        begins = float(rng.uniform(0.0, 20.0))
        length = silence * float(rng.integers(0, 2))
        lines += [
            (time, link, BAD if number in wrong else _line(link, time))
            for number, time in enumerate(times.tolist())
            if not begins <= time < begins + length
        ]
    return sorted(lines)


@st.composite
def events(draw: st.DrawFn) -> list[RunEvent]:
    """Draw what people and the edge said, in order."""
    said: list[RunEvent] = []
    for time in sorted(draw(st.lists(st.floats(0.0, 21.0), max_size=4))):
        name, fields = draw(
            st.sampled_from(
                [
                    ("acknowledge", {"name": "feed silent", "who": ""}),
                    ("shelve", {"name": "bad lines", "seconds": 2.0, "reason": "wet plug", "who": ""}),
                    ("acknowledge", {"name": "warning limit", "who": ""}),
                    ("condition", {"name": "link lost 1", "on": True, "message": "gone"}),
                    ("condition", {"name": "link lost 1", "on": False, "message": ""}),
                    ("note", {"text": "water", "who": ""}),
                ]
            )
        )
        said.append(RunEvent(time=round(time, 6), name=name, fields=fields))
    return said


def _arrivals(lines: list[tuple[float, int, bytes]], said: list[RunEvent]) -> list[Arrival]:
    numbers = [0, 0, 0]
    found: list[tuple[float, Arrival]] = [(one.time, one) for one in said]
    for number, (time, link, line) in enumerate(lines):
        numbers[link] += 1
        block = LineBlock(data=line + b"\n", times=np.array([time]), first_line=numbers[link], link=link)
        found.append((time, block))
        if number % 7 == 0:  # as often as an alarm that chatters is told
            found.append((time, RunEvent(time=time, name="alarm", fields={"name": "warning limit"})))
    return [one for _, one in sorted(found, key=lambda pair: pair[0])]


def _told(pipeline: Pipeline, found: list[Findings]) -> tuple[object, ...]:
    rows = merged(found).rows.data
    return (
        repr(pipeline.survey.result()),
        rows.tobytes(),
        pipeline.frames,
        pipeline.rejected,
        sorted(pipeline.faults.items()),
        repr(pipeline.survey.alarms()),
    )


def _time(arrival: Arrival) -> float:
    return arrival.time if isinstance(arrival, RunEvent) else float(arrival.times[0])


def _recorded(folder: Path, arrivals: list[Arrival], end: float) -> Path:
    """Write arrivals to a run log."""
    log = RunLogWriter.create(folder, parse_site(SITE, "gannet.toml"), started_at=STARTED)
    for one in [*arrivals, RunEvent(time=end, name="end")]:
        log.raw(one) if isinstance(one, LineBlock) else log.event(one)
    log.close(end)
    return log.path


def _live(arrivals: list[Arrival], ticks: list[float], end: float) -> tuple[object, ...]:
    """Take arrivals one by one, and let time pass between them as a live run does."""
    pipeline = Pipeline(parse_site(SITE, "gannet.toml"))
    found, before = [], 0.0
    for one in [*arrivals, RunEvent(time=end, name="end")]:
        now = _time(one)
        found += [pipeline.tick(before + share * (now - before)) for share in ticks]
        found.append(pipeline.take(one))
        before = now
    return _told(pipeline, found)


def _replayed(path: Path, pace: float) -> tuple[object, ...]:
    replay = Replay(path)
    found: list[Findings] = []
    time = 0.0
    while not replay.ended:
        time += pace
        found += replay.advance(time).findings
    replay.close()
    return _told(replay.pipeline, found)


def _record_by_record(path: Path) -> tuple[object, ...]:
    with read_log(path, merge=False) as reader:
        pipeline = Pipeline(reader.site())
        return _told(pipeline, [pipeline.take(one) for one in reader])


@pytest.mark.invariant
@settings(max_examples=25, deadline=None)
@given(
    seed=st.integers(0, 10**6),
    bad=st.integers(0, 5),
    silence=st.sampled_from([0.0, 0.9, 1.6, 3.5, 30.0]),
    said=events(),
    ticks=st.lists(st.floats(0.0, 0.999), max_size=3).map(sorted),
    pace=st.sampled_from([0.07, 0.5, 3.3, 1e9]),
)
def test_live_replay_and_reduce_of_several_links_agree_to_the_last_bit(
    tmp_path_factory: pytest.TempPathFactory,
    seed: int,
    bad: int,
    silence: float,
    said: list[RunEvent],
    ticks: list[float],
    pace: float,
) -> None:
    """Bad lines, silences and words in any place; the probe's clock runs a quarter fast; feed silence is soon told."""
    arrivals, end = _arrivals(_lines(seed, bad, silence), said), 26.0
    path = _recorded(tmp_path_factory.mktemp("log"), arrivals, end)
    live = _live(arrivals, ticks, end)
    assert _record_by_record(path) == live
    assert _replayed(path, pace) == live
    reduced = reduce_file(path)
    assert (repr(reduced.result), reduced.frames, reduced.rejected) == (live[0], live[2], live[3])
    assert sorted(reduced.faults.items()) == live[4]


def _stands(pipeline: Pipeline) -> str:
    """Return what a screen shows at an instant, to the last bit."""
    survey = pipeline.survey
    counts = pipeline.frames, pipeline.rejected, sorted(pipeline.faults.items())
    return repr((survey.standing(), survey.alarms(), counts, sorted(pipeline.last_faults.items())))


@pytest.mark.invariant
@settings(max_examples=15, deadline=None)
@given(
    seed=st.integers(0, 10**6),
    silence=st.sampled_from([0.0, 1.6, 3.5]),
    said=events(),
    instants=st.lists(st.floats(0.5, 20.5), min_size=1, max_size=4).map(sorted),
)
def test_what_stands_at_an_instant_of_a_replay_is_what_stood_there_live(
    tmp_path_factory: pytest.TempPathFactory,
    seed: int,
    silence: float,
    said: list[RunEvent],
    instants: list[float],
) -> None:
    """Walked to or jumped to, forwards or back, an instant shows the answer, alarms and counts of the live run."""
    arrivals = _arrivals(_lines(seed, 8, silence), said)
    log = _recorded(tmp_path_factory.mktemp("log"), arrivals, 26.0)
    pipeline, live, waiting = Pipeline(parse_site(SITE, "gannet.toml")), [], list(arrivals)
    for instant in instants:
        while waiting and _time(waiting[0]) <= instant:
            pipeline.take(waiting.pop(0))
        pipeline.tick(instant)
        live.append(_stands(pipeline))
    walked, jumping = Replay(log), Replay(log)
    for instant, stood in zip(instants, live, strict=True):
        walked.advance(instant)
        assert _stands(walked.pipeline) == stood
    for instant, stood in reversed(list(zip(instants, live, strict=True))):
        jumping.seek(instant)
        assert _stands(jumping.pipeline) == stood
    walked.close()
    jumping.close()


def test_a_step_goes_to_the_next_instant_of_any_link(tmp_path: Path) -> None:
    """Stepping from the start visits the instants of all links in their order, each in blocks of its own."""
    arrivals = _arrivals(_lines(1, 0, 0.0), [RunEvent(time=5.0, name="note", fields={"text": "water"})])
    replay = Replay(_recorded(tmp_path, arrivals, 26.0))
    instants = sorted({_time(one) for one in arrivals})[:120]
    assert [replay.step().time for _ in range(120)] == instants
    replay.close()
