"""The shared path: counts, events, arming, two links, and findings that do not depend on blocks or on ticks."""

from collections.abc import Iterator
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from live_help import GUIDED, TWO_LINKS, site

from eastfall.io.arrivals import Arrival, LineBlock, RunEvent
from eastfall.io.errors import LogError
from eastfall.io.pipeline import CUT_SHORT, NOT_APPLIED, UNKNOWN_LINK, Pipeline, merged
from eastfall.io.sitefile import parse_site
from eastfall.physics.findings import Findings, Result, Rows

DROP = (
    GUIDED.replace('"guided"', '"drop"')
    + '[[link]]\nurl = "-"\ncolumns = ["depth_m", "east_mm", "north_mm"]\n'
)


def lines(*texts: bytes, time: float = 0.0, first: int = 1, link: int = 0) -> LineBlock:
    """Return a block whose lines are a tenth of a second apart."""
    times = np.round(time + 0.1 * np.arange(len(texts)), 6)
    return LineBlock(data=b"".join(one + b"\n" for one in texts), times=times, first_line=first, link=link)


def event(time: float, what: str, /, **fields: object) -> RunEvent:
    """Return an event."""
    return RunEvent(time=time, name=what, fields=fields)


def journey(count: int, lean: float = 0.05) -> list[bytes]:
    """Return lines of a probe going down with a steady lean that leaves the limits in time."""
    return [b"%.2f,%.3f,%.3f" % (0.2 * i, lean, -lean) for i in range(count)]


def test_counts_follow_the_lines() -> None:
    """Good lines are frames, bad ones are rejected by kind, and the latest bad one is kept to be shown."""
    pipeline = Pipeline(site())
    pipeline.take(lines(b"1,0,0", b"2,0,\x1b[2J", b"3,0", b"4,0,0"))
    assert (pipeline.frames, pipeline.rejected) == (2, 2)
    assert dict(pipeline.faults) == {"not plain text": 1, "wrong number of fields": 1}
    assert pipeline.last_faults[0][:3] == (3, "wrong number of fields", "3,0")


def test_a_line_of_a_link_that_the_site_does_not_have_is_counted() -> None:
    """A log may name a link that its site file lacks; that is a fault and no crash."""
    pipeline = Pipeline(site())
    pipeline.take(lines(b"1,0,0", link=5))
    assert dict(pipeline.faults) == {UNKNOWN_LINK: 1}


def test_a_line_cut_short_by_a_lost_link_is_counted() -> None:
    """The half line that a lost link leaves is a fault, live and in a replay of the event."""
    pipeline = Pipeline(site())
    pipeline.take(event(1.0, "link", link=0, state="lost", cut="51"))
    pipeline.take(event(2.0, "link", link=0, state="open"))
    assert dict(pipeline.faults) == {CUT_SHORT: 1}


def test_a_drop_uses_nothing_before_it_is_armed() -> None:
    """Lines before the "armed" event are decoded, set aside and told as such; those after it count."""
    pipeline = Pipeline(parse_site(DROP, "drop.toml"))
    pipeline.take(lines(b"10,0.1,0.0"))
    pipeline.take(lines(b"no numbers", time=2.0))
    assert (pipeline.frames, pipeline.set_aside, pipeline.armed) == (0, 1, False)
    assert pipeline.rejected == sum(pipeline.faults.values()) == 1
    assert dict(pipeline.survey.unused) == {"read before the run was armed": 1}
    pipeline.take(event(3.0, "armed", who="R. Vane"))
    pipeline.take(lines(b"10,0.1,0.0", time=4.0))
    assert (pipeline.frames, pipeline.set_aside, pipeline.armed) == (1, 1, True)


def test_a_capture_of_a_drop_may_be_armed_from_the_start() -> None:
    """A capture has no events; whoever reduces it says so."""
    pipeline = Pipeline(parse_site(DROP, "drop.toml"), armed=True)
    pipeline.take(lines(b"10,0.1,0.0"))
    assert pipeline.frames == 1


def test_two_links_are_joined_on_the_way() -> None:
    """Depth of one link and tilt of the other make frames; a tilt that finds no depth is rejected at the end."""
    pipeline = Pipeline(site(TWO_LINKS))
    pipeline.take(lines(b"0.1,0.1", b"0.1,0.1", b"0.1,0.1", time=0.1, link=1))
    pipeline.take(lines(b"1", b"2", time=0.3, link=0))
    assert pipeline.frames == 1
    pipeline.take(event(1.0, "end"))
    assert (pipeline.frames, pipeline.rejected) == (1, 2)
    assert dict(pipeline.faults) == {"depth missing": 2}


def test_conditions_become_alarms_and_can_be_acknowledged() -> None:
    """What the edge notices is an alarm of the survey; what a person says changes its state."""
    pipeline = Pipeline(site())
    raised = pipeline.take(event(1.0, "condition", name="link lost", on=True, message="unplugged"))
    assert [(one.name, one.new) for one in raised.alarms] == [("link lost", "active")]
    pipeline.take(event(1.2, "acknowledge", name="link lost", who="R. Vane"))
    assert [one.state for one in pipeline.survey.alarms()] == ["acknowledged"]
    pipeline.take(event(1.5, "condition", name="link lost", on=False, message=""))
    assert pipeline.survey.alarms() == ()


def test_an_event_that_the_engine_refuses_is_counted() -> None:
    """An acknowledgement of an alarm that does not exist changes nothing, in the run and in its replay."""
    pipeline = Pipeline(site())
    pipeline.take(event(1.0, "acknowledge", name="no such alarm"))
    pipeline.take(event(1.0, "shelve", name="action limit", seconds=-1.0, reason="x"))
    assert dict(pipeline.faults) == {NOT_APPLIED: 2}


@pytest.mark.parametrize(
    ("name", "fields", "words"),
    [
        ("acknowledge", {}, 'event "acknowledge" at 1 s: name is None; expected text'),
        ("shelve", {"name": "a", "reason": "b", "seconds": "9"}, "seconds is '9'; expected a number"),
        ("condition", {"name": "a", "on": 1}, "on is 1; expected true or false"),
        ("condition", {"name": "\x1b[2J", "on": None}, "on is None"),
    ],
)
def test_an_event_of_another_shape_is_refused(name: str, fields: dict[str, object], words: str) -> None:
    """Fields that this program did not write are an error of the log, in words."""
    with pytest.raises(LogError, match=words):
        Pipeline(site()).take(RunEvent(time=1.0, name=name, fields=fields))


def test_unknown_events_and_notes_change_nothing() -> None:
    """Notes, alarms as logged and events of later versions are for readers of the log."""
    pipeline = Pipeline(site())
    for name in ("note", "alarm", "start", "something new"):
        assert pipeline.take(event(9.0, name)).alarms == ()


def test_a_mark_typed_in_is_a_reading_like_any_other_once_the_shaft_is_clear() -> None:
    """Before arming it is set aside; after it, it closes its level's station with the typed offset."""
    drop = GUIDED.replace('"guided"', '"drop"')
    pipeline = Pipeline(site("", drop))
    mark = {"depth_m": 40.0, "east_m": 0.004, "north_m": -0.001, "who": "R. Vane"}
    assert len(pipeline.take(event(1.0, "mark", **mark)).rows) == 0
    pipeline.take(event(2.0, "armed", who="R. Vane"))
    found = pipeline.take(event(3.0, "mark", **mark))
    (station,) = found.stations
    assert (station.depth, station.measured_east, station.measured_north) == (40.0, 0.004, -0.001)
    assert (pipeline.frames, pipeline.set_aside) == (1, 1)
    with pytest.raises(LogError, match="east_m is 'far'; expected a number"):
        pipeline.take(event(4.0, "mark", **{**mark, "east_m": "far"}))
    with pytest.raises(LogError, match=r"north_m is 1e\+300; expected a length in a shaft"):
        pipeline.take(event(4.0, "mark", **{**mark, "north_m": 1e300}))


RUBBISH_OFTEN = GUIDED.replace("feed_silent_s = 2.0", "feed_silent_s = 2.0\nbad_lines_per_minute = 2")


def _of_bad_lines(*blocks: LineBlock) -> list[tuple[float, str, float, str]]:
    pipeline = Pipeline(site(text=RUBBISH_OFTEN))
    pipeline.take(event(0.0, "condition", name="bad lines", on=False, message=""))
    pipeline.take(event(0.0, "shelve", name="bad lines", seconds=1.0, reason="wet plug", who=""))
    for one in blocks:
        pipeline.take(one)
    changes = pipeline.survey.result().alarms
    return [(one.time, one.new, one.depth, one.message) for one in changes if one.name == "bad lines"][1:]


@pytest.mark.invariant
def test_a_shelved_alarm_that_comes_back_is_told_alike_from_one_block_and_from_single_lines() -> None:
    """Rubbish at 0.4 s and 0.5 s under a shelf of 1 s: raised anew at 1.0 s, with the words and depth of then."""
    texts = [
        b"0.1,0,0",
        b"0.2,0,0",
        b"0.3,0,0",
        b"0.4,0,0",
        b"#",
        b"#",
        *(b"%d,0,0" % n for n in range(1, 7)),
    ]
    whole = _of_bad_lines(lines(*texts))
    single = _of_bad_lines(*(lines(one, time=0.1 * n, first=n + 1) for n, one in enumerate(texts)))
    assert single == whole
    assert [one[:3] for one in whole] == [(1.0, "normal", 5.0), (1.0, "active", 5.0)]
    assert all("2 or more unreadable lines" in one[3] for one in whole)


@pytest.mark.invariant
def test_rubbish_before_the_first_reading_is_dated_alike_from_one_block_and_from_single_lines() -> None:
    """Two bad lines before any reading have no depth and the run's own time, also with readings in the block."""
    texts = [b"#", b"#", b"1,0,0", b"2,0,0"]
    found = []
    for blocks in ([lines(*texts)], [lines(one, time=0.1 * n, first=n + 1) for n, one in enumerate(texts)]):
        pipeline = Pipeline(site(text=RUBBISH_OFTEN))
        for one in blocks:
            pipeline.take(one)
        found.append(pipeline.survey.result().alarms)
    assert repr(found[0]) == repr(found[1])
    assert (found[0][0].time, str(found[0][0].depth)) == (0.1, "nan")


def test_a_reading_that_waits_for_its_depth_is_no_silence() -> None:
    """Winch every 1.9 s and silence after 1 s: the probe speaks all the time, and no alarm is told or stays."""
    pipeline = Pipeline(site(TWO_LINKS, GUIDED.replace("feed_silent_s = 2.0", "feed_silent_s = 1.0")))
    for number in range(100):
        now = round(0.1 * number, 6)
        if number % 19 == 0:
            pipeline.take(lines(b"%.2f" % (0.2 * now), time=now, first=number + 1))
        pipeline.take(lines(b"0.01,0.01", time=now, first=number + 1, link=1))
        assert pipeline.tick(now + 0.05).alarms == ()
    assert pipeline.survey.alarms() == ()
    assert pipeline.frames > 80


@pytest.mark.invariant
@settings(max_examples=25, deadline=None)
@given(
    places=st.lists(st.integers(0, 120), max_size=10),
    ticks=st.lists(st.floats(0.0, 1.0), max_size=5),
    noise=st.lists(st.integers(0, 119), max_size=10),
    first=st.sampled_from(["acknowledge", "shelve"]),
)
def test_findings_do_not_depend_on_blocks_or_on_ticks(
    places: list[int], ticks: list[float], noise: list[int], first: str
) -> None:
    """Cut anywhere, with time let pass in between or not, a run with silences and events has one result."""
    texts = journey(120)
    for one in noise:
        texts[one] = b"12.3,#"
    times = np.round(0.1 * np.arange(120) + 4.0 * (np.arange(120) > 60), 6)
    events = [
        event(5.0, "condition", name="link lost", on=True, message="gone"),
        event(5.5, first, name="link lost", who="", seconds=1.0, reason="crew change"),
        event(13.0, "condition", name="link lost", on=False, message=""),
    ]
    results = []
    for edges, with_ticks in ((_edges(places), True), ([0, 120], False)):
        pipeline = Pipeline(site())
        found: list[Findings] = []
        for arrival in _in_order(texts, times, edges, events):
            found.append(pipeline.take(arrival))
            if with_ticks and isinstance(arrival, LineBlock):
                last = float(arrival.times[-1])
                following = times[times > last]
                until = float(following[0]) if following.size else last
                found += [pipeline.tick(last + share * (until - last)) for share in sorted(ticks)]
        pipeline.take(event(17.0, "end"))
        results.append((pipeline.survey.result(), merged(found).rows.data.tobytes(), pipeline.rejected))
    assert _words(results[0][0]) == _words(results[1][0])
    assert results[0][1:] == results[1][1:]


def _words(result: Result) -> str:
    """Return a result in a form in which NaN equals NaN and every bit of a number shows."""
    return repr(result)


def _edges(places: list[int]) -> list[int]:
    return sorted({0, 120, *places})


def _in_order(
    texts: list[bytes], times: np.ndarray, edges: list[int], events: list[RunEvent]
) -> Iterator[Arrival]:
    """Yield blocks cut at the edges and at every event, with the events between them."""
    at_events = [int(np.searchsorted(times, one.time)) for one in events]
    waiting = list(zip(at_events, events, strict=True))
    for a, b in pairwise(sorted({*edges, *at_events})):
        while waiting and waiting[0][0] <= a:
            yield waiting.pop(0)[1]
        data = b"".join(one + b"\n" for one in texts[a:b])
        yield LineBlock(data=data, times=times[a:b], first_line=a + 1)
    yield from (one for _, one in waiting)


def test_findings_put_together_keep_their_order() -> None:
    """Merging nothing gives nothing; merging one gives that one."""
    nothing = Findings(rows=Rows.none())
    assert len(merged([nothing, nothing]).rows) == 0
    one = Pipeline(site()).take(event(1.0, "condition", name="x", on=True, message=""))
    assert merged([nothing, one]) is one
    assert merged([one, one]).alarms == one.alarms * 2
