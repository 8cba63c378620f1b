"""The start screen: what it finds, what it says, what it gives back."""

import os
from pathlib import Path

import pytest
from screen_harness import text_of

from eastfall.io.cautions import CAUTIONS
from eastfall.tui.app import Dashboard
from eastfall.tui.screens.start import RECENT, Choice, StartScreen, looks_like_site, recent

pytestmark = pytest.mark.invariant
SUFFIX = ".eastfall.jsonl"


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """Make a folder with a site, a foreign file and a run."""
    (tmp_path / "pit.toml").write_text("[site]\nlatitude_deg = 50.0\n")
    (tmp_path / "other.toml").write_text("[tool]\n")
    (tmp_path / "runs").mkdir()
    (tmp_path / "runs" / "a\x1b[2J.eastfall.jsonl").write_text("{}\n")
    return tmp_path


async def test_cautions_demo_sites_and_runs_are_offered(folder: Path) -> None:
    """Every caution is on the screen; a file that is no site is not; names are made harmless."""
    app = Dashboard(StartScreen(folder, log_suffix=SUFFIX))
    async with app.run_test(size=(100, 30)) as pilot:
        await pilot.pause()
        text = text_of(app)
    for words in (*CAUTIONS, "demo, a probe run down guides", "pit.toml", r"a\x1b[2J.eastfall.jsonl"):
        assert words in text
    assert "other.toml" not in text
    assert "\x1b" not in text


@pytest.mark.parametrize(
    ("keys", "choice"),
    [
        ([], Choice(what="demo", kind="guided")),
        (["down"], Choice(what="demo", kind="hung")),
        (["down", "down", "down"], Choice(what="watch", path=Path("pit.toml"))),
    ],
)
async def test_enter_gives_back_what_was_chosen(folder: Path, keys: list[str], choice: Choice) -> None:
    """The application ends with the choice; it starts nothing itself."""
    app = Dashboard(StartScreen(folder, log_suffix=SUFFIX))
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press(*keys, "enter")
    assert app.choice is not None
    assert (app.choice.what, app.choice.kind) == (choice.what, choice.kind)
    assert app.choice.path == (folder / choice.path if choice.path else None)


async def test_quit_gives_back_nothing(folder: Path) -> None:
    """The quit key leaves without a choice and without a question."""
    app = Dashboard(StartScreen(folder, log_suffix=SUFFIX))
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("q")
    assert app.choice is None
    assert app.return_value == 0


@pytest.mark.parametrize(
    ("found", "says"),
    [(["/dev/ttyUSB0  USB [serial]"], "/dev/ttyUSB0  USB [serial]"), ([], "no serial port on this machine")],
)
async def test_port_check_lists_ports_or_says_that_there_is_none(
    folder: Path, found: list[str], says: str
) -> None:
    """The list of ports comes into the list itself."""
    app = Dashboard(StartScreen(folder, log_suffix=SUFFIX, ports=lambda: found))
    async with app.run_test(size=(80, 30)) as pilot:
        await pilot.press("up", "enter")
        await app.workers.wait_for_complete()
        await pilot.pause()
        assert says in text_of(app)


async def test_ports_that_cannot_be_listed_are_an_answer_not_a_crash(folder: Path) -> None:
    """A refusal of the system is shown in words."""

    def refused() -> list[str]:
        raise PermissionError("not allowed")

    app = Dashboard(StartScreen(folder, log_suffix=SUFFIX, ports=refused))
    async with app.run_test(size=(80, 30)) as pilot:
        await pilot.press("up", "enter")
        await app.workers.wait_for_complete()
        await pilot.pause()
        assert "cannot list ports: not allowed" in text_of(app)


def test_recent_files_are_the_newest_first_and_few(tmp_path: Path) -> None:
    """A folder of a hundred runs lists the last ones."""
    for number in range(20):
        path = tmp_path / f"{number}{SUFFIX}"
        path.write_text("")
        os.utime(path, (number, number))
    found = recent(tmp_path, (SUFFIX,))
    assert [one.name for one in found] == [f"{n}{SUFFIX}" for n in range(19, 19 - RECENT, -1)]


def test_file_that_cannot_be_read_is_no_site(tmp_path: Path) -> None:
    """A folder or a missing file is left out of the list."""
    assert not looks_like_site(tmp_path)
    assert not looks_like_site(tmp_path / "missing.toml")


@pytest.mark.skipif(os.name != "posix", reason="pseudo-terminals are POSIX")
def test_cursor_is_seen_without_colour(folder: Path) -> None:
    """With NO_COLOR the line under the cursor, and only that one, is reversed in the terminal; it moves by keys."""
    from terminal_harness import EASTFALL, Terminal

    command = ["env", "-C", str(folder), *EASTFALL]
    with Terminal(command, 80, 24, NO_COLOR="1") as terminal:

        def reversed_lines() -> list[str]:
            return [
                line.strip()
                for row, line in enumerate(terminal.text.splitlines())
                if any(terminal.screen.buffer[row][column].reverse for column in range(3, 30))
            ]

        terminal.wait("demo, a probe run")
        terminal.wait(lambda _: reversed_lines() == ["demo, a probe run down guides and back up"])
        terminal.press("\x1b[B")
        terminal.wait(lambda _: reversed_lines() == ["demo, a plumb line swinging to rest"])
        terminal.press("q")
        assert terminal.ended() == 0
