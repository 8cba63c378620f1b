"""A terminal with plain letters only gets plain letters everywhere: screens, dialogs, help, tables."""

from collections.abc import Callable

import pytest
from screen_harness import AskedLive, built, lines, shown

from eastfall.physics.findings import AlarmView
from eastfall.tui.glyphs import GLYPHS
from eastfall.tui.session import Session
from eastfall.tui.store import Snapshot

pytestmark = pytest.mark.invariant


@pytest.mark.parametrize(
    "keys", ["", "?", "s", "s enter", "l", "l z", "n", "j", "q", "d", "f2", "c", "u", "v"]
)
async def test_no_letter_beyond_ascii(
    session: Callable[..., Session],
    snapshot: Callable[..., Snapshot],
    alarm: Callable[..., AlarmView],
    keys: str,
) -> None:
    """Whatever is opened, the characters on the screen are ASCII."""
    app = built(session(), AskedLive(), glyphs=GLYPHS["ascii"])
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot(alarms=(alarm(),)))
        names = {"?": "question_mark"}
        await pilot.press(*(names.get(one, one) for one in keys.split()))
        await pilot.pause()
        text = "\n".join(lines(app))
    assert {one for one in text if not one.isascii()} == set()
