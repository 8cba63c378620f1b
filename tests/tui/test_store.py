"""History and snapshots: nothing lost, nothing changed behind a reader's back, memory bounded."""

from collections.abc import Callable

import numpy as np
import pytest

from eastfall.physics.findings import AlarmChange, AlarmView, Findings, Rows, Station
from eastfall.tui.store import GrowingRows, History, in_order, last_pass

pytestmark = pytest.mark.invariant
MakeRows = Callable[[int], Rows]


@pytest.mark.parametrize("cut", [1, 7, 333, 5000])
def test_rows_are_the_same_however_they_were_cut(rows: MakeRows, cut: int) -> None:
    """Appending in blocks of any size gives the rows of one block."""
    whole = rows(5000)
    growing = GrowingRows()
    for start in range(0, 5000, cut):
        growing.extend(Rows(whole.data[:, start : start + cut]))
    assert np.array_equal(growing.view().data, whole.data)


def test_view_stays_as_it_was_while_rows_are_added_and_thinned(rows: MakeRows) -> None:
    """A snapshot taken earlier is not changed by growth or by thinning."""
    growing = GrowingRows(keep=800)
    growing.extend(rows(500))
    view = growing.view()
    before = view.data.copy()
    for _ in range(10):
        growing.extend(rows(300))
    assert np.array_equal(view.data, before)
    with pytest.raises(ValueError, match="read-only"):
        view.data[0, 0] = 1.0


def test_memory_is_bounded_and_the_largest_residual_survives(rows: MakeRows) -> None:
    """However long the run, no more rows than asked are kept, and the worst reading is among them."""
    growing = GrowingRows(keep=1000)
    block = rows(1000)
    spike = block.data.copy()
    spike[5, 400] = 0.9
    growing.extend(Rows(spike))
    for _ in range(60):
        growing.extend(block)
    kept = growing.view()
    assert len(kept) <= 1000
    assert kept.residual_east.max() > 0.85


def test_newest_rows_are_never_thinned(rows: MakeRows) -> None:
    """The newest half keeps every reading."""
    growing = GrowingRows(keep=1000)
    for _ in range(8):
        growing.extend(rows(300))
    assert np.array_equal(growing.view().data[:, -300:], rows(300).data)


def test_one_huge_block_is_thinned_into_bounds(rows: MakeRows) -> None:
    """A replay that jumps to its end hands over everything at once."""
    growing = GrowingRows(keep=1000)
    growing.extend(rows(50_000))
    assert len(growing) <= 1000


def test_station_that_is_worked_out_anew_replaces_the_old_one(station: Callable[..., Station]) -> None:
    """Stations are known by their number."""
    history = History("live")
    history.add([Findings(rows=Rows.none(), stations=(station(number=1), station(number=0)))])
    first = history.snapshot()
    history.add([Findings(rows=Rows.none(), stations=(station(number=1, measured_east=0.5),))])
    second = history.snapshot()
    assert [one.number for one in first.stations] == [0, 1]
    assert [one.measured_east for one in second.stations] == [0.001, 0.5]
    assert first.stations[1].measured_east == 0.001


def test_snapshots_are_numbered_and_state_is_passed_on() -> None:
    """Every snapshot is told apart from the one before, and carries what the worker says."""
    history = History("replay")
    one, two = history.snapshot(time=3.0), history.snapshot(time=4.0, playing=False)
    assert (one.mode, one.time, one.serial) == ("replay", 3.0, 1)
    assert (two.serial, two.playing) == (2, False)


def test_clearing_forgets_all(rows: MakeRows, station: Callable[..., Station]) -> None:
    """A replay that starts over starts with an empty picture."""
    history = History("replay")
    history.add([Findings(rows=rows(10), stations=(station(),))])
    history.clear()
    empty = history.snapshot()
    assert (len(empty.rows), empty.stations) == (0, ())


def test_last_pass_begins_where_the_pass_number_last_changed(rows: MakeRows) -> None:
    """The newest pass of a run down and up begins with its first row on the way up."""
    made = rows(4000)
    begin = last_pass(made)
    assert made.column("passing")[begin - 1] == 0.0
    assert (made.column("passing")[begin:] == 1.0).all()
    assert last_pass(Rows.none()) == 0
    assert last_pass(Rows(made.data[:, :50])) == 0


def test_alarm_that_waits_for_an_answer_comes_before_one_that_does_not(
    alarm: Callable[..., AlarmView],
) -> None:
    """An old unseen alarm is shown before a newer acknowledged one, and of two unseen ones the newer."""
    seen, waiting = alarm(state="acknowledged", since=90.0), alarm(state="returned", since=10.0)
    newer = alarm(state="active", since=20.0)
    assert in_order([seen, waiting, newer]) == [newer, waiting, seen]


def test_alarm_is_dated_on_the_clock_that_the_screen_shows(rows: MakeRows) -> None:
    """An instrument clock that runs four times as fast and began elsewhere does not show in the alarm list."""
    history = History("live")
    told = {"depth": 3.0, "name": "warning limit", "old": "normal", "new": "active"}
    changes = (AlarmChange(time=5010.0, host_time=2.5, **told), AlarmChange(time=5020.0, **told))
    history.add([Findings(rows=rows(100), alarms=changes)], until=10.0)
    assert [one.time for one in history.snapshot().changes] == [2.5, 10.0]
