"""Alarms one by one: seen and put aside under a name, with their history; names and reasons as they are typed."""

from collections.abc import Callable
from typing import Any

import pytest
from screen_harness import AskedLive, built, lines, shown

from eastfall.physics.findings import AlarmChange, AlarmView
from eastfall.tui.people import read_shelving, user_name
from eastfall.tui.screens.alarmboard import AlarmsScreen
from eastfall.tui.session import Session
from eastfall.tui.store import Said, Snapshot

pytestmark = pytest.mark.invariant
Snap = Callable[..., Snapshot]
Make = Callable[..., Session]


async def test_alarm_under_the_cursor_is_seen_or_put_aside_with_reason_time_and_name(
    session: Make, snapshot: Snap, alarm: Callable[..., AlarmView]
) -> None:
    """The second alarm of the list is acknowledged, then shelved for ten minutes; a reason must be given."""
    feed = AskedLive()
    app = built(session(), feed)
    alarms = (alarm(name="one"), alarm(name="two", since=100.0))
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot(alarms=alarms))
        await pilot.press("l", "down", "a", "z", *"10", "enter")
        await pilot.pause()
        assert "then the reason" in "\n".join(lines(app))
        await pilot.press(*" fan", "enter", "escape")
    assert feed.calls == [("acknowledge", "two", "Ada"), ("shelve", "two", 600.0, "fan", "Ada")]


async def test_history_tells_changes_and_words_newest_first(session: Make, snapshot: Snap) -> None:
    """What an alarm did and who said what stand in one list with their times."""
    change = AlarmChange(
        time=90.0, depth=10.0, name="warning limit", old="normal", new="active", message="15.8 mm"
    )
    said = Said(time=95.0, text="acknowledge warning limit · Ada")
    app = built(session(), AskedLive())
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot(said=(said,)))
        await pilot.press("l")
        made: Any = snapshot(said=(said,))
        object.__setattr__(made, "changes", (change,))
        text = await shown(pilot, made)
    rows = [row.strip() for row in text if "warning limit" in row]
    assert rows == [
        "1:35  acknowledge warning limit · Ada",
        "1:30  NEW warning limit: 15.8 mm",
    ]


async def test_a_name_that_the_machine_does_not_know_is_asked_for_once(
    session: Make, snapshot: Snap, alarm: Callable[..., AlarmView], monkeypatch: pytest.MonkeyPatch
) -> None:
    """Without a user name the first word asks for one; the next goes under it; u changes it."""
    monkeypatch.setattr("eastfall.tui.screens.runkeys.user_name", lambda: "")
    feed = AskedLive()
    app = built(session(), feed)
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot(alarms=(alarm(name="one"),)))
        await pilot.press("a", *"Bo", "enter", "a", "u", *"Bob", "enter", "a")
    assert feed.calls == [("acknowledge", "one", who) for who in ("Bo", "Bo", "Bob")]


async def test_a_click_on_the_alarm_line_opens_the_board(
    session: Make, snapshot: Snap, alarm: Callable[..., AlarmView]
) -> None:
    """The mouse finds what the key l does."""
    app = built(session(), AskedLive())
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot(alarms=(alarm(),)))
        await pilot.click("#alarm")
        await pilot.pause()
        assert isinstance(app.screen, AlarmsScreen)


@pytest.mark.parametrize("text", ["", "10", "fan", "0 fan", "-5 fan", "9999 fan", "nan fan"])
def test_shelving_without_sensible_minutes_or_reason_is_refused(text: str) -> None:
    """One line says what is expected."""
    with pytest.raises(ValueError, match="then the reason"):
        read_shelving(text)


def test_shelving_is_read_as_seconds_and_reason() -> None:
    """A comma counts as a point, and control characters are made visible."""
    assert read_shelving("2,5 fan\x1b off") == (150.0, r"fan\x1b off")


def test_user_name_is_the_environments(monkeypatch: pytest.MonkeyPatch) -> None:
    """The name comes from the environment, made harmless; a machine without one gives none."""
    monkeypatch.setenv("LOGNAME", "A\x1bda")
    assert user_name() == r"A\x1bda"

    def nobody() -> str:
        raise KeyError

    monkeypatch.setattr("getpass.getuser", nobody)
    assert user_name() == ""
