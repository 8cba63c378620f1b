"""The depth picture without a screen: cached parts, gaps, outliers and empty runs."""

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest

from eastfall.physics.findings import Rows
from eastfall.tui.axes import Axis
from eastfall.tui.glyphs import BRAILLE, GLYPHS
from eastfall.tui.raster import Cells, Kept, Raster
from eastfall.tui.roles import Role
from eastfall.tui.sight import Sight
from eastfall.tui.store import Snapshot
from eastfall.tui.widgets.panel import BELOW, Journey, Panel, ProfileView

pytestmark = pytest.mark.invariant
MakeRows = Callable[[int], Rows]
WIDTH, HEIGHT = 40, 24


def drawn(
    rows: Rows, *, sight: Sight | None = None, kept: Kept | None = None, glyphs: str = "braille"
) -> Cells:
    """Return the east panel of some rows."""
    sheet = Raster(WIDTH, HEIGHT, GLYPHS[glyphs])
    depth = Axis(low=0.0, high=300.0, dots=(HEIGHT - 1 - BELOW) * sheet.glyphs.down)
    view = ProfileView(
        snapshot=Snapshot(rows=rows),
        sight=sight or Sight(),
        whole=300.0,
        kept=Kept() if kept is None else kept,
    )
    Panel(view, Journey.of(rows, depth), 0, depth=depth, sheet=sheet, place=(0, WIDTH)).draw()
    return sheet.cells()


def inked(cells: Cells, role: Role) -> int:
    """Return how many cells show dots of a role."""
    return int(((cells.ink == role) & (cells.chars > 0x2800)).sum())


@pytest.mark.parametrize("residual", [False, True])
def test_picture_that_grew_is_the_picture_drawn_at_once(rows: MakeRows, residual: bool) -> None:
    """What is kept from earlier pictures never differs from drawing everything anew, on the way down and up."""
    whole, kept, sight = rows(3000), Kept(), Sight(residual=residual)
    for upto in range(1, 3000, 61):
        part = Rows(whole.data[:, :upto])
        grown, fresh = drawn(part, sight=sight, kept=kept), drawn(part, sight=sight)
        assert not grown.rows_that_differ(fresh).size


def test_noise_in_the_depth_is_drawn_like_any_other(rows: MakeRows) -> None:
    """A depth that goes to and fro between dots gives the same picture grown and at once."""
    whole, kept = rows(1500).data.copy(), Kept()
    whole[1] += np.random.default_rng(2).normal(0.0, 2.0, 1500)
    for upto in (400, 401, 700, 1000, 1500):
        part = Rows(whole[:, :upto])
        assert not drawn(part, kept=kept).rows_that_differ(drawn(part)).size


@pytest.mark.parametrize("glyphs", ["braille", "half", "ascii"])
@pytest.mark.parametrize("count", [0, 1, 2])
def test_run_that_has_hardly_begun_is_drawn(rows: MakeRows, count: int, glyphs: str) -> None:
    """No row, one row and two rows make a picture with a scale and no fault."""
    cells = drawn(rows(count) if count else Rows.none(), glyphs=glyphs)
    assert "west – east  mm".replace("–", "-" if glyphs == "ascii" else "–") in "\n".join(cells.lines())


def test_gap_in_the_readings_stays_a_gap(rows: MakeRows) -> None:
    """Depths without an offset show no measured dot."""
    whole = rows(3000).data[:, :1400].copy()
    whole[5, (whole[1] > 100.0) & (whole[1] < 200.0)] = np.nan
    cells = drawn(Rows(whole))
    band = slice(1 + 8, 1 + 13)
    assert not (cells.ink[band] == Role.MEASURED).any()
    assert inked(cells, Role.MEASURED) > 10


@pytest.mark.parametrize("value", [1e30, -1e30, np.inf, np.nan])
def test_one_wild_reading_is_survived(rows: MakeRows, value: float) -> None:
    """An offset of 1e30 m or none at all is drawn around."""
    whole = rows(500).data.copy()
    whole[5, 250] = value
    assert drawn(Rows(whole)).chars.shape == (HEIGHT, WIDTH)


def test_channel_that_never_spoke_leaves_the_limits_alone(rows: MakeRows) -> None:
    """Without any offset nothing measured is shown."""
    whole = rows(500).data.copy()
    whole[5] = np.nan
    assert inked(drawn(Rows(whole)), Role.MEASURED) == 0


def test_measured_expected_and_limits_differ_without_colour(rows: MakeRows) -> None:
    """In ASCII every line has a letter of its own."""
    text = "\n".join(drawn(rows(2000), glyphs="ascii").lines())
    assert all(letter in text for letter in "#:.'|-")


def test_residual_view_is_centred_on_zero(rows: MakeRows) -> None:
    """Drawn as residual, the limits lie evenly to both sides: 30 mm either way."""
    cells = drawn(rows(2000), sight=Sight(residual=True))
    columns = np.flatnonzero((cells.ink[12] == Role.ACTION) & (cells.chars[12] > 0x2800))
    assert columns[0] + columns[-1] == pytest.approx(WIDTH - 1, abs=1)


def test_zoomed_view_fits_its_scale_to_what_is_in_view(rows: MakeRows) -> None:
    """A spike outside of the depths in view does not flatten the picture."""
    whole = rows(2000).data.copy()
    whole[5, 50] = 5.0
    sheet = Raster(WIDTH, HEIGHT, BRAILLE)
    depth = Axis(low=100.0, high=150.0, dots=(HEIGHT - 1 - BELOW) * 4)
    view = ProfileView(snapshot=Snapshot(rows=Rows(whole)), sight=replace(Sight(), span=50.0), whole=300.0)
    panel = Panel(view, Journey.of(Rows(whole), depth), 0, depth=depth, sheet=sheet, place=(0, WIDTH))
    panel.draw()
    assert panel.axis.high < 0.1
