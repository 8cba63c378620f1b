"""What if: other settings over a recorded run, both outcomes, and the record played on with them."""

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from screen_harness import lines
from textual.pilot import Pilot

from eastfall.io.reduce import reduce_file
from eastfall.io.replay import Replay
from eastfall.io.whatif import Difference
from eastfall.tui import whatif
from eastfall.tui.app import Dashboard, watch_app
from eastfall.tui.replayfeed import ReplayFeed
from eastfall.tui.screens.watch import WatchScreen
from eastfall.tui.screens.whatif import WhatIfScreen
from eastfall.tui.session import replay_session

pytestmark = pytest.mark.invariant
SAMPLES = Path(__file__).parents[2] / "replay_logs"
LOG = SAMPLES / "sandrigg-east_20260504T073000Z.eastfall.jsonl"


async def until(pilot: Pilot[Any], met: Callable[[], bool]) -> None:
    """Wait, within reason, for a worker to come to something."""
    for _ in range(300):
        await pilot.pause(0.05)
        if met():
            return
    raise AssertionError("not within 15 s")


def app_over(log: Path) -> tuple[Dashboard, ReplayFeed]:
    """Return the application over a record that stands still at its beginning."""
    replay = Replay(log)
    app = watch_app(replay_session(replay))
    feed = ReplayFeed(replay, app.take, speed=1.0)
    app.feed = app.first.feed = feed  # type: ignore[attr-defined]
    return app, feed


def screen_of(app: Dashboard) -> WhatIfScreen:
    """Return the screen in front."""
    assert isinstance(app.screen, WhatIfScreen)
    return app.screen


async def test_changed_limits_are_listed_reduced_and_played_on() -> None:
    """An action limit of 9 mm: the difference is told, stations turn over, the picture goes on with it; then back."""
    app, feed = app_over(LOG)
    before = LOG.read_bytes()
    try:
        async with app.run_test(size=(100, 36)) as pilot:
            await until(pilot, lambda: feed.index is not None)
            feed.seek(60.0)
            await pilot.press("i", "down", "down", *"5", "down", *"9")
            screen = screen_of(app)
            await until(
                pilot,
                lambda: (f := screen.found) is not None and f.used.site.assumptions.limits.action < 0.01,
            )
            text = "\n".join(lines(app))
            assert "differs from the recorded settings in 2" in text
            assert "limits.action_mm 9 (recorded" in text
            assert screen.found is not None
            counts = [
                sum(one.verdict == "over" for one in side.result.stations)
                for side in (screen.found.recorded, screen.found.used)
            ]
            assert counts[1] > counts[0]
            await pilot.press("enter")
            await until(pilot, lambda: isinstance(app.screen, WatchScreen))
            await until(pilot, lambda: "WHAT IF: limits.warning_mm 5" in "\n".join(lines(app)))
            first = app.first
            assert isinstance(first, WatchScreen)
            await until(
                pilot, lambda: first.latest.standing is not None and first.latest.standing.action < 0.01
            )
            assert first.latest.time >= 60.0
            await pilot.press("i", "R", "enter")
            await until(pilot, lambda: isinstance(app.screen, WatchScreen))
            await until(pilot, lambda: not first.session.differences)
    finally:
        feed.close()
    assert LOG.read_bytes() == before


async def test_another_site_file_and_a_wrong_number_are_answered(tmp_path: Path) -> None:
    """A file that does not exist, then one with another latitude; a limit of nothing says what is expected."""
    other = tmp_path / "north.toml"
    text = (SAMPLES / "guided.toml").read_text()
    line = next(one for one in text.splitlines() if one.startswith("latitude_deg"))
    other.write_text(text.replace(line, "latitude_deg = 70.0"))
    app, feed = app_over(LOG)
    try:
        async with app.run_test(size=(100, 36)) as pilot:
            await until(pilot, lambda: feed.index is not None)
            await pilot.press("i", "o", *"nowhere", "enter")
            await pilot.pause()
            assert "nowhere" in "\n".join(lines(app))
            app.screen.query_one("#field").value = str(other)  # type: ignore[attr-defined]
            await pilot.press("enter")
            await pilot.pause()
            assert "site.latitude_deg 70 (recorded" in "\n".join(lines(app))
            await pilot.press("down", "down", "delete")
            await until(pilot, lambda: bool(screen_of(app).complaint))
            assert "warning limit: nothing; expected a number" in "\n".join(lines(app))
    finally:
        feed.close()


def test_same_settings_come_to_the_same_outcome() -> None:
    """Nothing is marked as changed when nothing is."""
    one = reduce_file(LOG)
    found = whatif.table(whatif.Outcomes(recorded=one, used=one))
    assert len(found) > 10
    assert not any(line.endswith("*") for line in found)
    fewer = replace(one, frames=one.frames - 1)
    marked = whatif.table(whatif.Outcomes(recorded=one, used=fewer))
    assert [line.split()[0] for line in marked if line.endswith("*")] == ["readings"]


def test_differences_are_told_with_what_was_recorded() -> None:
    """A number, a word and a setting that was not given each make a line; control characters do not get through."""
    told = whatif.told(
        (Difference("a.b", 1.5, 2.0), Difference("c", None, "x\x1b"), Difference("d", "true", None))
    )
    assert told == ("a.b 2 (recorded 1.5)", r"c x\x1b (recorded not given)", "d not given (recorded true)")
