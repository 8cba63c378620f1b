"""The shelf on the screen: runs listed in a worker, ordered and filtered, opened, compared, reported, exported."""

import shutil
from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pytest
from screen_harness import lines
from textual.pilot import Pilot

from eastfall.io.shelf import RunCard
from eastfall.tui import shelf
from eastfall.tui.app import Dashboard
from eastfall.tui.screens.compare import CompareScreen
from eastfall.tui.screens.shelf import ShelfScreen
from eastfall.tui.screens.start import StartScreen
from eastfall.tui.widgets.table import LongTable

pytestmark = pytest.mark.invariant
SUFFIX = ".eastfall.jsonl"
SAMPLES = Path(__file__).parents[2] / "replay_logs"
LOG = "sandrigg-east_20260504T073000Z.eastfall.jsonl"


def card(name: str, **changes: Any) -> RunCard:
    """Build a card."""
    fields: dict[str, Any] = {
        "path": Path(f"{name}{SUFFIX}"),
        "site": name,
        "started_at": datetime(2026, 5, 4, tzinfo=UTC),
        "kind": "guided",
        "depth": 100.0,
        "verdict": "within",
        "state": "intact",
        "error": "",
    }
    return RunCard(**(fields | changes))


CARDS = (
    card("Beck", verdict="over", depth=400.0, started_at=datetime(2026, 5, 5, tzinfo=UTC)),
    card("alder", state="changed"),
    card("Carr", verdict="undecided", started_at=None),
    card("Dene", error="no header", verdict="", state=""),
)


@pytest.mark.parametrize(
    ("order", "first"),
    [("date", "Beck"), ("site", "alder"), ("verdict", "Beck"), ("depth", "Beck"), ("state", "Dene")],
)
def test_every_order_puts_first_what_matters(order: str, first: str) -> None:
    """Newest, first letter, worst, deepest, and records that are not intact."""
    assert shelf.chosen(CARDS, order, "all")[0].site == first


@pytest.mark.parametrize(
    ("only", "sites"),
    [
        ("all", {"Beck", "alder", "Carr", "Dene"}),
        ("over", {"Beck"}),
        ("undecided", {"Carr"}),
        ("not intact", {"alder", "Dene"}),
    ],
)
def test_every_filter_leaves_what_it_says(only: str, sites: set[str]) -> None:
    """A file that cannot be read counts as not intact."""
    assert {one.site for one in shelf.chosen(CARDS, "date", only)} == sites


def test_lines_fit_eighty_columns_and_tell_state_and_error() -> None:
    """Words, not colour, tell a changed record and an unreadable file."""
    texts = [shelf.line(one, picked=False)[0] for one in CARDS]
    assert all(len(one) <= 80 for one in texts[:3])
    assert "OVER" in texts[0]
    assert "CHANGED" in texts[1]
    assert "no header" in texts[3]


def test_names_of_new_files_are_held_to_suffix_folder_and_emptiness(tmp_path: Path) -> None:
    """A wrong suffix, a missing folder and a file that stands are refused with what to do."""
    (tmp_path / "a.csv").write_text("kept")
    for text, says in (
        (tmp_path / "a.txt", "name ends in"),
        (tmp_path / "no" / "a.csv", "no such folder"),
        (tmp_path / "a.csv", "stands already"),
    ):
        with pytest.raises(ValueError, match=says):
            shelf.new_file(str(text), shelf.EXPORTS)
    assert shelf.new_file(f" {tmp_path / 'b.csv'} ", shelf.EXPORTS) == tmp_path / "b.csv"


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """Make a folder with two runs of one shaft, one of them cut short, in a folder below."""
    runs = tmp_path / "runs"
    runs.mkdir()
    shutil.copy(SAMPLES / LOG, runs / f"one{SUFFIX}")
    whole = (SAMPLES / LOG).read_bytes()
    (runs / f"two{SUFFIX}").write_bytes(whole[: whole.rfind(b"\n", 0, len(whole) - 400) + 1])
    return tmp_path


async def until(pilot: Pilot[Any], met: Callable[[], bool]) -> None:
    """Wait, within reason, for a worker to come to something."""
    for _ in range(300):
        await pilot.pause(0.05)
        if met():
            return
    raise AssertionError("not within 15 s")


async def opened(pilot: Pilot[Any], app: Dashboard) -> ShelfScreen:
    """Open the shelf from the start screen and wait for its verdicts."""
    options = app.screen.query_one("#start-list")
    options.highlighted = options.get_option_index("shelf")  # type: ignore[attr-defined]
    await pilot.press("enter")
    await pilot.pause()
    screen = app.screen
    assert isinstance(screen, ShelfScreen)
    await until(pilot, lambda: len(screen.cards) == 2 and all(one.verdict for one in screen.cards))
    return screen


async def test_runs_are_listed_compared_reported_exported_and_opened(folder: Path) -> None:
    """From the start screen by keys: verdict and state shown, two compared, a CSV written once, a run handed back."""
    app = Dashboard(StartScreen(folder, log_suffix=SUFFIX))
    out = folder / "runs" / "one.csv"
    async with app.run_test(size=(100, 30), notifications=True) as pilot:
        screen = await opened(pilot, app)
        text = "\n".join(lines(app))
        assert "runs: 2 of 2 (all), by date" in text
        assert "intact" in text
        assert "CUT SHORT" in text
        table = screen.query_one(LongTable)
        await pilot.press("c", "down", "c")
        await until(pilot, lambda: isinstance(app.screen, CompareScreen))
        assert "NOTHING MOVED" in "\n".join(lines(app))
        await pilot.press("escape", "f", "f", "f")
        await pilot.pause()
        assert "runs: 1 of 2 (not intact)" in "\n".join(lines(app))
        await pilot.press("f", "home")
        row = next(i for i, one in enumerate(screen._rows) if one.path.name.startswith("one"))
        await pilot.press(*["down"] * row, "x", "enter")
        await until(pilot, out.is_file)
        written = out.read_bytes()
        await pilot.press("x", "enter")
        await pilot.pause()
        assert "stands already" in "\n".join(lines(app))
        await pilot.press("escape")
        assert table.cursor == row
        await pilot.press("enter")
        await pilot.pause()
    assert out.read_bytes() == written
    assert written.startswith(b"\xef\xbb\xbf") or b"depth_m" in written[:200]
    assert app.choice is not None
    assert (app.choice.what, app.choice.path) == ("replay", folder / "runs" / f"one{SUFFIX}")


async def test_leaving_early_leaves_no_thread_at_work(folder: Path) -> None:
    """Escape while the list is still being made closes the screen; the application ends."""
    app = Dashboard(StartScreen(folder, log_suffix=SUFFIX))
    async with app.run_test(size=(80, 24)) as pilot:
        options = app.screen.query_one("#start-list")
        options.highlighted = options.get_option_index("shelf")  # type: ignore[attr-defined]
        await pilot.press("enter", "escape")
        await pilot.pause()
        assert isinstance(app.screen, StartScreen)
        await until(pilot, lambda: not any(one.is_running for one in app.workers))
