"""Dots and cells: clipping, dashes, decimation and packing."""

import numpy as np
import pytest

from eastfall.tui.glyphs import ASCII, BRAILLE, HALF
from eastfall.tui.raster import FILLER, Cells, Raster, columns
from eastfall.tui.roles import Role
from eastfall.tui.strokes import Runs, polyline, rhythm, ring, segments, trace

pytestmark = pytest.mark.invariant


def dots(*points: tuple[int, int], shape: tuple[int, int] = (8, 8)) -> np.ndarray:
    """Return a plane with dots at (column, row)."""
    plane = np.zeros(shape, dtype=bool)
    for column, row in points:
        plane[row, column] = True
    return plane


@pytest.mark.independent
@pytest.mark.parametrize(
    ("column", "row", "bit"),
    [(0, 0, 0), (0, 1, 1), (0, 2, 2), (1, 0, 3), (1, 1, 4), (1, 2, 5), (0, 3, 6), (1, 3, 7)],
)
def test_braille_dot_numbers_match_the_unicode_pattern_names(column: int, row: int, bit: int) -> None:
    """Dot n of a braille pattern is bit n - 1 of its code point past U+2800 (Unicode chart U2800)."""
    sheet = Raster(1, 1, BRAILLE)
    sheet.stamp(dots((column, row), shape=(4, 2)), Role.MEASURED)
    assert sheet.cells().chars[0, 0] == 0x2800 + (1 << bit)


def test_half_blocks_show_upper_lower_and_both() -> None:
    """Half-block cells hold two dots, one over the other."""
    sheet = Raster(4, 1, HALF)
    sheet.stamp(dots((1, 0), (2, 1), (3, 0), (3, 1), shape=(2, 4)), Role.MEASURED)
    assert sheet.cells().lines() == [" ▀▄█"]


def test_ascii_shows_a_letter_of_its_own_for_every_line() -> None:
    """Without dots, measured, expected and limits differ by their letters."""
    sheet = Raster(3, 1, ASCII)
    for column, role in enumerate((Role.MEASURED, Role.EXPECTED, Role.ACTION)):
        sheet.stamp(dots((column, 0), shape=(1, 3)), role)
    assert sheet.cells().lines() == ["#:|"]


def test_dots_of_two_layers_in_one_cell_are_both_kept() -> None:
    """A later layer takes the cell's style and leaves the earlier layer's dots."""
    sheet = Raster(1, 1, BRAILLE)
    sheet.stamp(dots((0, 0), shape=(4, 2)), Role.EXPECTED)
    sheet.stamp(dots((1, 3), shape=(4, 2)), Role.MEASURED)
    cells = sheet.cells()
    assert cells.chars[0, 0] == 0x2800 + 0b1000_0001
    assert cells.ink[0, 0] == Role.MEASURED


def test_line_from_corner_to_corner_fills_the_diagonal() -> None:
    """A straight line sets one dot a column where the slope is one."""
    plane = dots()
    segments(plane, 0.5, 0.5, 7.5, 7.5)
    assert np.array_equal(plane, np.eye(8, dtype=bool))


@pytest.mark.parametrize("far", [1e3, 1e12, 1e300])
def test_line_through_the_sheet_is_the_same_however_far_its_ends_lie(far: float) -> None:
    """Clipping a level line leaves the whole row, be its ends near or at 1e300."""
    plane = dots()
    segments(plane, -far, 3.5, far, 3.5)
    assert plane[3].all()
    assert plane.sum() == 8


@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf])
def test_line_with_an_end_that_is_no_number_is_left_out(bad: float) -> None:
    """NaN and infinite ends draw nothing and raise nothing."""
    plane = dots()
    segments(plane, [0.0, bad], [0.0, 1.0], [bad, 5.0], [0.0, 5.0])
    assert not plane.any()


def test_gap_in_the_data_is_not_bridged() -> None:
    """A NaN between two stretches leaves the columns between them empty."""
    plane = dots(shape=(4, 12))
    polyline(plane, [0.5, 3.5, np.nan, 8.5, 11.5], [1.5] * 5)
    assert plane[1].tolist() == [True] * 4 + [False] * 4 + [True] * 4


def test_lone_point_between_gaps_is_a_dot() -> None:
    """One finite point among NaN is seen."""
    plane = dots()
    polyline(plane, [np.nan, 4.5, np.nan], [np.nan, 2.5, np.nan])
    assert np.argwhere(plane).tolist() == [[2, 4]]


def test_no_spike_is_lost_when_twenty_thousand_points_share_eighty_rows() -> None:
    """A single sample far out is drawn though its row holds hundreds of others."""
    along = np.linspace(0.0, 79.99, 20_000)
    across = np.full(20_000, 10.5)
    across[12_345] = 55.5
    plane = dots(shape=(80, 60))
    trace(plane, Runs.of(along), along, across, upright=True)
    assert plane[int(along[12_345]), 10:56].all()
    assert plane[:, 10].all()


def test_thinned_curve_is_the_dots_of_the_whole_curve() -> None:
    """Drawing first, last, least and greatest of each row sets what drawing every point sets, to the dot beside it."""
    rng = np.random.default_rng(5)
    along = np.linspace(0.0, 39.99, 4000)
    across = 20.0 + 8.0 * np.sin(along / 6.0) + rng.normal(0.0, 0.7, 4000)
    thin, whole = dots(shape=(40, 40)), dots(shape=(40, 40))
    trace(thin, Runs.of(along), along, across, upright=True)
    polyline(whole, across, along)
    near = np.pad(thin, 1)
    grown = sum(near[i : i + 40, j : j + 40].astype(int) for i in range(3) for j in range(3)) > 0
    assert (whole & ~grown).sum() == 0
    assert abs(int(whole.sum()) - int(thin.sum())) < 0.1 * whole.sum()


def test_sideways_curve_is_the_upright_one_turned() -> None:
    """The time strip's curve is the profile's with its axes exchanged."""
    along, across = np.linspace(0.0, 15.9, 300), np.linspace(1.0, 14.0, 300) ** 1.01
    upright, level = dots(shape=(16, 16)), dots(shape=(16, 16))
    trace(upright, Runs.of(along), along, across, upright=True)
    trace(level, Runs.of(along), along, across, upright=False)
    assert np.array_equal(upright, level.T)


@pytest.mark.parametrize("count", [0, 1])
def test_empty_and_single_curves_draw_without_a_fault(count: int) -> None:
    """No point draws nothing, one point one dot."""
    plane = dots()
    points = np.full(count, 2.5)
    trace(plane, Runs.of(points), points, points, upright=True)
    assert plane.sum() == count


def test_all_nan_curve_draws_nothing() -> None:
    """A channel that never spoke leaves the sheet empty."""
    plane = dots()
    points = np.full(50, np.nan)
    trace(plane, Runs.of(points), points, points, upright=True)
    assert not plane.any()


def test_dashes_stay_on_the_sheet_when_the_curve_moves() -> None:
    """The rhythm belongs to the rows, so that a curve shifted sideways keeps its dashes."""
    left, right = dots(), dots()
    left[:, 1], right[:, 5] = True, True
    assert rhythm(left, 2, 2, upright=True)[:, 1].tolist() == [True, True, False, False] * 2
    assert np.array_equal(rhythm(left, 2, 2, upright=True)[:, 1], rhythm(right, 2, 2, upright=True)[:, 5])


def test_ring_dots_lie_on_the_circle_within_a_dot() -> None:
    """Every dot of a ring is within one dot of its radius, and every direction is there."""
    plane = dots(shape=(60, 60))
    ring(plane, (30.0, 30.0), (20.0, 20.0))
    rows, cols = np.nonzero(plane)
    radius = np.hypot(cols + 0.5 - 30.0, rows + 0.5 - 30.0)
    assert np.abs(radius - 20.0).max() < 1.0
    turn = np.sort(np.arctan2(rows + 0.5 - 30.0, cols + 0.5 - 30.0))
    assert np.diff(turn).max() < 0.15


def test_rows_that_differ_names_exactly_the_changed_rows() -> None:
    """Only changed rows are painted again."""
    before, after = Cells.blank(5, 4), Cells.blank(5, 4)
    after.chars[1, 2] = ord("x")
    after.ink[3, 0] = 2
    assert after.rows_that_differ(before).tolist() == [1, 3]


def test_text_outside_the_sheet_is_cut_off_and_never_wraps() -> None:
    """What starts left of the sheet or runs past its right end shows its middle."""
    sheet = Raster(4, 2, BRAILLE)
    sheet.text(-2, 0, "abcdefgh", Role.TEXT)
    sheet.text(0, 7, "below", Role.TEXT)
    assert sheet.cells().lines() == ["cdef", "    "]


def test_control_characters_never_become_cells() -> None:
    """An escape that slipped through is a middle dot, not a cursor movement."""
    sheet = Raster(6, 1, BRAILLE)
    sheet.text(0, 0, "a\x1b[2J", Role.TEXT)
    assert sheet.cells().lines() == ["a·[2J "]


def test_wide_letter_takes_two_columns() -> None:
    """A letter that terminals draw two columns wide keeps what follows in its place."""
    assert columns("鷹1").tolist() == [ord("鷹"), FILLER, ord("1")]
