"""Looking back and zooming, without a screen."""

from collections.abc import Callable
from math import nan

import pytest

from eastfall.tui import sight as look
from eastfall.tui.sight import Sight
from eastfall.tui.store import Snapshot

pytestmark = pytest.mark.invariant
Make = Callable[..., Snapshot]


def test_following_shows_the_standing_answer(snapshot: Make) -> None:
    """By default the newest answer is the subject."""
    made = snapshot()
    assert look.subject(Sight(), made) is made.standing


def test_looking_up_from_the_newest_goes_to_the_station_above(snapshot: Make) -> None:
    """At 60 m on the way up, the station at or above is first, then the one above that."""
    made = snapshot()
    once = look.stepped(Sight(), made, -1)
    twice = look.stepped(once, made, -1)
    assert [look.subject(one, made).depth for one in (once, twice)] == [60.0, 50.0]  # type: ignore[union-attr]


def test_looking_stops_at_the_first_and_last_station(snapshot: Make) -> None:
    """Paging past the end stays at the end."""
    made = snapshot()
    deepest = look.stepped(look.stepped(Sight(), made, 1), made, 1000)
    highest = look.stepped(deepest, made, -1000)
    assert look.subject(deepest, made).depth == 300.0  # type: ignore[union-attr]
    assert look.subject(highest, made).depth == 10.0  # type: ignore[union-attr]


def test_looking_back_without_stations_changes_nothing() -> None:
    """There is nothing to look at yet."""
    assert look.stepped(Sight(), Snapshot(), -1) == Sight()
    assert look.at_depth(Sight(), Snapshot(), 100.0) == Sight()


def test_depth_typed_finds_the_nearest_station(snapshot: Make) -> None:
    """104 m is answered by the station at 100 m."""
    made = snapshot()
    assert look.subject(look.at_depth(Sight(), made, 104.0), made).depth == 100.0  # type: ignore[union-attr]


def test_zoom_in_and_out_returns_to_the_whole_shaft() -> None:
    """Half and double are inverse, the whole shaft is the end."""
    closer = look.zoomed(Sight(), 300.0, 0.5)
    assert closer.span == 150.0
    assert look.zoomed(closer, 300.0, 2.0).span is None
    for _ in range(20):
        closer = look.zoomed(closer, 300.0, 0.5)
    assert closer.span == look.LEAST_SPAN


@pytest.mark.parametrize(
    ("focus", "window"),
    [(0.0, (0.0, 50.0)), (150.0, (120.0, 170.0)), (300.0, (250.0, 300.0)), (nan, (0.0, 300.0))],
)
def test_window_keeps_the_depth_inside_and_the_shaft_filled(
    focus: float, window: tuple[float, float]
) -> None:
    """The view follows the depth and never shows above the collar or below the bottom."""
    assert look.window(Sight(span=50.0), 300.0, focus) == pytest.approx(window)
