"""The real application driven by keys, with snapshots handed in."""

from collections.abc import Callable
from dataclasses import replace
from types import SimpleNamespace

import pytest
from screen_harness import AskedLive, AskedReplay, built, lines, settled, shown, watch

from eastfall.physics.findings import AlarmView
from eastfall.tui.glyphs import GLYPHS
from eastfall.tui.screens.dialogs import AskText, ClearShaft, Confirm
from eastfall.tui.screens.help import HelpScreen
from eastfall.tui.screens.stations import StationPage, StationsScreen
from eastfall.tui.screens.watch import WatchScreen
from eastfall.tui.session import Session
from eastfall.tui.store import Snapshot

pytestmark = pytest.mark.invariant
Snap = Callable[..., Snapshot]
Make = Callable[..., Session]


@pytest.mark.parametrize(
    ("width", "height", "glyphs"),
    [
        (80, 24, "braille"),
        (80, 24, "half"),
        (80, 24, "ascii"),
        (120, 40, "braille"),
        (200, 60, "half"),
        (200, 60, "ascii"),
    ],
)
async def test_answer_steering_evidence_health_and_keys_are_on_every_size(
    session: Make, snapshot: Snap, width: int, height: int, glyphs: str
) -> None:
    """From 80x24 up, without mouse and in any glyphs, nothing that a person needs is missing."""
    app = built(session(), glyphs=GLYPHS[glyphs])
    async with app.run_test(size=(width, height)) as pilot:
        text = "\n".join(await shown(pilot, snapshot()))
    for words in (
        "WITHIN 60.0 m: residual 8.6",
        "Move 9 mm toward 265",
        "guided run from straight vertical  Brackwater North",
        "west",
        "south",
        "plan, ",
        "measured",
        "expected",
        "action",
        "no alarms",
        "recording 312 kB",
        "10.2 lines/s",
        "3 bad",
        "? help",
        "q quit",
    ):
        assert words in text, words


@pytest.mark.parametrize("theme", ["eastfall-dark", "eastfall-light", "eastfall-mono"])
async def test_every_theme_shows_the_same_words(session: Make, snapshot: Snap, theme: str) -> None:
    """No meaning rests on colour: the characters are the same in all themes."""
    app = built(session())
    async with app.run_test(size=(120, 40)) as pilot:
        plain = await shown(pilot, snapshot())
        app.theme = theme
        await pilot.pause()
        assert lines(app) == plain


async def test_no_colour_sends_no_colour(
    session: Make, snapshot: Snap, monkeypatch: pytest.MonkeyPatch
) -> None:
    """With NO_COLOR no cell carries a colour of its own."""
    monkeypatch.setenv("NO_COLOR", "1")
    app = built(session(), no_colour=True)
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot())
        styles = {
            segment.style
            for strip in app.screen._compositor.render_strips()
            for segment in strip
            if segment.style
        }
    named = {one.name for style in styles for one in (style.color, style.bgcolor) if one is not None}
    assert named <= {"default"}


async def test_alarm_stays_until_the_key_and_the_key_names_it(
    session: Make, snapshot: Snap, alarm: Callable[..., AlarmView]
) -> None:
    """An alarm that went back by itself is still shown, and a asks for exactly that one."""
    feed = AskedLive()
    app = built(session(), feed)
    returned = alarm(state="returned")
    async with app.run_test(size=(80, 24)) as pilot:
        text = "\n".join(
            await shown(pilot, snapshot(alarms=(returned, alarm(name="b", state="acknowledged"))))
        )
        assert "WENT BACK, NOT SEEN 5:12 warning limit at 212.3 m" in text
        await pilot.press("a")
    assert feed.calls == [("acknowledge", "warning limit", "Ada")]


async def test_shifted_a_acknowledges_all_that_wait(
    session: Make, snapshot: Snap, alarm: Callable[..., AlarmView]
) -> None:
    """A asks for every alarm that waits for an answer and for no other."""
    feed = AskedLive()
    app = built(session(), feed)
    alarms = (alarm(name="one"), alarm(name="two", since=400.0), alarm(name="three", state="acknowledged"))
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot(alarms=alarms))
        await pilot.press("A")
    assert feed.calls == [("acknowledge", "two", "Ada"), ("acknowledge", "one", "Ada")]


async def test_new_alarm_rings_once_unless_muted(
    session: Make, snapshot: Snap, alarm: Callable[..., AlarmView], monkeypatch: pytest.MonkeyPatch
) -> None:
    """The bell sounds when an alarm is new, not at every picture, and not after m."""
    app = built(session())
    rung: list[int] = []
    monkeypatch.setattr(app, "bell", lambda: rung.append(1))
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot(alarms=(alarm(),)))
        await shown(pilot, snapshot(alarms=(alarm(),)))
        assert len(rung) == 1
        await pilot.press("m")
        await shown(pilot, snapshot(alarms=(alarm(), alarm(name="second"))))
        assert len(rung) == 1


async def test_pause_holds_the_picture_and_nothing_else(
    session: Make, snapshot: Snap, alarm: Callable[..., AlarmView]
) -> None:
    """While the picture is held, alarms and the recording's size go on; f lets go."""
    app = built(session(), AskedLive())
    first = snapshot()
    assert first.standing is not None
    deeper = replace(first.standing, depth=123.4)
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, first)
        await pilot.press("space")
        text = "\n".join(await shown(pilot, snapshot(standing=deeper, alarms=(alarm(),), time=460.0)))
        assert "PICTURE HELD" in text
        assert "WITHIN 60.0 m" in text
        assert "LIVE 7:40" in text
        assert "NEW 5:12 warning limit" in text
        await pilot.press("f")
        await pilot.pause()
        assert "WITHIN 123.4 m" in "\n".join(lines(app))


async def test_arrows_look_back_and_f_follows_again(session: Make, snapshot: Snap) -> None:
    """Looking back shows a station's answer and says so; the newest goes on behind it."""
    app = built(session(), AskedLive())
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot())
        await pilot.press("up", "up")
        text = "\n".join(lines(app))
        assert "LOOKING BACK" in text
        assert "WITHIN 50.0 m" in text
        assert "Station 4, down, at rest" in text
        text = "\n".join(await shown(pilot, snapshot(time=900.0)))
        assert "WITHIN 50.0 m" in text
        await pilot.press("f")
        await pilot.pause()
        assert "WITHIN 60.0 m" in "\n".join(lines(app))


async def test_keys_of_the_picture_change_the_sight(session: Make, snapshot: Snap) -> None:
    """Zoom, whole, view, residual, wall and extras each do their one thing."""
    app = built(session(), AskedLive())
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot())
        await pilot.press("plus", "plus")
        assert watch(app).sight.span == 75.0
        await pilot.press("minus")
        assert watch(app).sight.span == 150.0
        await pilot.press("0", "r", "w", "b")
        sight = watch(app).sight
        assert (sight.span, sight.residual, sight.wall, sight.extras) == (None, True, True, False)
        for expected in ("depth", "plan", "time", "all"):
            await pilot.press("v")
            assert watch(app).sight.layout == expected


async def test_jump_takes_a_depth_and_refuses_a_time_while_live(session: Make, snapshot: Snap) -> None:
    """A depth goes to its station; a time is answered with what is understood and the dialog stays."""
    app = built(session(), AskedLive())
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot())
        await pilot.press("j", *"2:00", "enter")
        await pilot.pause()
        assert isinstance(app.screen, AskText)
        assert "give a depth" in "\n".join(lines(app))
        await pilot.press(*["backspace"] * 4, *"204 m".replace(" ", ""), "enter")
        await pilot.pause()
        assert "WITHIN, PAST WARNING 200.0 m" in "\n".join(lines(app))


async def test_note_goes_to_the_record_with_control_characters_made_visible(
    session: Make, snapshot: Snap
) -> None:
    """A note is written as typed; an empty one is not."""
    feed = AskedLive()
    app = built(session(), feed)
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot())
        await pilot.press("n", *"fan", "enter")
        await pilot.press("n", "enter")
        await pilot.press("n", *"no", "escape")
    assert feed.calls == [("note", "fan", "Ada")]


async def test_drop_is_armed_only_by_a_name(session: Make, snapshot: Snap) -> None:
    """The shaft is declared clear by a person with a name, or the run stays disarmed."""
    feed = AskedLive()
    app = built(session("drop"), feed)
    async with app.run_test(size=(80, 24)) as pilot:
        text = "\n".join(await shown(pilot, snapshot(armed=False)))
        assert "Not armed. Clear the shaft, then press g" in text
        await pilot.press("g", "enter")
        assert isinstance(app.screen, ClearShaft)
        assert "Nobody below a suspended or dropped load" in "\n".join(lines(app))
        await pilot.press("escape")
        assert feed.calls == []
        await pilot.press("g", *"Ada", "enter")
    assert feed.calls == [("arm", "Ada")]


async def test_where_a_body_landed_is_typed_in_and_goes_to_the_run(session: Make, snapshot: Snap) -> None:
    """Depth in metres, east and north in millimetres; what is no such thing stays in the dialog."""
    feed = AskedLive()
    app = built(session("drop"), feed)
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot(armed=True))
        assert isinstance(app.screen, WatchScreen)
        app.screen.who = "Ada"
        await pilot.press("x", *"210 5.5", "enter")
        assert "three numbers: depth in metres" in "\n".join(lines(app))
        await pilot.press("space", "minus", *"3.2", "enter")
    assert feed.calls == [("mark", 210.0, 0.0055, -0.0032, "Ada")]


async def test_where_a_bob_hangs_is_typed_in_as_well(session: Make, snapshot: Snap) -> None:
    """A hung run asks for it in its own words; a guided one has nothing to type in."""
    for kind, calls in (("hung", [("mark", 30.0, 0.0015, -0.002, "Ada")]), ("guided", [])):
        feed = AskedLive()
        app = built(session(kind), feed)
        async with app.run_test(size=(80, 24)) as pilot:
            await shown(pilot, snapshot())
            assert isinstance(app.screen, WatchScreen)
            app.screen.who = "Ada"
            await pilot.press("x")
            assert ("Where does the bob hang, from its mark?" in "\n".join(lines(app))) is (kind == "hung")
            if kind == "hung":
                await pilot.press(*"30", "space", *"1.5", "space", "minus", "2", "enter")
        assert feed.calls == calls


async def test_a_name_typed_takes_the_place_of_the_old_one(session: Make, snapshot: Snap) -> None:
    """The account's name stands there to begin with, and is not lengthened."""
    app = built(session(), AskedLive())
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot())
        assert isinstance(app.screen, WatchScreen)
        watch = app.screen
        watch.who = "root"
        await pilot.press("u", *"Ada", "enter")
        assert watch.who == "Ada"


async def test_quitting_a_recording_is_asked_about(session: Make, snapshot: Snap) -> None:
    """The quit key asks; anything but y goes on; y leaves with status 0."""
    app = built(session(), AskedLive())
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot())
        for refusal in ("n", "escape", "enter"):
            await pilot.press("q")
            assert isinstance(app.screen, Confirm)
            await pilot.press(refusal)
            assert isinstance(app.screen, WatchScreen)
        await pilot.press("ctrl+c", "y")
    assert app.return_value == 0


async def test_replay_keys_reach_the_replay(session: Make, snapshot: Snap) -> None:
    """Pause, step, speed, skip, events and jumps are handed to the record; quitting is not asked about."""
    feed = AskedReplay()
    feed.index = SimpleNamespace(  # type: ignore[assignment]
        marks=(SimpleNamespace(time=100.0, what="alarm"), SimpleNamespace(time=500.0, what="alarm")),
        time_of_depth=lambda depth, after=0.0: depth / 2.0 if depth < 301.0 and after < 1.0 else None,
    )
    made = session(mode="replay")
    app = built(made, feed)
    async with app.run_test(size=(80, 24)) as pilot:
        text = "\n".join(await shown(pilot, snapshot(mode="replay", duration=900.0, speed=4.0)))
        assert "REPLAY 6:40 of 15:00 x4" in text
        await pilot.press(
            "space", "full_stop", "left", "right", "less_than_sign", "greater_than_sign", "e", "E"
        )
        await pilot.press("j", *"2:05", "enter", "j", *"300", "enter")
        await pilot.press("j", *"400", "enter")
        await pilot.pause()
        assert "does not reach 400 m" in "\n".join(lines(app))
        await pilot.press("escape", "q")
    assert feed.calls == [
        ("play", None),
        ("step",),
        ("skip", -10.0),
        ("skip", 10.0),
        ("faster", 0.5),
        ("faster", 2.0),
        ("seek", 500.0),
        ("seek", 100.0),
        ("seek", 125.0),
        ("seek", 150.0),
    ]
    assert app.return_value == 0


async def test_help_lists_every_key_of_the_screen(session: Make) -> None:
    """Each key of the table is on the help page, and escape goes back."""
    app = built(session())
    async with app.run_test(size=(100, 120)) as pilot:
        await pilot.press("question_mark")
        await pilot.pause()
        assert isinstance(app.screen, HelpScreen)
        text = "\n".join(lines(app))
        for words in (
            "Acknowledge the alarm that is shown first",
            "Hold the picture while recording",
            "Colours: dark",
            "UNDECIDED",
        ):
            assert words in text
        await pilot.press("escape")
        assert isinstance(app.screen, WatchScreen)


async def test_stations_are_listed_filtered_opened_and_looked_at(session: Make, snapshot: Snap) -> None:
    """The table follows the newest, filters what is open, and hands a station back to the picture."""
    app = built(session(), AskedLive())
    made = snapshot()
    judged = tuple(
        replace(
            one,
            verdict="over" if one.number == 7 else "within",
            measured_east=0.04 if one.number == 7 else 0.0,
        )
        for one in made.stations
    )
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, replace(made, stations=judged))
        await pilot.press("s")
        assert isinstance(app.screen, StationsScreen)
        assert "stations: 30 of 30 (all), by time" in "\n".join(lines(app))
        await pilot.press("f")
        text = "\n".join(lines(app))
        assert "stations: 1 of 30" in text
        assert "OVER" in text
        await pilot.press("enter")
        assert isinstance(app.screen, StationPage)
        await pilot.press("enter")
        await pilot.pause()
        assert "OVER 80.0 m" in "\n".join(lines(app))


async def test_resize_storm_ends_where_it_began(session: Make, snapshot: Snap) -> None:
    """From 120x40 down to 20x5, to one cell and back, the same picture comes out."""
    app = built(session())
    async with app.run_test(size=(120, 40)) as pilot:
        before = await shown(pilot, snapshot())
        for size in [(20, 5), (1, 1), (80, 24), (300, 100), (33, 9), (60, 12), (20, 5), (120, 40)]:
            await pilot.resize_terminal(*size)
            await pilot.pause()
        assert (await settled(pilot)).split("\n") == before


async def test_smallest_window_still_shows_the_verdict_first(session: Make, snapshot: Snap) -> None:
    """At 20x5 the answer begins on the screen."""
    app = built(session())
    async with app.run_test(size=(20, 5)) as pilot:
        text = "\n".join(await shown(pilot, snapshot()))
    assert "WITHIN 60.0 m:" in text


async def test_markup_in_names_is_shown_letter_by_letter(session: Make, snapshot: Snap) -> None:
    """Brackets in a site's name or an instrument's words are not styles."""
    app = built(replace(session(), title="[red]Pit[/] [mm]"))
    async with app.run_test(size=(80, 24)) as pilot:
        assert "[red]Pit[/] [mm]" in (await shown(pilot, snapshot()))[0]


async def test_hung_run_shows_swing_and_rest_point(session: Make, snapshot: Snap) -> None:
    """A hung run opens on the plan, with what the swing says in a line of its own."""
    app = built(session("hung"))
    async with app.run_test(size=(80, 24)) as pilot:
        text = "\n".join(await shown(pilot, snapshot()))
    assert "rest point: not enough swing seen yet" in text
    assert "plan, " in text
    assert "shaft, " in text


async def test_trouble_of_the_source_is_told_in_the_picture(session: Make, snapshot: Snap) -> None:
    """A source that stopped says why."""
    app = built(session())
    async with app.run_test(size=(80, 24)) as pilot:
        text = "\n".join(await shown(pilot, snapshot(trouble="port gone")))
    assert "STOPPED: port gone" in text


LONG = (
    "could not open port /dev/serial/by-id/usb-FTDI_USB-RS422_Cable_AU05XKQ2-if00-port0: device reports readiness "
    "to read but returned no data, next try in 5 s; pull the plug and put it back"
)


def unspaced(rows: list[str]) -> str:
    """Return text without blanks: a word may be parted at the end of a row."""
    return "".join("".join(rows).split())


@pytest.mark.parametrize(("width", "height"), [(80, 24), (120, 40), (200, 60)])
@pytest.mark.parametrize("glyphs", ["braille", "ascii"])
async def test_long_alarm_is_whole_on_the_screen(
    session: Make,
    snapshot: Snap,
    alarm: Callable[..., AlarmView],
    width: int,
    height: int,
    glyphs: str,
) -> None:
    """The line takes the rows it needs; the keys that answer it stand behind it, and the pictures stay."""
    app = built(session(), AskedLive(), glyphs=GLYPHS[glyphs])
    alarms = (alarm(name="link lost", message=LONG, since=390.0), alarm())
    async with app.run_test(size=(width, height)) as pilot:
        text = await shown(pilot, snapshot(alarms=alarms))
    foot = unspaced(text[-6:])
    assert unspaced([f"NEW 6:30 link lost: {LONG}"]) in foot
    assert unspaced(["1 more (a: seen, l: all)"]) in foot
    assert any("west" in row for row in text)
    assert "WITHIN 60.0 m" in text[1]


@pytest.mark.parametrize(("width", "height"), [(80, 24), (40, 12), (20, 5)])
async def test_every_alarm_can_be_read_whole_by_keys_in_any_window(
    session: Make, snapshot: Snap, alarm: Callable[..., AlarmView], width: int, height: int
) -> None:
    """In the list nothing is cut off: one key down after the other shows every word of every alarm."""
    app = built(session(), AskedLive())
    alarms = (alarm(name="link lost", message=LONG, since=390.0), alarm(name="second", message=LONG[::-1]))
    async with app.run_test(size=(width, height)) as pilot:
        await shown(pilot, snapshot(alarms=alarms))
        await pilot.press("l")
        rows: list[str] = []
        for _ in range(60):
            await pilot.press("down")
            await pilot.pause()
            rows += [cut for row in lines(app)[2:-1] if (cut := row[: width - 1]) not in rows]
    for words in (LONG, LONG[::-1]):
        assert unspaced([words]) in unspaced(rows)


async def test_why_a_source_stopped_and_an_old_answer_are_told_whole(
    session: Make, snapshot: Snap, standing, alarm: Callable[..., AlarmView]
) -> None:
    """Both are longer than 80 columns and take a second row."""
    app = built(session())
    silent = alarm(name="feed silent", state="acknowledged", message="no reading for 5 s")
    warned = standing(measured_east=0.0201)
    async with app.run_test(size=(80, 24)) as pilot:
        text = await shown(pilot, snapshot(trouble=LONG, alarms=(silent,), standing=warned))
    told = unspaced(text)
    for words in (
        f"STOPPED: {LONG}",
        "OLD, no new reading: WITHIN, PAST WARNING 60.0 m: residual 18.8 ± 1.8 mm toward 088°, limit 30.0 mm",
    ):
        assert unspaced([words]) in told


async def test_resize_alone_shares_the_rows_out_anew(session: Make, snapshot: Snap) -> None:
    """A paused replay, to which nothing new comes, is whole again in a wider window."""
    app = built(session(mode="replay"), AskedReplay())
    async with app.run_test(size=(80, 24)) as pilot:
        before = await shown(pilot, snapshot(mode="replay", trouble=LONG))
        await pilot.resize_terminal(40, 24)
        await pilot.pause()
        narrow = " ".join(" ".join(lines(app)).split())
        assert "limit 30.0 mm" in narrow
        await pilot.resize_terminal(80, 24)
        await pilot.pause()
        assert lines(app) == before


@pytest.mark.parametrize("kind", ["guided", "hung", "drop"])
async def test_no_screen_speaks_of_passes_where_bodies_fell(session: Make, snapshot: Snap, kind: str) -> None:
    """Looking back at a station, its line in the table and its page: a drop has bodies and landings."""
    app = built(session(kind))
    async with app.run_test(size=(120, 40)) as pilot:
        text = "\n".join(await shown(pilot, snapshot(standing=None)))
        for keys in (("up",), ("s",), ("enter",)):
            await pilot.press(*keys)
            await pilot.pause()
            text += "\n".join(lines(app))
    fell = kind == "drop"
    assert ("12 bodies" in text) is fell
    assert ("12 landings" in text) is fell
    for words in ("at rest", "down, ", "up, ", " down ", "12 readings"):
        assert not (fell and words in text), words
    assert ("at rest" in text) is not fell
