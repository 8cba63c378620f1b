"""Keys: one table that bindings, key lines, help and every sentence go by; and what happens when a person moves one."""

import ast
import re
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from screen_harness import AskedLive, built, settled, shown, text_of
from textual.binding import Binding
from textual.dom import DOMNode

from eastfall.physics.findings import AlarmView
from eastfall.tui import keys, keytable
from eastfall.tui.app import Dashboard
from eastfall.tui.keys import Keymap
from eastfall.tui.preferences import Preferences, Remembered
from eastfall.tui.screens.alarmboard import AlarmsScreen
from eastfall.tui.screens.compare import CompareScreen
from eastfall.tui.screens.dialogs import AskText, Confirm
from eastfall.tui.screens.explorer import ExplorerScreen
from eastfall.tui.screens.formdialogs import RowsDialog
from eastfall.tui.screens.help import HelpScreen, KeyNames
from eastfall.tui.screens.planner import PlannerScreen
from eastfall.tui.screens.porttrial import PortTrial
from eastfall.tui.screens.settings import SettingsScreen
from eastfall.tui.screens.shelf import ShelfScreen
from eastfall.tui.screens.siteform import SiteForm
from eastfall.tui.screens.start import StartScreen
from eastfall.tui.screens.stations import StationPage, StationsScreen
from eastfall.tui.screens.steer import SteerScreen
from eastfall.tui.screens.watch import WatchScreen
from eastfall.tui.screens.whatif import WhatIfScreen
from eastfall.tui.session import Session
from eastfall.tui.store import Snapshot
from eastfall.tui.widgets.table import LongTable

pytestmark = pytest.mark.invariant

Make = Callable[..., Session]
Snap = Callable[..., Snapshot]
SOURCES = Path(__file__).parents[2] / "tui"
WHERE: dict[str, type[DOMNode]] = {
    "watch": WatchScreen,
    "all": Dashboard,
    "page": HelpScreen,
    "list": LongTable,
    "stations": StationsScreen,
    "station": StationPage,
    "alarms": AlarmsScreen,
    "shelf": ShelfScreen,
    "compare": CompareScreen,
    "settings": SettingsScreen,
    "steer": SteerScreen,
    "explorer": ExplorerScreen,
    "planner": PlannerScreen,
    "whatif": WhatIfScreen,
    "start": StartScreen,
    "form": SiteForm,
    "trial": PortTrial,
    "confirm": Confirm,
    "dialog": AskText,
    "rows": RowsDialog,
}

# One table.

_MENTION = re.compile(
    r"\b(enter|escape|esc|arrows|tab)\b|[↑↓←→]|\bF\d\b|\bctrl\+|\^S"
    r"|\b[Pp]ress(es)? \w\b|\bkey \w\b|\(\w: |^\w (plans|changes)\b"
)
_NO_KEY = {"dials.py": "↑↓"}
"""A module that uses the arrows as marks; another names the tab that parts columns."""
_TABLES = {"keys.py", "keytable.py", "letters.py"}
"""The table, what writes it, and the list of letters."""


def _words(path: Path) -> Iterator[str]:
    """Yield the texts in a module, without its docstrings."""
    tree = ast.parse(path.read_text(encoding="utf-8"))
    told = {
        id(node.body[0].value)
        for node in ast.walk(tree)
        if isinstance(node, ast.Module | ast.ClassDef | ast.FunctionDef | ast.AsyncFunctionDef)
        and isinstance(node.body[0], ast.Expr)
    }
    told |= {id(node.value) for node in ast.walk(tree) if isinstance(node, ast.Expr)}
    for node in ast.walk(tree):
        if isinstance(node, ast.Constant) and isinstance(node.value, str) and id(node) not in told:
            yield node.value


def test_no_sentence_names_a_key_by_itself() -> None:
    """No text outside the table and what writes it names a key: it would not follow one that was moved."""
    found = []
    for path in sorted(SOURCES.rglob("*.py")):
        allowed = {"screen.enter", "tab", *_NO_KEY.get(path.name, "")}
        if path.name not in _TABLES:
            found += [
                f"{path.name}: {one[:80]}"
                for one in _words(path)
                if one not in allowed and _MENTION.search(one)
            ]
    assert found == []


def test_the_search_for_named_keys_finds_them() -> None:
    """The search above is not blind: it finds keys as sentences used to name them."""
    for words in (
        "enter writes it, escape does not",
        "clear the shaft, then press g to say so",
        "   (a: seen)",
        " (key a)",
        "← → choose",
        "p plans the release",
    ):
        assert _MENTION.search(words), words


def test_every_key_has_a_name_of_its_own_and_leads_to_something_its_screen_does() -> None:
    """Names are unique, mates are there, and each action is a method of the screen that the key is for."""
    names = [one.full_id for one in keytable.TABLE]
    assert len(set(names)) == len(names)
    for one in keytable.TABLE:
        assert not one.mate or f"{one.where}.{one.mate}" in names, one
        method = f"action_{one.action.partition('(')[0]}"
        assert not one.action or hasattr(WHERE[one.where], method), one
        assert one.action or one.fixed, one


def test_bindings_of_every_screen_come_from_the_table() -> None:
    """A screen binds nothing that the table does not hold, but the keys that type numbers."""
    typing = set(keytable.TYPING)
    for place, kind in WHERE.items():
        for one in kind.__dict__["BINDINGS"]:
            assert isinstance(one, Binding), (place, one)
            assert (one.id or "") in keys._NAMED or one.key in typing, (place, one)


# Keys that a person moved.


def test_moved_key_holds_and_a_way_out_stays() -> None:
    """Quit keeps ctrl+c and close keeps escape, whatever is asked for."""
    holds, refused = keys.moved({"watch.note": "N", "all.quit": "Q", "page.close": "x9"})
    assert holds == {"watch.note": "N", "all.quit": "Q,ctrl+c"}
    assert len(refused) == 1
    assert "page.close is 'x9'; expected one key" in refused[0]


@pytest.mark.parametrize(
    ("wanted", "says"),
    [
        ({"watch.nothing": "x"}, "there is no 'watch.nothing'"),
        ({"watch.note": "a"}, "a is already watch.acknowledge"),
        ({"watch.note": "q"}, "q is already all.quit"),
        ({"watch.note": ""}, "expected one key"),
        ({"explorer.keep": "5"}, "stays as it is"),
        ({"all.theme": "r"}, "r is already watch.residual"),
    ],
)
def test_key_that_cannot_move_is_told_and_stays(wanted: dict[str, str], says: str) -> None:
    """An unknown action, a taken key and no key at all are one line each."""
    holds, refused = keys.moved(wanted)
    assert holds == {}
    assert len(refused) == 1
    assert says in refused[0]


def test_two_keys_can_change_places() -> None:
    """A swap is no clash."""
    holds, refused = keys.moved({"watch.note": "j", "watch.jump": "n"})
    assert holds == {"watch.note": "j", "watch.jump": "n"}
    assert refused == []


async def test_moved_key_acts_and_stands_in_key_line_and_help(session) -> None:
    """The new key opens the note or the view, the old one does nothing, and both lists show the new one."""
    app = Dashboard(
        WatchScreen(session()), remembered=Remembered(now=Preferences(keys={"watch.residual": "Z"}))
    )
    async with app.run_test(size=(200, 60)) as pilot:
        assert isinstance(app.first, WatchScreen)
        await pilot.press("r")
        assert not app.first.sight.residual
        await pilot.press("Z")
        assert app.first.sight.residual
        assert "Z residual" in text_of(app)
        await pilot.press("f1")
        assert isinstance(app.screen, HelpScreen)
        assert "Z         Draw the residual" in text_of(app)


def test_key_that_stays_is_not_moved() -> None:
    """What is printed on the key, as enter, stays where it is."""
    holds, refused = keys.moved({"dialog.take": "t"})
    assert holds == {}
    assert refused == ["keys: dialog.take stays where it is; it cannot be moved"]


@pytest.mark.parametrize(
    ("changes", "told"),
    [
        ({}, "↑ ↓"),
        ({"watch.up": "K"}, "K ↓"),
        ({"watch.down": "f5"}, "↑ F5"),
        ({"watch.up": "ctrl+n"}, "^N ↓"),
    ],
)
def test_both_keys_of_a_pair_are_told_whichever_was_moved(changes: dict[str, str], told: str) -> None:
    """The key line and the help page show both, and each pair once."""
    keymap = Keymap(keys.moved(changes)[0])
    assert [key for key, name in keymap.line("watch", "all") if name == "look back"] == [told]
    assert sum("Look back" in what for _, what in keymap.page("watch", "all")) == 1


def remembering(**moved: str) -> Remembered:
    """Return settings with keys moved; `__` in a name stands for the dot."""
    return Remembered(now=Preferences(keys={name.replace("__", "."): key for name, key in moved.items()}))


async def test_waiting_for_a_clear_shaft_names_the_keys_as_moved(session: Make, snapshot: Snap) -> None:
    """Arming and planning are asked for by the keys that do them."""
    app = built(session("drop"), AskedLive(), remembered=remembering(watch__arm="G", watch__planner="P"))
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot(armed=False))
        assert "then press G to say so. P plans the release" in text_of(app)


async def test_looking_back_names_the_key_that_follows_as_moved(session: Make, snapshot: Snap) -> None:
    """The line says which key leads back to the newest."""
    app = built(session(), AskedLive(), remembered=remembering(watch__follow="F"))
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot())
        await pilot.press("up")
        assert "Press F to follow the newest" in text_of(app)


@pytest.mark.parametrize(("width", "height", "says"), [(80, 24, "(Z: seen, l: all)"), (120, 40, "(key Z)")])
async def test_alarms_name_the_key_that_acknowledges_as_moved(
    session: Make, snapshot: Snap, alarm: Callable[..., AlarmView], width: int, height: int, says: str
) -> None:
    """In the line and in the list; and the key does it."""
    feed = AskedLive()
    app = built(session(), feed, remembered=remembering(watch__acknowledge="Z"))
    async with app.run_test(size=(width, height)) as pilot:
        await shown(pilot, snapshot(alarms=(alarm(),)))
        assert says in text_of(app)
        await pilot.press("a")
        assert feed.calls == []
        await pilot.press("Z")
    assert feed.calls == [("acknowledge", "warning limit", "Ada")]


async def test_steering_names_its_own_key_that_acknowledges(
    session: Make, snapshot: Snap, alarm: Callable[..., AlarmView]
) -> None:
    """Over the large figures the alarm line, the key line and the key agree; so does the help page."""
    feed = AskedLive()
    moved = remembering(steer__seen="Y", watch__steer="D")
    app = built(session(), feed, remembered=moved)
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot(alarms=(alarm(),)))
        await pilot.press("f1")
        assert "Steering (key D)" in await settled(pilot, *["pagedown"] * 2)
        await pilot.press("escape", "D", "a")
        assert feed.calls == []
        text = text_of(app)
        assert "(Y: seen)" in text
        assert "Y seen" in text
        await pilot.press("Y")
    assert feed.calls == [("acknowledge", "warning limit", "Ada")]


async def test_note_names_the_key_that_changes_the_name(session: Make, snapshot: Snap) -> None:
    """The hint under the note follows the table."""
    app = built(session(), AskedLive(), remembered=remembering(watch__who="U"))
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot())
        await pilot.press("n")
        assert "(U changes it)" in text_of(app)


async def test_start_screen_and_shelf_name_their_keys_as_moved(tmp_path: Path) -> None:
    """Editing a site file, and picking a run to compare."""
    moved = remembering(start__edit="E", shelf__pick="C")
    app = Dashboard(StartScreen(tmp_path, log_suffix=".eastfall.jsonl"), remembered=moved)
    async with app.run_test(size=(80, 30)) as pilot:
        assert "(or E on one above)" in await settled(pilot)
    samples = Path(__file__).parents[2] / "replay_logs"
    app = Dashboard(StartScreen(samples, log_suffix=".eastfall.jsonl"), remembered=moved)
    async with app.run_test(size=(80, 24)) as pilot:
        app.push_screen(ShelfScreen((samples,)))
        await settled(pilot)
        assert "C on another run compares it with carnwick-pit" in await settled(pilot, "C")


async def test_budget_page_is_closed_by_the_key_that_opened_it() -> None:
    """Also where that was moved."""
    from eastfall.io.emulator import demo_site

    screen = ExplorerScreen(demo_site("drop").assumptions)
    app = Dashboard(screen, remembered=remembering(explorer__budget="B"))
    async with app.run_test(size=(80, 24)) as pilot:
        await settled(pilot)
        assert "Where the uncertainty of the expected offset comes from" in await settled(pilot, "B")
        await pilot.press("u")
        assert app.screen is not screen
        await pilot.press("B")
        assert app.screen is screen


async def test_names_of_keys_stand_in_the_settings(session: Make) -> None:
    """The list holds every name that the settings file understands, with the key as it is now."""
    app = built(session(), AskedLive(), remembered=remembering(watch__note="N"))
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("f2", *["down"] * 5, "enter")
        assert isinstance(app.screen, KeyNames)
        assert re.search(r"watch\.acknowledge +a +Acknowledge", text_of(app))
        text = await settled(pilot, "end", "home", *["down"] * 30)
        assert re.search(r"watch\.note +N +Write a note", text)
    assert {one.full_id for one in keytable.TABLE if not one.fixed} == {
        name for name, _, _ in keys.AS_MADE.names()
    }


@pytest.mark.parametrize(("kind", "told"), [("guided", False), ("hung", True), ("drop", True)])
async def test_keys_of_a_kind_of_run_are_told_in_it_alone(session: Make, kind: str, told: bool) -> None:
    """Typing in a mark stands in the key line and on the help page of a drop and a hung run, planning in a drop's."""
    app = built(session(kind), AskedLive())
    async with app.run_test(size=(120, 40)) as pilot:
        assert ("x mark" in text_of(app)) is told
        assert ("p plan" in text_of(app)) is (kind == "drop")
        assert ("type in where a body landed" in await settled(pilot, "f1")) is told
