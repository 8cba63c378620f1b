"""The mouse: the wheel zooms about the pointer, a click looks at a station; everything has its key besides."""

from collections.abc import Callable

import pytest
from hypothesis import given
from hypothesis import strategies as st
from screen_harness import AskedLive, built, shown, watch
from textual.events import MouseScrollUp

from eastfall.tui.screens.stations import StationsScreen
from eastfall.tui.session import Session
from eastfall.tui.sight import Sight, window, zoomed_about
from eastfall.tui.store import Snapshot
from eastfall.tui.widgets.profile import Profile
from eastfall.tui.widgets.table import LongTable

pytestmark = pytest.mark.invariant
Snap = Callable[..., Snapshot]
Make = Callable[..., Session]


@given(part=st.floats(0.0, 1.0), factor=st.sampled_from([0.8, 0.5, 1.25]), span=st.floats(20.0, 250.0))
def test_depth_under_the_pointer_stays_where_it_is(part: float, factor: float, span: float) -> None:
    """Unless collar or bottom come into view, zooming moves everything but the depth under the pointer."""
    sight = Sight(span=span, top=25.0)
    low, high = window(sight, 300.0, 100.0)
    depth = low + part * (high - low)
    after = zoomed_about(sight, 300.0, factor, (low, high), depth)
    top, bottom = window(after, 300.0, 100.0)
    assert 0.0 <= top < bottom <= 300.0
    assert bottom - top == pytest.approx(min(span * factor, 300.0))
    if top > 0.0 and bottom < 300.0:
        assert (depth - top) / (bottom - top) == pytest.approx(part, abs=1e-9)


async def test_wheel_zooms_click_looks_and_keys_take_it_back(session: Make, snapshot: Snap) -> None:
    """A notch at the upper quarter shows four fifths of the depth; a click at a tenth is the third station."""
    app = built(session(), AskedLive())
    async with app.run_test(size=(120, 40)) as pilot:
        await shown(pilot, snapshot())
        profile = app.screen.query_one(Profile)
        rows = profile.size.height - 3
        await pilot._post_mouse_events([MouseScrollUp], "#profile", offset=(20, 1 + rows // 4))
        await pilot.pause()
        sight = watch(app).sight
        assert sight.span == pytest.approx(240.0)
        assert sight.top is not None
        assert 10.0 < sight.top < 20.0
        await pilot.press("0")
        assert watch(app).sight.span is None
        await pilot.click("#profile", offset=(20, 1 + rows // 10))
        await pilot.pause()
        assert watch(app).sight.station == 2
        await pilot.press("f")
        assert watch(app).sight.follows


async def test_a_click_moves_the_cursor_of_a_table_and_a_second_opens_its_row(
    session: Make, snapshot: Snap
) -> None:
    """Under the head comes row 0; a click there moves the cursor, the next opens the station."""
    app = built(session(), AskedLive())
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot())
        await pilot.press("s", "home")
        await pilot.click("#stations", offset=(10, 4))
        await pilot.pause()
        assert app.screen.query_one(LongTable).cursor == 3
        assert isinstance(app.screen, StationsScreen)
        await pilot.click("#stations", offset=(10, 4))
        await pilot.pause()
        assert not isinstance(app.screen, StationsScreen)
