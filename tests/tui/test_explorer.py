"""The prediction explorer: inputs, what follows from them, and the screen driven by keys."""

import json
import threading
import tomllib
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner
from screen_harness import settled, text_of

from eastfall.io.errors import InputError
from eastfall.io.sitefile import parse_site
from eastfall.physics.expected import expected_curve
from eastfall.physics.settings import Air, Assumptions, Body, Run, Shaft, Site
from eastfall.tui import outlook
from eastfall.tui.app import Dashboard
from eastfall.tui.dials import CONDITIONS, FLOW_SPEED, FLOW_TOWARD, LINE_SPEED, Dial
from eastfall.tui.inputs import Inputs
from eastfall.tui.main import cli
from eastfall.tui.newest import Newest
from eastfall.tui.outlook import Prospect
from eastfall.tui.preferences import Remembered
from eastfall.tui.screens.explorer import BudgetPage, ExplorerScreen
from eastfall.tui.screens.help import HelpScreen
from eastfall.tui.screens.planner import PlannerScreen
from eastfall.tui.screens.start import StartScreen
from eastfall.tui.units import FEET
from eastfall.tui.widgets.curves import Curves

pytestmark = pytest.mark.invariant

SITE = """
[site]
latitude_deg = 51.35
[shaft]
depth_m = 210.0
diameter_m = 5.2
[run]
kind = "drop"
[body]
mass_kg = 0.514
diameter_mm = 50.0
[air]
density_kgm3 = 1.15
"""
BASE = parse_site(SITE, "site").assumptions


def dial(path: str) -> Dial:
    """Return an input of the explorer."""
    return next(one for one in CONDITIONS if one.path == path)


def put(inputs: Inputs, **texts: str) -> Inputs:
    """Return inputs with texts in them, by the last part of the path."""
    for name, text in texts.items():
        inputs = inputs.put(next(one for one in CONDITIONS if one.path.endswith(name)), text)
    return inputs


# Inputs.


def test_untouched_inputs_are_the_site_to_the_last_bit() -> None:
    """Nothing typed changes nothing; every input shows what the site file says."""
    inputs = Inputs(base=BASE)
    assert inputs.assumptions() == BASE
    assert inputs.text(dial("site.latitude_deg")) == "51.35"
    assert inputs.text(dial("body.diameter_mm")) == "50"
    assert inputs.text(dial("run.kind")) == "drop"


@pytest.mark.parametrize("one", CONDITIONS, ids=lambda one: one.path.strip())
def test_every_input_changes_the_assumptions_as_the_site_file_would(one: Dial) -> None:
    """Turning an input by a step changes the assumptions, and restoring it brings the site back."""
    inputs = Inputs(base=replace(BASE, air=replace(BASE.air, cross_flow=((0.0, 210.0, 0.5, 1.0),))))
    turned = inputs.stepped(one, 1)
    assert turned.text(one) != inputs.text(one)
    assert turned.assumptions() != inputs.base
    assert turned.restored(one).assumptions() == inputs.base


@pytest.mark.parametrize(
    ("texts", "says"),
    [
        ({"latitude_deg": "91"}, "latitude: 91; expected a number from -90 to 90 deg"),
        ({"latitude_deg": ""}, "latitude: nothing; expected a number from -90 to 90 deg"),
        ({"depth_m": "0"}, "depth: 0; expected a number from 0.1 to 12000 m"),
        ({"depth_m": "-"}, "depth: -; expected a number"),
        ({"depth_m": "1.2.3"}, "depth: 1.2.3; expected a number"),
        ({"drag_coefficient": "9"}, "body drag: 9; expected a number from 0 to 5"),
        ({"mass_kg": ""}, "both its mass and its diameter, or neither"),
    ],
)
def test_input_out_of_range_is_one_line_that_says_what_is_accepted(texts: dict[str, str], says: str) -> None:
    """The line names the input, what stands there, and the range with its unit."""
    with pytest.raises(ValueError, match=says.replace(".", r"\.")):
        put(Inputs(base=BASE), **texts).assumptions()


def test_body_without_mass_and_diameter_is_a_point_in_vacuum() -> None:
    """Both emptied is the site without a body; drag emptied is a sphere."""
    assert put(Inputs(base=BASE), mass_kg="", **{"body.diameter_mm": ""}).assumptions().body is None
    held = put(Inputs(base=BASE), drag_coefficient="0.47").assumptions().body
    assert held is not None
    assert held.drag_coefficient == 0.47
    freed = put(Inputs(base=BASE), drag_coefficient="").assumptions().body
    assert freed is not None
    assert freed.drag_coefficient == "sphere"


def test_air_across_blows_from_collar_to_bottom_toward_the_azimuth() -> None:
    """One row of cross-flow over the whole shaft, in radians; a table of the site stands until it is typed over."""
    blown = put(Inputs(base=BASE), **{FLOW_SPEED: "1.5", FLOW_TOWARD: "90"}).assumptions()
    assert blown.air.cross_flow == ((0.0, 210.0, 1.5, pytest.approx(np.pi / 2)),)
    rows = ((0.0, 50.0, 1.0, 0.0), (100.0, 210.0, 2.0, 1.0))
    layered = Inputs(base=replace(BASE, air=replace(BASE.air, cross_flow=rows)))
    assert layered.text(dial(FLOW_SPEED)) == "as in file"
    assert layered.assumptions().air.cross_flow == rows
    assert len(put(layered, **{FLOW_SPEED: "1"}).assumptions().air.cross_flow) == 1


def test_lengths_are_typed_in_feet_and_inches_and_masses_are_not() -> None:
    """100 ft is 30.48 m; a change of units keeps what was typed, to six digits."""
    inputs = put(Inputs(base=BASE, units=FEET), **{"shaft.depth_m": "100"})
    assert inputs.assumptions().shaft.depth == pytest.approx(30.48, abs=1e-9)
    assert inputs.text(dial("body.diameter_mm")) == "1.9685"
    assert inputs.unit(dial("body.mass_kg")) == "kg"
    from eastfall.tui.units import METRIC

    metric = inputs.reckoned_in(METRIC, CONDITIONS)
    assert metric.text(dial("shaft.depth_m")) == "30.48"
    assert metric.assumptions().shaft.depth == pytest.approx(inputs.assumptions().shaft.depth, rel=1e-5)


def test_steps_stop_at_the_end_of_a_range_and_choices_go_round() -> None:
    """Latitude stops at 90; density at 0; the kind of run comes round."""
    inputs = Inputs(base=BASE)
    for _ in range(60):
        inputs = inputs.stepped(dial("site.latitude_deg"), 1).stepped(dial("air.density_kgm3"), -3)
    assert inputs.text(dial("site.latitude_deg")) == "90"
    assert inputs.text(dial("air.density_kgm3")) == "0"
    kinds = []
    for _ in range(3):
        inputs = inputs.stepped(dial("run.kind"), 1)
        kinds.append(inputs.text(dial("run.kind")))
    assert sorted(kinds) == ["drop", "guided", "hung"]


@pytest.mark.parametrize(
    "one", [one for one in CONDITIONS if "." in one.path], ids=lambda one: one.path.replace(".", "-")
)
def test_changed_input_is_what_the_site_file_with_that_key_gives(one: Dial) -> None:
    """Typing a value and writing it into the site file lead to the same assumptions, to the last bit."""
    turned = Inputs(base=BASE).stepped(one, 1)
    section, _, key = one.path.partition(".")
    tree = tomllib.loads(SITE)
    tree.setdefault(section, {})[key] = turned.text(one) if one.key.choices else float(turned.text(one))
    text = "\n".join(
        f"[{name}]\n" + "\n".join(f"{one} = {json.dumps(value)}" for one, value in keys.items())
        for name, keys in tree.items()
    )
    assert turned.assumptions() == parse_site(text, "changed").assumptions


# What is said of a prediction.


@pytest.fixture(scope="module")
def prospect() -> Prospect:
    """Work out the site once."""
    return Prospect.of(BASE)


def test_difference_of_a_prediction_with_itself_is_zero(prospect: Prospect) -> None:
    """A less B with A as B is +0.0 everywhere, for each of the three curves."""
    for what in outlook.WHATS:
        for row in outlook.table(prospect, prospect, what, (50.0, 210.0))[1:]:
            assert row.split()[-2:] == ["+0.0", "+0.0"]


def test_table_holds_the_numbers_of_the_curve(prospect: Prospect) -> None:
    """What stands at a depth is what the curve gives there, in millimetres; below the shaft there is a dash."""
    row = outlook.table(prospect, None, "expected", (100.0, 300.0))[1:]
    curve = expected_curve(BASE)
    east = float(curve.expected(np.array([100.0]))[0, 0]) * 1e3
    assert float(row[0].split()[1]) == pytest.approx(east, abs=0.05)
    assert row[1].split()[1] == "–"


def test_moving_line_leans_in_the_explorer_as_in_the_prediction() -> None:
    """A guided run at 5 m/s is told for that speed: the curve's own answer with it, not that at rest."""
    inputs = put(Inputs(base=BASE), **{"run.kind": "guided", LINE_SPEED: "5"})
    one = Prospect.of(inputs.assumptions())
    assert one.speed == 5.0
    moving, still = (one.curve.expected(np.array([210.0]), v)[0, 0] for v in (5.0, 0.0))
    assert one.offsets("expected", [210.0])[0, 0] == moving
    assert abs(moving - still) > 1e-3
    assert "line at 5.0 m/s" in outlook.answer(one)


def test_wall_contact_is_said_where_the_curve_has_it(prospect: Prospect) -> None:
    """A narrow shaft: the depth of the contact; a wide one: the gap that is left; none: no word of a wall."""
    narrow = Prospect.of(put(Inputs(base=BASE), **{"shaft.diameter_m": "0.1"}).assumptions())
    contact = narrow.curve.wall_contact_depth
    assert contact is not None
    assert f"MEETS THE WALL at {contact:.1f} m" in outlook.wall(narrow)
    gap = outlook.least_gap(prospect)
    assert gap is not None
    assert gap == pytest.approx((5.2 - 0.05) / 2.0 - 0.0417, abs=1e-3)
    unknown = Prospect.of(replace(BASE, shaft=Shaft(depth=210.0)))
    assert "no shaft diameter given" in outlook.wall(unknown)


def test_budget_adds_up_and_names_what_is_small(prospect: Prospect) -> None:
    """The last line is the root of the sum of squares of all parts, and is the curve's own uncertainty."""
    lines = outlook.budget(prospect, (105.0, 210.0))
    together = next(line for line in lines if line.startswith("together")).split()[1:]
    u = prospect.curve.look_up(prospect.curve.u, np.array([105.0, 210.0])) * 1e3
    assert [float(one) for one in together] == pytest.approx(u.T.ravel().tolist(), abs=0.006)
    assert any(line.startswith("release speed east") for line in lines)
    assert lines[-1].startswith("below 0.01 mm: ")


@pytest.mark.parametrize(
    ("typed", "depths"),
    [("100 50", (50.0, 100.0)), ("10,20;30 m", None), ("", (52.5, 105.0, 157.5, 210.0)), ("210", (210.0,))],
)
def test_depths_of_the_table_are_read_or_refused(typed: str, depths: tuple[float, ...] | None) -> None:
    """Blanks, commas and semicolons part them; a unit on its own is not understood."""
    if depths is None:
        with pytest.raises(ValueError, match="Not understood"):
            outlook.read_depths(typed, 210.0)
    else:
        assert outlook.read_depths(typed, 210.0) == depths


def test_depth_below_the_shaft_or_too_many_are_refused() -> None:
    """Eight depths at most, none below the bottom."""
    for typed in ("211", " ".join(map(str, range(9))), "nan", "-5"):
        with pytest.raises(ValueError, match=r"at most 210\.0 m"):
            outlook.read_depths(typed, 210.0)


# Newest wins.


def test_only_the_newest_of_the_waiting_requests_is_worked_out() -> None:
    """While one is worked out three more come: the first and the last are done, in that order, in one thread."""
    begun, go = threading.Event(), threading.Event()
    done: list[tuple[int, int | ValueError]] = []
    threads: list[threading.Thread] = []

    def work(number: int) -> int:
        begun.set()
        assert go.wait(10.0)
        if number == 4:
            raise ValueError("four")
        return number * 10

    def start(function: Callable[[], None]) -> None:
        threads.append(threading.Thread(target=function))
        threads[-1].start()

    newest = Newest(work, lambda asked, found: done.append((asked, found)), start)
    newest.ask(1)
    assert begun.wait(10.0)
    for number in (2, 3, 4):
        newest.ask(number)
    go.set()
    threads[0].join(10.0)
    assert [asked for asked, _ in done] == [1, 4]
    assert done[0][1] == 10
    assert isinstance(done[1][1], ValueError)
    newest.ask(5)
    threads[-1].join(10.0)
    assert done[-1] == (5, 50)
    assert len(threads) == 2


def test_worker_that_fails_unforeseen_does_not_block_the_next_request() -> None:
    """An error that is no refusal is raised in the worker; the next request is worked out all the same."""
    done: list[object] = []
    newest = Newest(lambda number: 1 // number, lambda _asked, found: done.append(found), lambda run: run())
    with pytest.raises(ZeroDivisionError):
        newest.ask(0)
    newest.ask(1)
    assert done == [1]


# The screen.


def explorer(**more: object) -> Dashboard:
    """Return the application on the explorer."""
    return Dashboard(ExplorerScreen(BASE, name="Carnwick Pit"), **more)  # type: ignore[arg-type]


@pytest.mark.parametrize(("width", "height"), [(80, 24), (120, 40), (200, 60)])
@pytest.mark.parametrize("glyphs", ["braille", "half", "ascii"])
async def test_answer_wall_warning_inputs_curves_and_numbers_are_on_every_size(
    width: int, height: int, glyphs: str
) -> None:
    """From 80x24 up, in any glyphs, nothing that a person needs is missing."""
    from eastfall.tui.glyphs import GLYPHS

    app = explorer(glyphs=GLYPHS[glyphs])
    async with app.run_test(size=(width, height)) as pilot:
        text = await settled(pilot)
    for words in (
        "drop from straight vertical  Carnwick Pit",
        "EXPECT 210.0 m: E +41.7",
        "clear of the wall by 2.53 m",
        "! Reynolds number up to",
        "latitude",
        "51.35 deg",
        "west",
        "south",
        "A expected",
        "depth m",
        "210.0   +41.7",
        "? help",
    ):
        assert words in text, words


async def test_typing_a_latitude_moves_the_curve_without_enter() -> None:
    """Two keys down and "0": the equator, where a body falls farthest east; the curve has moved on the screen."""
    app = explorer()
    async with app.run_test(size=(80, 24)) as pilot:
        await settled(pilot)
        before = app.screen.query_one(Curves)._cells.lines()
        text = await settled(pilot, "down", "down", "0")
        after = app.screen.query_one(Curves)._cells.lines()
        assert isinstance(app.screen, ExplorerScreen)
        shown = app.screen.one
    assert "*latitude" in text
    assert before != after
    assert shown is not None
    expected = expected_curve(replace(BASE, site=replace(BASE.site, latitude=0.0)))
    assert shown.curve.body[0, -1] == expected.body[0, -1]
    assert f"E {float(expected.expected(np.array([210.0]))[0, 0]) * 1e3:+.1f}" in text


async def test_wrong_number_is_told_and_the_last_picture_stays() -> None:
    """Latitude 95: a line in words, the input marked; rubbing one digit out makes it right again."""
    app = explorer()
    async with app.run_test(size=(80, 24)) as pilot:
        await settled(pilot)
        text = await settled(pilot, "down", "down", "9", "5")
        assert "! latitude: 95; expected a number from -90 to 90 deg" in text
        assert "!latitude" in text
        assert "A expected" in text
        text = await settled(pilot, "backspace")
        assert "expected a number" not in text
        assert "9 deg" in text
        text = await settled(pilot, "r")
        assert "51.35 deg" in text


async def test_two_predictions_stand_side_by_side_with_their_differences() -> None:
    """Key k keeps B; a change makes A differ; the table subtracts; x changes over; n forgets."""
    app = explorer()
    async with app.run_test(size=(120, 40)) as pilot:
        await settled(pilot)
        text = await settled(pilot, "k", "down", "down", "0")
        assert "A, with B kept" in text
        assert "B has latitude 51.35 deg" in text
        a, b = (float(one) for one in bottom(text)[1:5:2])
        assert float(bottom(text)[5]) == pytest.approx(a - b, abs=0.11)
        text = await settled(pilot, "x")
        assert [float(one) for one in bottom(text)[1:5:2]] == [b, a]
        assert "B has latitude 0 deg" in text
        assert "A, no B kept" in await settled(pilot, "n")


def bottom(text: str) -> list[str]:
    """Return the cells of the row at the bottom of the shaft."""
    return next(line.split() for line in text.split("\n") if line.strip().startswith("210.0 "))


async def test_table_depths_and_what_is_compared_are_chosen_by_keys() -> None:
    """Key d asks for depths and refuses one below the shaft; v takes bob and dropped body in turn."""
    app = explorer()
    async with app.run_test(size=(80, 24)) as pilot:
        await settled(pilot)
        await settled(pilot, "k", "d", *"500", "enter")
        assert "each at most 210.0 m" in text_of(app)
        text = await settled(pilot, *["backspace"] * 3, *"33 44", "enter")
        assert "     33.0" in text
        assert "     44.0" in text
        assert "A expected" in text
        assert "A hanging bob" in await settled(pilot, "v")
        assert "A dropped body" in await settled(pilot, "v")


async def test_budget_help_and_planner_open_and_close() -> None:
    """Keys u, ? and p open their pages; escape comes back to the same prediction."""
    app = explorer()
    async with app.run_test(size=(80, 24)) as pilot:
        await settled(pilot)
        assert "release speed east" in await settled(pilot, "u")
        assert isinstance(app.screen, BudgetPage)
        text = await settled(pilot, "escape", "question_mark")
        assert isinstance(app.screen, HelpScreen)
        assert "Keep this prediction as B" in text
        await settled(pilot, "escape", "p")
        assert isinstance(app.screen, PlannerScreen)
        assert "EXPECT 210.0 m" in await settled(pilot, "escape")


async def test_escape_leaves_an_explorer_that_was_opened_alone() -> None:
    """With nothing behind it the explorer's end is the program's."""
    app = explorer()
    async with app.run_test(size=(80, 24)) as pilot:
        await settled(pilot, "escape")
    assert app.return_value == 0
    assert app.choice is None


async def test_start_screen_offers_to_explore_each_site_and_an_invented_one(tmp_path: Path) -> None:
    """The choice names the site; the invented shaft has none."""
    (tmp_path / "pit.toml").write_text(SITE)
    for pressed, path in ((("up",), None), (("up", "up"), tmp_path / "pit.toml")):
        app = Dashboard(StartScreen(tmp_path, log_suffix=".jsonl"))
        async with app.run_test(size=(80, 40)) as pilot:
            await pilot.press(*pressed, "enter")
        assert app.choice is not None
        assert (app.choice.what, app.choice.path) == ("explore", path)


def test_explore_without_a_screen_is_one_clear_line(tmp_path: Path) -> None:
    """The verb's option needs a terminal and says so; exit status 2 comes from the refusal."""
    (tmp_path / "pit.toml").write_text(SITE)
    found = CliRunner().invoke(cli, ["expect", str(tmp_path / "pit.toml"), "--explore"])
    assert isinstance(found.exception, InputError)
    assert "needs a terminal" in str(found.exception)


async def test_no_colour_sends_no_colour(monkeypatch: pytest.MonkeyPatch) -> None:
    """With NO_COLOR no cell of the explorer carries a colour of its own, and A and B are letters."""
    monkeypatch.setenv("NO_COLOR", "1")
    app = explorer(no_colour=True)
    async with app.run_test(size=(80, 24)) as pilot:
        await settled(pilot)
        text = await settled(pilot, "k", "down", "down", "0")
        drawn = "".join(app.screen.query_one(Curves)._cells.lines())
        strips = app.screen._compositor.render_strips()
        colours = {s.style.color for strip in strips for s in strip if s.style and s.style.color}
    assert all(one.is_default for one in colours)
    assert {"A", "B"} <= set(drawn)
    assert "B has latitude" in text


async def test_units_changed_in_the_settings_reach_the_explorer() -> None:
    """F2, an arrow, escape: depth and table are in feet and inches, the prediction is the same."""
    app = explorer(remembered=Remembered())
    async with app.run_test(size=(80, 24)) as pilot:
        await settled(pilot)
        text = await settled(pilot, "f2", "right", "escape")
        assert isinstance(app.first, ExplorerScreen)
        assert app.first.one is not None
        east = float(app.first.one.offsets("expected", [210.0])[0, 0])
    assert f"EXPECT 689.0 ft: E {east / 0.0254:+.3f} N" in text
    assert "688.976 ft" in text


async def test_shaft_of_no_use_to_the_models_is_refused_in_words() -> None:
    """A body lighter than air is the models' own refusal, shown as a line."""
    light = replace(BASE, body=Body(mass=1e-6, diameter=0.05), air=Air(density=1.2), run=Run(kind="drop"))
    app = Dashboard(ExplorerScreen(light))
    async with app.run_test(size=(80, 24)) as pilot:
        text = await settled(pilot)
    assert "! " in text
    assert "working it out" in text


def test_explorer_of_a_site_with_only_what_is_required() -> None:
    """Latitude, depth and kind are enough: everything else has a default."""
    bare = Assumptions(site=Site(latitude=1.0), shaft=Shaft(depth=100.0), run=Run(kind="guided"))
    assert Prospect.of(Inputs(base=bare).assumptions()).deepest == 100.0
