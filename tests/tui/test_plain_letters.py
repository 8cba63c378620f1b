"""A terminal with plain letters only gets plain letters everywhere: screens, dialogs, help, tables."""

from collections.abc import Callable

import pytest
from screen_harness import AskedLive, built, lines, shown

from eastfall.physics.findings import AlarmView
from eastfall.tui.glyphs import GLYPHS
from eastfall.tui.session import Session
from eastfall.tui.store import Snapshot

pytestmark = pytest.mark.invariant


_WAYS = ("", "question_mark", "s", "s enter", "l", "l z", "n", "j", "q", "d", "f2", "c", "u", "v", "v")


async def test_no_letter_beyond_ascii(
    session: Callable[..., Session], snapshot: Callable[..., Snapshot], alarm: Callable[..., AlarmView]
) -> None:
    """Whatever is opened, the characters on the screen are ASCII; each way leads somewhere else."""
    app = built(session(), AskedLive(), glyphs=GLYPHS["ascii"])
    seen = set()
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot(alarms=(alarm(),)))
        for way in _WAYS:
            await pilot.press(*way.split())
            await pilot.pause()
            text = "\n".join(lines(app))
            assert {one for one in text if not one.isascii()} == set(), way
            seen.add(text)
            while app.screen is not app.first:
                await pilot.press("escape")
    assert len(seen) >= len(_WAYS) - 1  # no two passes to compare: that key only says so
