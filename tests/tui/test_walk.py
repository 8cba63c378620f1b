"""A walk over every screen with the keyboard alone: each way leads back, tells how, and loses nothing unasked."""

import random
import re
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from screen_harness import Asked, AskedLive, AskedReplay, built, lines, settled, shown, text_of
from textual.widgets import Input

from eastfall.io.emulator import demo_site
from eastfall.physics.findings import AlarmView
from eastfall.tui import keytable
from eastfall.tui.app import Dashboard
from eastfall.tui.glyphs import GLYPHS
from eastfall.tui.screens.dialogs import Confirm
from eastfall.tui.screens.explorer import ExplorerScreen
from eastfall.tui.screens.planner import PlannerScreen
from eastfall.tui.screens.porttrial import PortTrial
from eastfall.tui.screens.shelf import ShelfScreen
from eastfall.tui.screens.siteform import SiteForm
from eastfall.tui.screens.start import StartScreen
from eastfall.tui.session import Session
from eastfall.tui.store import Snapshot

pytestmark = pytest.mark.invariant

Make = Callable[..., Session]
Snap = Callable[..., Snapshot]
SAMPLES = Path(__file__).parents[2] / "replay_logs"
SIZES = [(80, 24), (20, 5)]


def over_passes(snapshot: Snap, alarm: Callable[..., AlarmView], **state: Any) -> Snapshot:
    """Return a snapshot with two passes and an alarm, so that every page has something to show."""
    made = snapshot(alarms=(alarm(),), **state)
    more = tuple(
        replace(one, number=30 + i, passing=1, direction="up") for i, one in enumerate(made.stations)
    )
    return replace(made, stations=(*made.stations, *more))


_WAYS = ("question_mark", "f1", "f2", "f2 down down down down down enter", "s", "s enter", "l", "d", "c", "j")
_LIVE = (*_WAYS, "l z", "n", "u", "q", "s question_mark", "d f2", "c f1")
_DROP = ("x", "p", "p question_mark", "p R")


@pytest.mark.parametrize("size", SIZES)
@pytest.mark.parametrize(
    ("kind", "mode", "feed", "ways"),
    [
        ("guided", "live", AskedLive, _LIVE),
        ("hung", "replay", AskedReplay, _WAYS),
        ("drop", "live", AskedLive, (*_LIVE, *_DROP)),
    ],
)
async def test_escape_leads_back_to_the_run_from_everywhere(
    session: Make,
    snapshot: Snap,
    alarm: Callable[..., AlarmView],
    size: tuple[int, int],
    kind: str,
    mode: str,
    feed: type[Asked],
    ways: tuple[str, ...],
) -> None:
    """A few escapes and nothing else: no page and no question holds anybody, and nothing was asked of the run."""
    source = feed()
    app = built(session(kind, mode), source)
    async with app.run_test(size=size, notifications=True) as pilot:
        await shown(pilot, over_passes(snapshot, alarm, mode=mode))
        for way in ways:
            await pilot.press(*way.split())
            await pilot.pause()
            assert app.screen is not app.first, way
            for _ in way.split():
                if app.screen is not app.first:
                    await pilot.press("escape")
            assert app.screen is app.first, way
        assert app.return_value is None
    assert source.calls == []


def before(name: str, folder: Path) -> Dashboard:
    """Return the application over one of the screens that need no run."""
    assumptions = demo_site("drop").assumptions
    screens: dict[str, Callable[[], Any]] = {
        "start": lambda: StartScreen(folder, log_suffix=".eastfall.jsonl", ports=lambda: ["/dev/ttyS9  x"]),
        "form": lambda: SiteForm.over(SAMPLES / "guided.toml"),
        "trial": lambda: PortTrial(ports=lambda: ["/dev/ttyS9  x"]),
        "shelf": lambda: ShelfScreen((SAMPLES,)),
        "explorer": lambda: ExplorerScreen(assumptions),
        "planner": lambda: PlannerScreen(assumptions),
    }
    return Dashboard(screens[name]())


@pytest.mark.parametrize("size", SIZES)
@pytest.mark.parametrize(
    ("name", "ways"),
    [
        ("start", ("f1", "f2", "end up enter")),
        ("form", ("f1", "f4", "f9", "pagedown down down down down down down enter")),
        ("trial", ("f1", "f2")),
        ("shelf", ("f1", "r", "x")),
        ("explorer", ("f1", "u", "d", "p", "right down right R")),
        ("planner", ("f1", "down right down right R")),
    ],
)
async def test_escape_leads_back_before_a_run_too(
    size: tuple[int, int], name: str, ways: tuple[str, ...], tmp_path: Path
) -> None:
    """The same for what is done without a run."""
    app = before(name, tmp_path)
    async with app.run_test(size=size, notifications=True) as pilot:
        await settled(pilot)
        for way in ways:
            await settled(pilot, *way.split())
            assert app.screen is not app.first, way
            while app.screen is not app.first:
                deep = len(app.screen_stack)
                await settled(pilot, "escape")
                assert len(app.screen_stack) < deep, way


@pytest.mark.parametrize(
    "way", ["question_mark", "f2", "f2 down down down down down enter", "s", "l", "d", "c"]
)
async def test_every_page_tells_the_way_back_at_its_bottom(
    session: Make, snapshot: Snap, alarm: Callable[..., AlarmView], way: str
) -> None:
    """The last row names escape, in any window of 40 columns and more."""
    app = built(session(), AskedLive())
    for size in ((80, 24), (40, 12)):
        async with app.run_test(size=size) as pilot:
            await shown(pilot, over_passes(snapshot, alarm))
            await settled(pilot, *way.split())
            assert "esc back" in lines(app)[-1], size
        app = built(session(), AskedLive())


@pytest.mark.parametrize("way", ["l z", "n", "u", "j", "x"])
async def test_every_question_tells_the_keys_that_take_and_leave_it(
    session: Make, snapshot: Snap, alarm: Callable[..., AlarmView], way: str
) -> None:
    """Whatever is typed, the dialog says what enter does and that escape does not."""
    app = built(session("drop"), AskedLive())
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot(alarms=(alarm(),)))
        text = await settled(pilot, *way.split())
        assert "esc does not" in text
        assert "enter " in text


async def test_what_a_tired_person_needs_stands_in_the_key_line_at_80_columns(
    session: Make, snapshot: Snap
) -> None:
    """Help, the way out, seen, steering, stations and alarms."""
    app = built(session(), AskedLive())
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot())
        for told in ("? help", "q quit", "a seen", "d steer", "s stations", "l alarms"):
            assert told in lines(app)[-1]


async def test_escape_lets_go_of_a_held_picture_and_of_looking_back(session: Make, snapshot: Snap) -> None:
    """On the picture itself escape leads back to now; a replay stays where it is."""
    app = built(session(mode="replay"), replay := AskedReplay())
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot(mode="replay"))
        await pilot.press("up")
        assert "LOOKING BACK" in text_of(app)
        await pilot.press("escape")
        assert "LOOKING BACK" not in text_of(app)
    assert replay.calls == []
    app = built(session(), AskedLive())
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot())
        await pilot.press("space")
        assert "PICTURE HELD" in text_of(app)
        await pilot.press("escape")
        assert "PICTURE HELD" not in text_of(app)


# Nothing is lost unasked.


@pytest.mark.parametrize("name", ["explorer", "planner"])
async def test_inputs_are_taken_back_together_only_after_a_question(name: str, tmp_path: Path) -> None:
    """One changed input is taken back at once; several are asked about, and no keeps them."""
    app = before(name, tmp_path)
    async with app.run_test(size=(80, 24)) as pilot:
        await settled(pilot, "down", "down", "right")
        screen: Any = app.first
        assert len(screen.inputs.typed) == 1
        await settled(pilot, "R")
        assert not screen.inputs.typed
        await settled(pilot, "right", "down", "right", "R")
        assert isinstance(app.screen, Confirm)
        await settled(pilot, "n")
        assert len(screen.inputs.typed) == 2
        await settled(pilot, "R", "y")
        assert not screen.inputs.typed


_PRESSED = sorted(
    {key for one in keytable.TABLE for key in one.keys.split(",")} - {"y", "ctrl+c", "ctrl+s", "f3", "f10"}
)
"""All keys there are, but the one that says yes and those that would save."""


@pytest.mark.parametrize("seed", [0, *(pytest.param(one, marks=pytest.mark.soak) for one in range(1, 40))])
@pytest.mark.parametrize(
    ("kind", "glyphs"),
    [
        ("guided", "braille"),
        pytest.param("hung", "ascii", marks=pytest.mark.soak),
        pytest.param("drop", "half", marks=pytest.mark.soak),
    ],
)
async def test_hands_in_gloves_do_no_harm(
    session: Make, snapshot: Snap, alarm: Callable[..., AlarmView], seed: int, kind: str, glyphs: str
) -> None:
    """Sixty keys at random, in windows that change: nothing breaks, nothing is armed or left, and escape leads back."""
    chance = random.Random(seed)  # noqa: S311 (no secret)
    feed = AskedLive()
    app = built(session(kind), feed, glyphs=GLYPHS[glyphs])
    async with app.run_test(size=(80, 24), notifications=True) as pilot:
        await shown(pilot, over_passes(snapshot, alarm, armed=False))
        for _ in range(60):
            if chance.random() < 0.1:
                await pilot.resize_terminal(*chance.choice([(80, 24), (20, 5), (120, 40), (33, 9), (1, 1)]))
            await pilot.press(chance.choice(_PRESSED))
        await pilot.resize_terminal(80, 24)
        for _ in range(8):
            await pilot.press("escape")
        await settled(pilot)
        assert app.screen is app.first
        assert app.return_value is None
        assert re.search(r"WITHIN (60\.0 m|196\.9 ft): residual", text_of(app))
    assert {call[0] for call in feed.calls} <= {"acknowledge", "note", "shelve", "mark", "arm"}
    # Nobody is armed by a key alone: a name must have been typed.
    assert all(call[1].strip() for call in feed.calls if call[0] == "arm")


@pytest.mark.parametrize("seed", [0, *(pytest.param(one, marks=pytest.mark.soak) for one in range(1, 20))])
@pytest.mark.parametrize(
    "name",
    [
        "form",
        *(pytest.param(one, marks=pytest.mark.soak) for one in ("trial", "shelf", "explorer", "planner")),
    ],
)
async def test_hands_in_gloves_do_no_harm_before_a_run(name: str, seed: int, tmp_path: Path) -> None:
    """The same for what is done without a run: the screen stands, and what was changed in a form is asked about."""
    chance = random.Random(seed)  # noqa: S311 (no secret)
    app = before(name, tmp_path)
    pressed = [key for key in _PRESSED if key not in {"escape", "q", "enter", "o"}]
    async with app.run_test(size=(80, 24), notifications=True) as pilot:
        await settled(pilot)
        for _ in range(50):
            if chance.random() < 0.1:
                await pilot.resize_terminal(*chance.choice([(80, 24), (20, 5), (120, 40), (33, 9), (1, 1)]))
            await pilot.press(chance.choice(pressed))
            if len(app.screen_stack) > 3 or app.screen.is_modal:
                await settled(pilot, "escape")
        await pilot.resize_terminal(80, 24)
        for _ in range(8):
            if app.screen is not app.first:
                # One that comes before the page is gone would close the screen under it too.
                await settled(pilot, "escape")
        assert app.screen is app.first
        text = await settled(pilot)
        assert "esc" in text.splitlines()[-1]
        assert app.is_running


# Small windows.


@pytest.mark.parametrize(("columns", "kept"), [(80, 9), (60, 7), (40, 4), (20, 2)])
async def test_table_of_stations_keeps_depth_and_verdict_the_longest(
    session: Make, snapshot: Snap, columns: int, kept: int
) -> None:
    """The narrower, the fewer columns, and none of them cut; wide ones name their unit in the title."""
    app = built(session())
    async with app.run_test(size=(columns, 24)) as pilot:
        await shown(pilot, snapshot())
        await settled(pilot, "s")
        head, row = lines(app)[1:3]
    assert head.startswith("depth m")
    assert "verdict" in head
    assert "WITHIN" in row or "OVER" in row
    heads = ("depth m", "pass", "measured E N", "expected E N", "resid mm", "toward", "± mm", "verdict", " n")
    assert sum(name in head for name in heads) == kept
    assert "..." not in head


async def test_page_that_is_too_long_is_scrolled_by_keys(session: Make, snapshot: Snap) -> None:
    """At 40x12 the page of a station ends below the window; page down brings its last line."""
    app = built(session())
    async with app.run_test(size=(40, 12)) as pilot:
        await shown(pilot, snapshot())
        first = await settled(pilot, "s", "enter")
        assert "Station 29" in first
        last = await settled(pilot, "pagedown", "pagedown", "end")
        assert "look at it in the picture" in last
        assert "Station 29" not in last


async def test_line_that_is_typed_in_stays_in_view(session: Make, snapshot: Snap) -> None:
    """In the smallest window what is typed can be seen."""
    app = built(session("drop"), AskedLive())
    async with app.run_test(size=(20, 5)) as pilot:
        await shown(pilot, snapshot(armed=False))
        await settled(pilot, "g", *"Ada")
        field = app.screen.query_one(Input)
        assert field.value == "Ada"
        assert "Ada" in text_of(app)
