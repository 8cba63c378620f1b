"""What a person types: read in the reader's units, and refused with an example that lies in the shaft."""

import pytest
from screen_harness import Asked, AskedLive, AskedReplay, built, text_of

from eastfall.tui.typed import example_depth, example_depths, example_mark, read_depth, read_mark, read_moment
from eastfall.tui.units import FEET, METRIC, UNITS

pytestmark = pytest.mark.invariant


@pytest.mark.parametrize(
    ("typed", "read"),
    [
        ("612.5 m", ("depth", 612.5)),
        ("612,5", ("depth", 612.5)),
        ("12:30", ("time", 750.0)),
        ("1:02:30", ("time", 3750.0)),
        (" 90 s", ("time", 90.0)),
    ],
)
def test_moments_are_read_as_typed(typed: str, read: tuple[str, float]) -> None:
    """Metres are a depth, a colon or s a time; a comma is a decimal point."""
    assert read_moment(typed, 940.0) == read


@pytest.mark.parametrize("typed", ["", "abc", "-3", "1:-2", "nan", "inf m"])
def test_moments_that_are_none_are_refused_with_advice(typed: str) -> None:
    """What is not understood is answered with what would be, in this shaft."""
    with pytest.raises(ValueError, match=r"611\.0 m.*12:30"):
        read_moment(typed, 940.0)


@pytest.mark.parametrize("units", UNITS.values(), ids=UNITS)
@pytest.mark.parametrize("deepest", [0.4, 5.0, 38.0, 210.0, 12000.0])
def test_examples_can_be_typed_and_lie_in_the_shaft(deepest: float, units) -> None:
    """Every example is understood as it stands and no deeper than the shaft, be it a pit or the deepest of all."""
    assert 0.0 < read_depth(example_depth(deepest, units), units) < deepest
    assert all(read_depth(one, units) < deepest for one in example_depths(deepest, units).split())
    depth, east, north = read_mark(example_mark(deepest, units), deepest, units)
    assert depth == pytest.approx(deepest, abs=0.05 * units.long_size)
    assert (east, north) == pytest.approx((0.0055, -0.0032), abs=0.05e-3)


def test_landings_are_typed_in_the_readers_units() -> None:
    """Metres and millimetres, or feet and inches; commas part numbers, or stand for the decimal point."""
    assert read_mark("210 5.5 -3.2", 210.0) == pytest.approx((210.0, 0.0055, -0.0032), rel=1e-12)
    assert read_mark("210, 5.5, -3.2", 210.0) == read_mark("210 5,5 -3,2", 210.0)
    found = read_mark("100 1 -2", 210.0, FEET)
    assert found == pytest.approx((30.48, 0.0254, -0.0508), rel=1e-12)
    with pytest.raises(
        ValueError, match=r"depth in feet, east and north in inches, as 689\.0 0\.217 -0\.126"
    ):
        read_mark("100 1", 210.0, FEET)
    with pytest.raises(ValueError, match="depth in metres, east and north in millimetres"):
        read_mark("-1 0 0", 210.0, METRIC)
    for beyond in ("210 5e300 0", "210 0 -1000001", "20001 0 0", "210 nan 0"):
        with pytest.raises(ValueError, match="three numbers"):
            read_mark(beyond, 210.0)


@pytest.mark.parametrize(("mode", "feed"), [("live", AskedLive), ("replay", AskedReplay)])
async def test_jump_gives_an_example_that_can_be_jumped_to(session, mode: str, feed: type[Asked]) -> None:
    """The shaft of 300 m is not asked for a depth of 612.5 m."""
    app = built(session(mode=mode), feed())
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("j")
        await pilot.pause()
        assert "depth: 195.0 m" in text_of(app)
        await pilot.press("n", "enter")
        assert "195.0 m" in text_of(app)
        assert "612.5" not in text_of(app)
