"""The comparison screen: keys that mean something in the window they are pressed in, and units that follow."""

from dataclasses import replace

import pytest
from screen_harness import settled

from eastfall.physics.findings import Station
from eastfall.tui import differences
from eastfall.tui.app import Dashboard
from eastfall.tui.screens.compare import CompareScreen

pytestmark = pytest.mark.invariant


def passes(station, count: int) -> tuple[Station, ...]:
    """Return some passes over three depths, each two millimetres east of the one before."""
    return tuple(
        station(
            number=3 * number + place,
            passing=number,
            direction=("down", "up")[number % 2],
            depth=10.0 * place,
            measured_east=0.002 * number,
        )
        for number in range(count)
        for place in range(3)
    )


def compared(station, count: int = 2) -> Dashboard:
    """Return the application over a comparison of passes."""
    found = differences.passes(passes(station, count))
    return Dashboard(CompareScreen(found))  # type: ignore[arg-type]  # a page of its own here


async def test_table_and_plot_change_over_where_one_has_room(station) -> None:
    """At 80 columns the key is told, and turns the plot into the table and back."""
    app = compared(station)
    async with app.run_test(size=(80, 24)) as pilot:
        plot = await settled(pilot)
        assert "v plot or table" in plot
        table = await settled(pilot, "v")
        assert "first E N" in table
        assert await settled(pilot, "v") == plot
        assert "first E N" not in plot


async def test_key_that_changes_nothing_is_not_told_and_says_why(station) -> None:
    """At 120 columns both stand side by side; pressed all the same the key says so; narrower it is told again."""
    app = compared(station)
    async with app.run_test(size=(120, 40), notifications=True) as pilot:
        both = await settled(pilot)
        assert "first E N" in both
        assert "v plot or table" not in both
        assert "Plot and table both stand here" in await settled(pilot, "v")
        await pilot.resize_terminal(80, 24)
        narrow = await settled(pilot)
        assert "v plot or table" in narrow
        assert "first E N" not in narrow


@pytest.mark.parametrize(("count", "told"), [(2, False), (3, True)])
async def test_arrows_are_told_where_there_is_another_pair(station, count: int, told: bool) -> None:
    """With one pair of passes there is no other to go to."""
    app = compared(station, count)
    async with app.run_test(size=(80, 24)) as pilot:
        text = await settled(pilot)
        assert ("other pair" in text) is told
        assert ("1 of 3" in text) is told


async def test_nothing_is_lost_by_a_window_that_is_too_small(station) -> None:
    """At 20x5 and back the picture is whole again."""
    app = compared(station)
    async with app.run_test(size=(80, 24)) as pilot:
        before = await settled(pilot)
        for size in ((20, 5), (1, 1), (200, 60), (80, 24)):
            await pilot.resize_terminal(*size)
            await pilot.pause()
        assert await settled(pilot) == before


async def test_what_is_not_known_is_not_called_unmoved(station) -> None:
    """Without an uncertainty nothing is said to stand still, in the outcome and in the table alike."""
    unknown = tuple(replace(one, u_east=float("nan")) for one in passes(station, 2))
    app = Dashboard(CompareScreen(differences.passes(unknown)))  # type: ignore[arg-type]  # as above
    async with app.run_test(size=(120, 40)) as pilot:
        text = await settled(pilot)
    assert "NOT KNOWN whether anything moved: no uncertainty at any of 3 depths" in text
    assert "NOTHING MOVED" not in text
    assert sum(line.rstrip().endswith(" ?") for line in text.splitlines()) == 3
