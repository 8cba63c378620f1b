"""The live run: raw lines first, everything that changes the engine in the log, replay to the last bit, clean ends."""

from datetime import UTC, datetime
from pathlib import Path

import pytest
from live_help import GUIDED, ONE_LINK, TWO_LINKS, FedLink, HandClock, Openers, live_threads, site, until

from eastfall.io.arrivals import LineBlock, RunEvent
from eastfall.io.errors import LinkError, OutputError
from eastfall.io.logtail import last_time
from eastfall.io.pipeline import Pipeline
from eastfall.io.reduce import reduce_file
from eastfall.io.run import LINK_LOST, RECORD_FAILING, Run
from eastfall.io.runlog import RunLogWriter, read_log
from eastfall.io.sitefile import SiteFile
from eastfall.physics.findings import Findings

DROP = GUIDED.replace('"guided"', '"drop"')
DROP_LINK = '[[link]]\nurl = "test"\ncolumns = ["depth_m", "east_mm", "north_mm"]\n'
STARTED = datetime(2026, 3, 2, 6, 0, tzinfo=UTC)


def log_for(folder: Path, where: SiteFile) -> RunLogWriter:
    """Return a new log."""
    return RunLogWriter.create(folder, where, started_at=STARTED)


def recorded(path: Path) -> list[LineBlock | RunEvent]:
    """Return what a log holds, in its order."""
    with read_log(path, merge=False) as log:
        return list(log)


def replayed(path: Path, *, merge: bool) -> Pipeline:
    """Take a log through a fresh pipeline."""
    with read_log(path, merge=merge) as log:
        pipeline = Pipeline(log.site())
        for arrival in log:
            pipeline.take(arrival)
    return pipeline


def lean(begin: int, count: int, tilt: float) -> bytes:
    """Return lines of a probe that goes down with a steady tilt."""
    return b"".join(b"%.2f,%.3f,0.0\r\n" % (0.25 * i, tilt) for i in range(begin, begin + count))


def test_raw_lines_are_in_the_log_before_anything_interprets_them(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """If the interpretation of a line ends the program, the line is in the log all the same."""
    where, link = site(), FedLink(items=(b"1,0,0\n",))
    log = log_for(tmp_path, where)
    run = Run(where, log=log, opener=Openers(link))

    def fall_over(_self: Pipeline, _arrival: object) -> Findings:
        raise ZeroDivisionError

    monkeypatch.setattr(Pipeline, "take", fall_over)
    run.start()
    with pytest.raises(ZeroDivisionError):
        until(run, lambda _: False)
    monkeypatch.undo()
    run.stop()
    assert [one.data for one in recorded(log.path) if isinstance(one, LineBlock)] == [b"1,0,0\n"]


@pytest.mark.invariant
def test_a_replay_of_the_log_repeats_the_run_to_the_last_bit(tmp_path: Path) -> None:
    """Limits exceeded, silence, rubbish, a lost link and words of a person: one result, live and replayed."""
    where, clock = site(), HandClock()
    first, second = FedLink(), FedLink()
    openers = Openers(first)
    log = log_for(tmp_path, where)
    run = Run(where, log=log, clock=clock, opener=openers, wait=lambda _: False)
    rows: list[bytes] = []

    def step(lines: int, seconds: float) -> None:
        def there(update: object) -> bool:
            rows.extend(one.rows.data.tobytes() for one in update.findings)  # type: ignore[attr-defined]
            return update.health.links[0].lines >= lines and run._inbox.empty  # type: ignore[attr-defined]

        until(run, there)
        clock.time += seconds

    run.start()
    for number in range(40):
        first.put(lean(10 * number, 10, 0.09))
        step(10 * (number + 1), 0.5)
    assert any(one.name == "warning limit" for one in run.step(0.0).alarms)
    run.acknowledge("warning limit", "R. Vane")
    run.shelve("action limit", 4.0, "known bulge", "R. Vane")
    step(400, 7.5)
    assert "feed silent" in [one.name for one in run.step(0.0).alarms]
    openers.ready[0].append(second)
    first.put(b"100.1,0.0")
    first.put(LinkError("unplugged"))
    until(run, lambda update: update.health.links[0].state == "open" and openers.tries == 2)
    second.put(b"\x00\xff,#\n" + lean(400, 60, -0.3))
    step(461, 1.0)
    run.note("=HYPERLINK(0)\x1b[2J", "R. Vane")
    run.acknowledge("no such alarm")
    live = run.stop()
    again = [replayed(log.path, merge=merge) for merge in (False, True)]
    for pipeline in again:
        assert repr(pipeline.survey.result()) == repr(run.pipeline.survey.result())
        assert dict(pipeline.faults) == dict(live.health.faults)
        assert (pipeline.frames, pipeline.rejected) == (live.health.frames, live.health.rejected)
        assert pipeline.survey.alarms() == live.alarms
    assert run.pipeline.survey.result().alarms
    assert dict(live.health.faults) == {"line cut short": 1, "not plain text": 1, "event not applied": 1}


def test_what_a_person_says_is_an_event_in_the_log(tmp_path: Path) -> None:
    """Acknowledge, shelve, note and the end stand in the log with who said it, and alarm changes beside them."""
    where = site()
    log = log_for(tmp_path, where)
    with Run(where, log=log, opener=Openers(FedLink(items=(b"1,0,0\n", LinkError("gone"))))) as run:
        until(run, lambda update: bool(update.alarms))
        run.acknowledge(LINK_LOST, "R. Vane")
        run.shelve(LINK_LOST, 60.0, "cable on its way", "R. Vane")
        run.note("water at 12 m", "R. Vane")
        assert [one.state for one in run.step(0.0).alarms] == ["shelved"]
    events = [one for one in recorded(log.path) if isinstance(one, RunEvent)]
    said = {one.name: dict(one.fields) for one in events}
    assert said["acknowledge"] == {"name": LINK_LOST, "who": "R. Vane"}
    assert said["shelve"] == {
        "name": LINK_LOST,
        "seconds": 60.0,
        "reason": "cable on its way",
        "who": "R. Vane",
    }
    assert said["note"] == {"text": "water at 12 m", "who": "R. Vane"}
    assert said["link"]["state"] == "lost"
    assert [one.fields["to"] for one in events if one.name == "alarm"] == [
        "active",
        "acknowledged",
        "shelved",
    ]
    assert [one.name for one in events[-2:]] == ["end", "summary"]
    times = [one.time for one in events]
    assert times == sorted(times)


def test_an_alarm_is_in_the_log_at_the_time_of_the_host(tmp_path: Path) -> None:
    """Where the instrument's clock runs days ahead, the log's length stays that of the run, and a replay's with it."""
    links = '[[link]]\nurl = "test"\ncolumns = ["time_s", "depth_m", "tilt_a_deg", "tilt_b_deg"]\n'
    where, clock, link = site(links), HandClock(), FedLink()
    log = log_for(tmp_path, where)
    ahead = b"".join(b"%.1f,%.2f,1.5,0.0\n" % (200_000 + 0.5 * i, 0.25 * i) for i in range(400))
    with Run(where, log=log, clock=clock, opener=Openers(link)) as run:
        link.put(ahead)
        until(run, lambda update: any(one.name == "action limit" for one in update.alarms))
        clock.time += 1.0
        run.note("seen", "R. Vane")
    events = [one for one in recorded(log.path) if isinstance(one, RunEvent)]
    alarm = next(one for one in events if one.name == "alarm" and one.fields["name"] == "action limit")
    assert alarm.time <= 1.0
    assert float(str(alarm.fields["at"])) > 200_000.0
    assert last_time(log.path) == events[-1].time <= 2.0


def test_a_lost_link_is_an_alarm_until_it_is_back() -> None:
    """The loss is raised with its reason and returns when the link opens again; what comes after it is used."""
    again = FedLink(items=(b"2,0,0\n",))
    openers = Openers(FedLink(items=(b"1,0,0\n", LinkError("test: lost: unplugged"))))
    openers.ready[0].append(again)
    changes = []
    with Run(site(), log=None, opener=openers, wait=lambda _: False) as run:
        for update in until(run, lambda update: update.health.frames == 2):
            changes += [(one.name, one.new, one.message) for f in update.findings for one in f.alarms]
    assert changes[0] == (LINK_LOST, "active", "test: lost: unplugged")
    assert changes[1][:2] == (LINK_LOST, "returned")


def test_a_failing_record_is_an_alarm_and_no_crash(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """While the log refuses, the measurement goes on, the alarm stands, and later all lines are in the log in order."""
    where, clock, link = site(), HandClock(), FedLink(items=(b"1,0,0\n",))
    log = log_for(tmp_path, where)
    run = Run(where, log=log, clock=clock, opener=Openers(link))
    run.start()
    until(run, lambda update: update.health.frames == 1)

    def refuse(*_: object) -> None:
        raise OutputError("no space left on device")

    with monkeypatch.context() as full:
        full.setattr(RunLogWriter, "raw", refuse)
        full.setattr(RunLogWriter, "event", refuse)
        link.put(b"2,0,0\n3,0,0\n")
        failing = until(run, lambda update: bool(update.alarms))[-1]
        assert [(one.name, one.state) for one in failing.alarms] == [(RECORD_FAILING, "active")]
        assert failing.health.log_state == "no space left on device"
        assert failing.health.frames == 3
    clock.time += 1.5
    well = until(run, lambda update: update.health.log_state == "recording")[-1]
    assert [(one.name, one.state) for one in well.alarms] == [(RECORD_FAILING, "returned")]
    last = run.stop()
    lines = b"".join(one.data for one in recorded(log.path) if isinstance(one, LineBlock))
    assert lines == b"1,0,0\n2,0,0\n3,0,0\n"
    assert last.health.log_lost == 0
    assert repr(replayed(log.path, merge=True).survey.result()) == repr(run.pipeline.survey.result())


def test_a_drop_waits_until_it_is_armed_live_and_replayed(tmp_path: Path) -> None:
    """Lines before the word that the shaft is clear are in the log and not in the findings."""
    where, link = site(DROP_LINK, DROP), FedLink(items=(b"10,1,0\n20,1,0\n",))
    log = log_for(tmp_path, where)
    with Run(where, log=log, opener=Openers(link)) as run:
        before = until(run, lambda update: update.health.set_aside == 2)[-1]
        assert (before.armed, before.health.frames) == (False, 0)
        run.arm("R. Vane")
        link.put(b"30,1,0\n")
        after = until(run, lambda update: update.health.frames == 1)[-1]
        assert after.armed
    assert replayed(log.path, merge=True).frames == 1
    with Run(where, log=None, armed=True, opener=Openers(FedLink(items=(b"10,1,0\n",)))) as run:
        until(run, lambda update: update.health.frames == 1)


def test_health_tells_how_the_link_does() -> None:
    """State, lines, rate, silence, the latest bad line in safe text, and when a lost link is tried again."""
    clock, link = HandClock(), FedLink(items=(b"1,0,0\n2,\x1b[2J,0\n",))
    run = Run(site(), log=None, clock=clock, opener=Openers(link))
    run.start()
    health = until(run, lambda update: update.health.rejected == 1)[-1].health.links[0]
    assert (health.state, health.lines, health.queue_dropped, health.retry_in) == ("open", 2, 0, None)
    assert health.last_fault == r"line 2: not plain text: 2,\x1b[2J,0; expected printable ASCII characters"
    clock.time += 3.0
    assert run.step(0.0).health.links[0].silent_for == pytest.approx(3.0)
    link.put(LinkError("gone"))
    lost = until(run, lambda update: update.health.links[0].retry_in is not None)[-1].health.links[0]
    assert (lost.state, lost.retry_in, lost.last_fault) == ("lost", pytest.approx(0.5), "gone")
    run.stop()
    assert run.step(0.0).health.log_state == "not recording"


def test_a_link_that_cannot_be_opened_at_the_start_is_an_error_and_leaves_nothing_open() -> None:
    """The other links are closed again and no thread is left."""
    winch = FedLink()
    with pytest.raises(LinkError, match="link 1: no such device"):
        Run(site(TWO_LINKS), log=None, opener=Openers(winch)).start()
    assert winch.closed
    assert live_threads() == []


def test_two_links_make_one_reading_and_each_has_its_alarm() -> None:
    """Depth from the winch and tilt from the probe are joined; the lost one of them is named."""
    winch, probe = FedLink(), FedLink()
    clock = HandClock()
    run = Run(site(TWO_LINKS), log=None, clock=clock, opener=Openers(winch, probe))
    run.start()
    winch.put(b"10.0\n")
    until(run, lambda update: update.health.links[0].lines == 1)
    clock.time += 0.5
    probe.put(b"0.1,0.2\n")
    until(run, lambda update: update.health.links[1].lines == 1)
    clock.time += 0.5
    winch.put(b"12.0\n")
    assert until(run, lambda update: update.health.frames == 1)[-1].standing is not None
    probe.put(LinkError("gone"))
    assert until(run, lambda update: bool(update.alarms))[-1].alarms[0].name == f"{LINK_LOST} 2"
    run.stop()


def test_a_run_over_a_file_ends_by_itself_and_loses_nothing(tmp_path: Path) -> None:
    """A capture goes through whole, and the run says when it is over."""
    capture = tmp_path / "capture.txt"
    capture.write_bytes(lean(0, 5000, 0.001))
    run = Run(site(), links=[str(capture)], log=None)
    assert not run.ended
    run.start()
    update = until(run, lambda _: run.ended)[-1]
    assert (update.health.links[0].state, update.health.frames) == ("ended", 5000)
    run.stop()


def test_stopping_takes_what_has_come_and_is_done_once(tmp_path: Path) -> None:
    """Lines in the queue and the half line pending are in the log; a second stop changes nothing; no thread is left."""
    where, link = site(), FedLink()
    log = log_for(tmp_path, where)
    run = Run(where, log=log, opener=Openers(link))
    run.start()
    link.put(b"1,0,0\n2,0")
    while run._readers[0].lines == 0:
        run._inbox.wait_for_room(0.001)
    last = run.stop()
    assert run.stop().health.frames == last.health.frames == 1
    assert last.health.log_state == "closed"
    events = [one for one in recorded(log.path) if isinstance(one, RunEvent)]
    assert [one.fields.get("cut") for one in events if one.name == "link"] == [None, "2,0"]
    assert link.closed
    assert live_threads() == []


@pytest.mark.parametrize(
    ("links", "urls", "words"),
    [
        ("", None, r"no \[\[link\]\] in it; expected one, or --link URL"),
        (TWO_LINKS, ["-"], "1 link URLs given; expected 2"),
    ],
)
def test_a_run_without_its_links_is_refused(links: str, urls: list[str] | None, words: str) -> None:
    """The line says what to give."""
    with pytest.raises(LinkError, match=words):
        Run(site(links), links=urls, log=None)


def test_a_url_can_be_given_for_a_site_without_links() -> None:
    """The default line form is then that of the columns default."""
    run = Run(site(""), links=["loop://"], log=None)
    assert [one.url for one in run.site.links] == ["loop://"]
    assert site(ONE_LINK).links[0].columns == run.site.links[0].columns


HUNG = GUIDED.replace('"guided"', '"hung"')
HAND_LINK = '[[link]]\nurl = "hand:"\n'


def test_offsets_typed_without_an_instrument_are_a_run_and_silence_is_no_fault(tmp_path: Path) -> None:
    """Three levels typed half a minute apart: stations as typed, no silent feed, live and from the log alike."""
    where, clock = site(HAND_LINK, HUNG), HandClock()
    run = Run(where, log=log_for(tmp_path, where), clock=clock, wait=lambda _seconds: False)
    with run:
        for level in (10.0, 20.0, 30.0):
            run.mark(level, 1e-4 * level, -2e-4 * level, "A. Roe")
            clock.time += 30.0
            run.step(0.0)
        last = run.stop()
    found = run.pipeline.survey.result()
    assert [one.depth for one in found.stations] == [10.0, 20.0, 30.0]
    assert [one.measured_east for one in found.stations] == pytest.approx([1e-3, 2e-3, 3e-3], abs=1e-15)
    assert not any(one.name == "feed silent" for one in found.alarms)
    assert last.health.frames == 3
    again = reduce_file(Path(run.log_path))
    assert again.result.stations == found.stations
    assert again.result.alarms == found.alarms


def test_a_port_in_place_of_typing_and_typing_in_place_of_a_port_are_refused() -> None:
    """The log holds the site file alone: a replay could not know whether silence was a fault."""
    with pytest.raises(LinkError, match="expected hand: in the site file and here, or in neither"):
        Run(site(HAND_LINK, HUNG), links=["/dev/ttyUSB0"])
    with pytest.raises(LinkError, match="expected hand: in the site file and here, or in neither"):
        Run(site(ONE_LINK, HUNG), links=["hand:"])
