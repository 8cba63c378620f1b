"""Settings: what is kept comes back, what is broken is told and left alone, and each setting does what it says."""

import os
from pathlib import Path

import pytest
from click.testing import CliRunner
from hypothesis import given
from hypothesis import strategies as st
from screen_harness import text_of

from eastfall.tui.app import Dashboard
from eastfall.tui.glyphs import ASCII, BRAILLE
from eastfall.tui.main import cli
from eastfall.tui.opening import terminal_look
from eastfall.tui.preferences import VARIABLE, Preferences, Remembered, place, read, written
from eastfall.tui.screens.settings import SETTINGS, SettingsScreen, after, in_words
from eastfall.tui.screens.start import StartScreen
from eastfall.tui.screens.watch import WatchScreen
from eastfall.tui.terminal import glyphs_for

pytestmark = pytest.mark.invariant

_TEXT = st.text(st.characters(codec="utf-8"), max_size=40)
_SETTINGS = st.builds(
    Preferences,
    theme=st.sampled_from(["dark", "light", "none"]),
    units=st.sampled_from(["metric", "feet"]),
    glyphs=st.sampled_from(["auto", "braille", "half", "ascii"]),
    sound=st.booleans(),
    cell_aspect=st.floats(1.0, 4.0),
    runs_folder=_TEXT,
    recent_sites=st.lists(_TEXT, max_size=8).map(tuple),
    keys=st.dictionaries(_TEXT, _TEXT, max_size=4),
)


@given(_SETTINGS)
def test_written_settings_read_back_the_same(one: Preferences) -> None:
    """Whatever the settings hold, quotes, control characters and backslashes included, the file gives it back."""
    assert read(written(one)) == one


def test_settings_as_they_were_made_write_nothing_but_a_heading() -> None:
    """A default is not written, so that a later default takes hold."""
    assert all(line.startswith("#") for line in written(Preferences()).splitlines())


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("theme = ", "not TOML"),
        ('theme = "purple"', "theme is 'purple'; expected one of dark, light, none"),
        ("sound = 1", "sound is 1; expected true or false"),
        ("cell_aspect = 9.0", "cell_aspect is 9.0; expected a number from 1 to 4"),
        ("cell_aspect = nan", "cell_aspect is nan; expected a number from 1 to 4"),
        ("colour = 1", "unknown setting colour; expected some of theme, units"),
        ("keys = 3", 'keys is 3; expected a table such as "watch.note" = "N"'),
        ("recent_sites = [1]", "recent_sites is [1]; expected a list of site files"),
        ("a = " + "[" * 5000, "not TOML"),
        ("#" * 200_000, "more than 100000 bytes"),
    ],
)
def test_broken_file_gives_defaults_one_line_and_is_left_alone(tmp_path: Path, text: str, says: str) -> None:
    """The complaint names the file, what stands there and what was expected; a change does not write over it."""
    path = tmp_path / "settings.toml"
    path.write_text(text)
    found = Remembered.of({VARIABLE: str(path)})
    assert found.now == Preferences()
    assert says in found.complaint
    assert "settings.toml" in found.complaint
    assert "\n" not in found.complaint
    assert "left as it is" in found.change(units="feet")
    assert found.now.units == "feet"
    assert path.read_text() == text


def test_file_that_is_no_text_or_no_file_is_told_too(tmp_path: Path) -> None:
    """Bytes that are not UTF-8, and a folder in the file's place, are complaints and no crash."""
    (tmp_path / "bytes").write_bytes(b"\xff\xfe\x00")
    assert "not UTF-8" in Remembered.of({VARIABLE: str(tmp_path / "bytes")}).complaint
    assert "Settings not used" in Remembered.of({VARIABLE: str(tmp_path)}).complaint


def test_change_is_kept_in_a_folder_that_was_not_there(tmp_path: Path) -> None:
    """The first change makes folder and file; the next start reads them; no other file is left."""
    path = tmp_path / "a" / "b" / "settings.toml"
    first = Remembered.of({VARIABLE: str(path)})
    assert first.complaint == ""
    assert first.change(units="feet", sound=False) == ""
    again = Remembered.of({VARIABLE: str(path)}).now
    assert (again.units, again.sound) == ("feet", False)
    assert list(path.parent.iterdir()) == [path]


def test_change_that_cannot_be_kept_holds_until_the_end(tmp_path: Path) -> None:
    """A place that cannot be written gives one line, and the setting holds all the same."""
    (tmp_path / "file").write_text("")
    found = Remembered(tmp_path / "file" / "settings.toml")
    assert found.change(sound=False).startswith("Not kept: ")
    assert found.now.sound is False


def test_recent_sites_are_the_newest_first_once_each_and_few(tmp_path: Path) -> None:
    """A site used again moves to the front; the ninth drops out."""
    found = Remembered(tmp_path / "settings.toml")
    for number in [*range(12), 5]:
        found.used(tmp_path / f"{number}.toml")
    names = [Path(one).name for one in found.now.recent_sites]
    assert names == [f"{number}.toml" for number in (5, 11, 10, 9, 8, 7, 6, 4)]


def test_place_is_the_platforms_unless_the_environment_names_another() -> None:
    """Without the variable the file lies under the user's folder for settings."""
    assert place({VARIABLE: "/x/y.toml"}) == Path("/x/y.toml")
    found = place({})
    assert found.name == "settings.toml"
    assert "eastfall" in str(found.parent)


# What the application does with them.


async def test_theme_and_sound_are_kept_when_their_keys_are_pressed(tmp_path: Path, session) -> None:
    """What t and m do is there at the next start."""
    path = tmp_path / "settings.toml"
    app = Dashboard(WatchScreen(session()), remembered=Remembered(path))
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("t", "m")
    again = Remembered.of({VARIABLE: str(path)})
    assert (again.now.theme, again.now.sound) == ("light", False)
    app = Dashboard(WatchScreen(session()), remembered=again)
    assert app.theme == "eastfall-light"
    assert app.muted


async def test_complaint_about_the_file_is_shown_and_the_screen_works(session) -> None:
    """A broken file is a line on the screen, not an end."""
    broken = Remembered(complaint="Settings not used, defaults hold: x [mm]: theme is 3")
    app = Dashboard(WatchScreen(session()), remembered=broken)
    async with app.run_test(size=(120, 40), notifications=True) as pilot:
        await pilot.pause()
        assert "Settings not used, defaults hold" in text_of(app)
        await pilot.press("r")
        assert isinstance(app.first, WatchScreen)
        assert app.first.sight.residual


async def test_settings_screen_changes_units_at_once_and_keeps_them(
    tmp_path: Path, session, snapshot
) -> None:
    """F2, one arrow, escape: the watch screen speaks feet and inches, and so does the file."""
    path = tmp_path / "settings.toml"
    app = Dashboard(WatchScreen(session()), remembered=Remembered(path))
    async with app.run_test(size=(80, 24)) as pilot:
        app.take(snapshot())
        await pilot.pause()
        assert "60.0 m: residual" in text_of(app)
        await pilot.press("f2")
        assert isinstance(app.screen, SettingsScreen)
        assert "metres and millimetres" in text_of(app)
        await pilot.press("right", "escape")
        app.take(snapshot())
        await pilot.pause()
        assert "196.9 ft: residual" in text_of(app)
    assert 'units = "feet"' in path.read_text()


async def test_every_setting_can_be_turned_round_by_keys(tmp_path: Path, session) -> None:
    """Turning a setting through all of its values comes back to where it was; the folder is typed."""
    app = Dashboard(WatchScreen(session()), remembered=Remembered(tmp_path / "settings.toml"))
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("f2")
        for one in SETTINGS:
            if one.values:
                await pilot.press(*["right"] * len(one.values))
            await pilot.press("down")
        assert app.remembered.now == Preferences()
        await pilot.press("enter", *"/data", "enter")
        assert app.remembered.now.runs_folder == "/data"
        assert "/data" in text_of(app)


def test_setting_from_the_file_that_is_not_listed_is_shown_and_can_be_left() -> None:
    """A cell aspect of 2.13 is shown as it is; an arrow leads to the nearest listed one."""
    aspect = next(one for one in SETTINGS if one.name == "cell_aspect")
    assert in_words(aspect, 2.13) == "2.13"
    assert after(aspect, 2.13, 1) == 2.1


def test_glyphs_of_the_environment_overrule_those_of_the_settings() -> None:
    """EASTFALL_GLYPHS, then the setting, then what the terminal can."""
    assert glyphs_for({"EASTFALL_GLYPHS": "ascii"}, "utf-8", "braille") is ASCII
    assert glyphs_for({}, "utf-8", "ascii") is ASCII
    assert glyphs_for({}, "utf-8", "auto") is BRAILLE


def test_look_of_a_terminal_comes_with_the_settings(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Every screen that opens reads the file that the environment names."""
    path = tmp_path / "settings.toml"
    path.write_text('glyphs = "ascii"\nunits = "feet"\n')
    monkeypatch.setenv(VARIABLE, str(path))
    monkeypatch.setattr("eastfall.tui.opening.refuse_unless_screen", lambda *_args, **_more: None)
    look = terminal_look()
    assert look["glyphs"] is ASCII
    assert isinstance(look["remembered"], Remembered)
    assert look["remembered"].now.units == "feet"


async def test_sites_used_elsewhere_are_offered_while_they_are_there(tmp_path: Path) -> None:
    """A remembered site outside the folder is listed; one that is gone, or listed already, is not twice."""
    here, there = tmp_path / "here", tmp_path / "there"
    for folder in (here, there):
        folder.mkdir()
        (folder / f"{folder.name}.toml").write_text("[site]\n")
    used = [there / "there.toml", here / "here.toml", tmp_path / "gone.toml"]
    app = Dashboard(StartScreen(here, log_suffix=".jsonl", used=used))
    async with app.run_test(size=(120, 40)) as pilot:
        await pilot.pause()
        watched = [name for name in app.first._choices if name.startswith("watch ")]  # type: ignore[attr-defined]
    assert watched == [f"watch {here / 'here.toml'}", f"watch {there / 'there.toml'}"]


@pytest.mark.parametrize("named", ["", "elsewhere"])
def test_runs_are_recorded_where_the_settings_say(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, named: str
) -> None:
    """Without --into a run goes into the folder of the settings, or into eastfall-runs beside the work."""
    if named:
        Path(os.environ[VARIABLE]).write_text(f"runs_folder = {str(tmp_path / named)!r}\n")
    monkeypatch.chdir(tmp_path)
    found = CliRunner().invoke(cli, ["demo", "--plain", "--for", "0.3"])
    assert found.exit_code == 0, found.output
    folder = tmp_path / (named or "eastfall-runs")
    assert len(list(folder.glob("*.eastfall.jsonl"))) == 1


def test_run_without_a_screen_tells_of_a_broken_file_and_goes_on(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """One line on standard error; the record is made in the default folder."""
    Path(os.environ[VARIABLE]).write_text("runs_folder = 7\n")
    monkeypatch.chdir(tmp_path)
    found = CliRunner().invoke(cli, ["demo", "--plain", "--for", "0.3"])
    assert found.exit_code == 0, found.output
    assert "runs_folder is 7; expected a folder, as text" in found.stderr
    assert len(list((tmp_path / "eastfall-runs").glob("*.eastfall.jsonl"))) == 1


def test_tests_do_not_touch_the_settings_of_whoever_runs_them() -> None:
    """The fixture of this folder names a file of its own."""
    assert os.environ[VARIABLE] != str(place({}))
