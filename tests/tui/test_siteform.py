"""The site form driven by keys on the real screen: typed, checked, saved, left."""

import os
import re
import runpy
from pathlib import Path

import pytest
from screen_harness import text_of
from textual.pilot import Pilot
from textual.widgets import Input, TextArea

from eastfall.io import sitekeys
from eastfall.io.siteedit import SiteDraft
from eastfall.io.sitefile import LinkSettings, load_site
from eastfall.tui import formpages
from eastfall.tui.app import Dashboard
from eastfall.tui.screens.dialogs import Confirm
from eastfall.tui.screens.formdialogs import AskName, RowsDialog, free_name
from eastfall.tui.screens.porttrial import PortTrial
from eastfall.tui.screens.siteform import SiteForm
from eastfall.tui.screens.start import StartScreen
from eastfall.tui.widgets.formrow import KeyList, SectionList, ValueInput
from eastfall.tui.widgets.line import KeyLine, TextLine

pytestmark = pytest.mark.invariant
# ruff: noqa: ASYNC240 (files of a few lines, read while nothing else waits)

PIT = """\
# Heron Shaft
[site]
name = "Heron"
latitude_deg = 48.20   # from the plan
[shaft]
depth_m = 512.0
[run]
kind = "guided"
[[link]]
url = "emulate:?rate=20"   # no instrument yet
"""
TYPED = {".": "full_stop", "-": "minus", "_": "underscore", " ": "space", ":": "colon", "/": "slash"}


@pytest.fixture
def pit(tmp_path: Path) -> Path:
    """Write a site file with comments."""
    path = tmp_path / "heron.toml"
    path.write_text(PIT)
    return path


async def type_in(pilot: Pilot[int], text: str) -> None:
    """Press a key for each letter."""
    await pilot.press(*(TYPED.get(one, one) for one in text))
    await pilot.pause()


def line(app: Dashboard, name: str) -> str:
    """Return the words of one line of the form."""
    return (
        next(one for one in app.screen_stack if isinstance(one, SiteForm))
        .query_one(f"#{name}", TextLine)
        .words
    )


async def test_new_site_from_the_first_key_to_a_file_that_loads(tmp_path: Path) -> None:
    """At 80x24 by keys alone: the required keys are asked for first, then saved under the shaft's name."""
    form = SiteForm.new(tmp_path)
    app = Dashboard(form)  # type: ignore[arg-type]  # a form closes with a path
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.pause()
        assert "2 to mend" in line(app, "form-title")
        await type_in(pilot, "Kite")
        await pilot.press("enter")
        await type_in(pilot, "-33.5")
        await pilot.press("down")
        await type_in(pilot, "850")
        assert "no fault" in line(app, "form-title")
        await pilot.press("down", "right", "ctrl+s")
        assert isinstance(app.screen, AskName)
        assert app.screen.query_one(Input).value == "kite.toml"
        await pilot.press("enter")
        await pilot.pause()
        assert not form.unsaved
    site = load_site(tmp_path / "kite.toml").assumptions
    assert (site.site.name, site.shaft.depth, site.run.kind) == ("Kite", 850.0, "hung")


async def test_what_is_typed_is_judged_at_once_in_the_words_of_the_file(pit: Path) -> None:
    """A value out of range shows the file reader's own sentence while it is typed, and nothing when it is mended."""
    app = Dashboard(SiteForm.over(pit))  # type: ignore[arg-type]  # as above
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("down", "backspace", "backspace", "backspace")
        await type_in(pilot, "0")
        told = line(app, "fault")
        assert told == "! site.latitude_deg is 480; expected a number from -90 to 90 deg"
        pit.with_name("same.toml").write_text(PIT.replace("48.20", "480"))
        with pytest.raises(ValueError, match="latitude_deg") as error:
            load_site(pit.with_name("same.toml"))
        assert str(error.value).endswith(told.removeprefix("! "))
        await pilot.press("backspace")
        await pilot.pause()
        assert line(app, "fault") == "no fault: this file can be used"


@pytest.mark.parametrize("section", ["site", "shaft"])
async def test_every_key_is_reached_with_unit_default_and_help(pit: Path, section: str) -> None:
    """Down through a section at 80x24: each key comes into view with its unit, range or choices, and help."""
    form = SiteForm.over(pit)
    app = Dashboard(form)  # type: ignore[arg-type]  # as above
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press(*["pagedown"] * (list(sitekeys.SECTIONS).index(section) + 1))
        for key in (one for one in sitekeys.all_keys() if one.section == section):
            await pilot.pause()
            assert form.key_path == f"{section}.{key.name}"
            shown = text_of(app)
            assert f" {key.name}" in shown
            assert line(app, "edit-unit").strip() == key.unit
            about = line(app, "about").lower()
            assert key.help.lower() in about
            assert key.expectation.lower() in about
            assert ("required" if key.required else "default: ") in about
            await pilot.press("down")


def test_every_key_has_its_unit_range_default_and_help() -> None:
    """What is said of a key is all that is known of it."""
    draft = SiteDraft(PIT, "x")
    for key in sitekeys.all_keys():
        path = f"{key.section}[0].{key.name}" if key.section == "link" else f"{key.section}.{key.name}"
        about = formpages.about(path).lower()
        assert key.help.lower() in about
        assert key.expectation.lower() in about
        assert ("required" if key.required else "default: ") in about
        assert formpages.key_row(draft, path, {}).unit == key.unit


async def test_help_fits_its_lines_for_every_key(pit: Path) -> None:
    """At 80 columns no help is cut: it takes three lines at most."""
    app = Dashboard(SiteForm.over(pit))  # type: ignore[arg-type]  # as above
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.pause()
        width = app.screen.query_one("#about").size.width
    from eastfall.tui.widgets.line import wrapped

    too_long = [
        path
        for page in formpages.pages(SiteDraft(PIT, "x"))
        for path in page.paths
        if len(wrapped(formpages.about(path), width, width)) > 3
    ]
    assert width == 80
    assert too_long == []


async def test_choices_go_round_with_the_arrows(pit: Path) -> None:
    """Left and right take the next of the allowed words; nothing else can come of them."""
    form = SiteForm.over(pit)
    app = Dashboard(form)  # type: ignore[arg-type]  # as above
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("up")
        assert form.key_path == "run.kind"
        seen = []
        for _ in range(3):
            await pilot.press("right")
            await pilot.pause()
            seen.append(form.draft.value("run.kind"))
        assert seen == ["hung", "drop", "guided"]
        await pilot.press("left")
        await pilot.pause()
        assert form.draft.value("run.kind") == "drop"


async def test_table_is_typed_as_rows_and_checked(pit: Path) -> None:
    """Enter opens the rows; a row too long is told at once; ctrl+s takes the rows, escape leaves what was."""
    form = SiteForm.over(pit)
    app = Dashboard(form)  # type: ignore[arg-type]  # as above
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("pagedown", *["down"] * 6, "enter")
        await pilot.pause()
        assert isinstance(app.screen, RowsDialog)
        assert "from depth m   kg/m3" in text_of(app)
        await type_in(pilot, "0 2670")
        await pilot.press("enter")
        await type_in(pilot, "300 2800 5")
        assert "site.rock_density[1] is [300, 2800, 5]" in text_of(app)
        await pilot.press("backspace", "backspace")
        await pilot.pause()
        assert "2 rows, no fault" in text_of(app)
        await pilot.press("ctrl+s")
        await pilot.pause()
        assert form.draft.value("site.rock_density") == [[0, 2670], [300, 2800]]
        await pilot.press("enter")
        await pilot.pause()
        app.screen.query_one(TextArea).text = "nothing"
        await pilot.press("escape")
        await pilot.pause()
        assert form.draft.value("site.rock_density") == [[0, 2670], [300, 2800]]


async def test_file_being_edited_is_written_only_after_asking(pit: Path) -> None:
    """No leaves the file as it was; yes writes it with comments and order kept."""
    form = SiteForm.over(pit)
    app = Dashboard(form)  # type: ignore[arg-type]  # as above
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("down")
        await type_in(pilot, "5")
        await pilot.press("ctrl+s")
        await pilot.pause()
        assert isinstance(app.screen, Confirm)
        assert "Write over heron.toml?" in text_of(app)
        await pilot.press("n")
        await pilot.pause()
        assert pit.read_text() == PIT
        await pilot.press("ctrl+s", "y")
        await pilot.pause()
    assert pit.read_text() == PIT.replace("48.20 ", "48.205 ")
    assert not form.unsaved


async def test_change_by_another_program_is_pointed_out_before_it_is_lost(pit: Path) -> None:
    """The question says so when the file is no longer what was opened."""
    app = Dashboard(SiteForm.over(pit))  # type: ignore[arg-type]  # as above
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("down")
        await type_in(pilot, "5")
        pit.write_text(PIT + "# from elsewhere\n")
        await pilot.press("ctrl+s")
        await pilot.pause()
        assert "Another program changed it" in text_of(app)


async def test_no_other_file_is_ever_written_over(pit: Path) -> None:
    """A name that stands is refused in words, also one that appears after it was asked for."""
    pit.with_name("kite.toml").write_text("[site]\n")
    form = SiteForm.new(pit.parent)
    app = Dashboard(form)  # type: ignore[arg-type]  # as above
    async with app.run_test(size=(80, 24)) as pilot:
        await type_in(pilot, "Kite")
        await pilot.press("ctrl+s", "y")
        await pilot.pause()
        await pilot.press("enter")
        await pilot.pause()
        assert isinstance(app.screen, AskName)
        assert "stands already" in text_of(app)
        await pilot.press("escape")
        await pilot.pause()
        pit.with_name("late.toml").write_text("late")
        form._write(pit.with_name("late.toml"), over=False)
        assert form.unsaved
    assert pit.with_name("kite.toml").read_text() == "[site]\n"
    assert pit.with_name("late.toml").read_text() == "late"


async def test_half_done_file_can_be_saved_after_asking(tmp_path: Path) -> None:
    """With keys still missing the question says so; the work is not lost."""
    app = Dashboard(SiteForm.new(tmp_path))  # type: ignore[arg-type]  # as above
    async with app.run_test(size=(80, 24)) as pilot:
        await type_in(pilot, "Owl")
        await pilot.press("ctrl+s")
        await pilot.pause()
        assert "Save with 2 to mend?" in text_of(app)
        await pilot.press("y", "enter")
        await pilot.pause()
    assert 'name = "Owl"' in (tmp_path / "owl.toml").read_text()


@pytest.mark.parametrize("key", ["escape", "ctrl+q"])
async def test_leaving_asks_while_something_is_unsaved(pit: Path, key: str) -> None:
    """Escape and the library's own quit key both ask first; no goes on, yes leaves without a word written."""
    app = Dashboard(SiteForm.over(pit))  # type: ignore[arg-type]  # as above
    async with app.run_test(size=(80, 24)) as pilot:
        await type_in(pilot, "x")
        await pilot.press(key)
        await pilot.pause()
        assert isinstance(app.screen, Confirm)
        await pilot.press("n")
        await pilot.pause()
        assert isinstance(app.screen, SiteForm)
        await pilot.press(key, "y")
        await pilot.pause()
    assert app.return_value == 0
    assert pit.read_text() == PIT


async def test_leaving_without_a_change_asks_nothing(pit: Path) -> None:
    """What was typed and taken back is no change."""
    app = Dashboard(SiteForm.over(pit))  # type: ignore[arg-type]  # as above
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("x", "backspace", "escape")
        await pilot.pause()
    assert app.return_value == 0


async def test_next_fault_is_one_key_away(pit: Path) -> None:
    """F7 goes to the keys that are wrong or missing, round the end."""
    pit.write_text(PIT.replace("512.0", "-1").replace("[[link]]", "[limits]\nratio = 0\n[[link]]"))
    form = SiteForm.over(pit)
    app = Dashboard(form)  # type: ignore[arg-type]  # as above
    async with app.run_test(size=(80, 24)) as pilot:
        visited = []
        for _ in range(4):
            await pilot.press("f7")
            await pilot.pause()
            visited.append(form.key_path)
    assert visited == ["shaft.depth_m", "shaft.depth_m", "limits.ratio", "shaft.depth_m"]


async def test_links_are_added_filled_and_taken_out(pit: Path) -> None:
    """F5 adds a link and goes to it; F8 asks and takes the one in view out."""
    form = SiteForm.over(pit)
    app = Dashboard(form)  # type: ignore[arg-type]  # as above
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("f5")
        await pilot.pause()
        assert form.key_path == "link[1].url"
        assert "link[1].url is missing" in line(app, "fault")
        await type_in(pilot, "COM9")
        await pilot.press("down", "down", "down")
        await type_in(pilot, "-")
        assert form.draft.value("link[1].columns") == ["-"]
        await pilot.press("f8", "y")
        await pilot.pause()
        assert form.draft.links == 1
        assert form.draft.text.rstrip() == PIT.rstrip()


async def test_quick_keys_do_not_mix_up_their_lines(pit: Path) -> None:
    """Letters and arrows in one burst: each letter goes to the key that had the line when it was typed."""
    form = SiteForm.over(pit)
    app = Dashboard(form)  # type: ignore[arg-type]  # as above
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("x", "down", "1", "down", "2", "up", "3")
        await pilot.pause()
        assert form.draft.value("site.name") == "Heronx"
        assert (form.draft.value("site.latitude_deg"), form.draft.value("shaft.depth_m")) == (48.2013, 512.02)


async def test_help_lists_the_keys_of_the_form(pit: Path) -> None:
    """F1 opens the page of the form's own keys, escape goes back to the key that was typed in."""
    form = SiteForm.over(pit)
    app = Dashboard(form)  # type: ignore[arg-type]  # as above
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("down", "f1")
        await pilot.pause()
        shown = text_of(app)
        for words in ("F3        Save; asks before it writes over a file", "F5        Add a link"):
            assert words in shown
        await pilot.press("escape")
        await type_in(pilot, "7")
        assert form.draft.value("site.latitude_deg") == 48.207


async def test_rows_and_sections_can_be_clicked(pit: Path) -> None:
    """The mouse works as well: a section, then a key; the line keeps the keyboard."""
    form = SiteForm.over(pit)
    app = Dashboard(form)  # type: ignore[arg-type]  # as above
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.click(SectionList, offset=(3, 2))
        await pilot.click(KeyList, offset=(5, 1))
        await pilot.pause()
        assert form.key_path == "shaft.diameter_m"
        await type_in(pilot, "6")
        assert form.draft.value("shaft.diameter_m") == 6


async def test_proposed_form_comes_into_the_link_in_view(pit: Path) -> None:
    """What the port trial closes with is written into the link, its comment kept."""
    form = SiteForm.over(pit)
    app = Dashboard(form)  # type: ignore[arg-type]  # as above
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("f4")
        await pilot.pause()
        assert isinstance(app.screen, PortTrial)
        taken = LinkSettings(url="COM4", baud=4800, columns=("depth_m", "tilt_a_deg"), checksum="xor")
        app.screen.dismiss(taken)
        await pilot.pause()
        assert form.key_path == "link[0].url"
        assert app.screen.query_one(ValueInput).value == "COM4"
    assert 'url = "COM4"   # no instrument yet' in form.draft.text
    assert "baud = 4800" in form.draft.text


async def test_start_screen_opens_the_form_and_lists_what_was_saved(pit: Path) -> None:
    """From a bare start: a site under the cursor is edited with e, a new one is written and then listed."""
    app = Dashboard(StartScreen(pit.parent, log_suffix=".eastfall.jsonl", ports=list))
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("down", "down", "down", "e")
        await pilot.pause()
        assert "heron.toml" in line(app, "form-title")
        await pilot.press("escape", "down", "enter")
        await pilot.pause()
        assert "new site file" in line(app, "form-title")
        await type_in(pilot, "Kite")
        await pilot.press("down", "1", "down", "9", "ctrl+s", "enter")
        await pilot.pause()
        await pilot.press("escape")
        await pilot.pause()
        assert isinstance(app.screen, StartScreen)
        assert "kite.toml" in text_of(app)
        await pilot.press("enter")
    assert app.choice is not None
    assert app.choice.path == pit.with_name("kite.toml")


async def test_file_that_is_no_toml_is_told_and_not_opened(pit: Path) -> None:
    """A site file that cannot be shown as a form leaves the start screen as it is, with the reason."""
    pit.write_text("[site]\nlatitude_deg = = 3\n")
    app = Dashboard(StartScreen(pit.parent, log_suffix=".eastfall.jsonl"))
    async with app.run_test(size=(80, 24), notifications=True) as pilot:
        await pilot.press("down", "down", "down", "e")
        await pilot.pause()
        assert isinstance(app.screen, StartScreen)
        assert "not TOML" in text_of(app)


@pytest.mark.parametrize("size", [(80, 24), (120, 40), (40, 10)])
async def test_form_is_drawn_at_any_size(pit: Path, size: tuple[int, int]) -> None:
    """The line that is typed in and the keys stay on the screen, without colour too."""
    app = Dashboard(SiteForm.over(pit), no_colour=True)  # type: ignore[arg-type]  # as above
    async with app.run_test(size=size) as pilot:
        await pilot.pause()
        line_in = app.screen.query_one(ValueInput).region
        assert line_in.bottom <= size[1]
        assert app.screen.query_one(KeyLine).region.bottom <= size[1]


def test_name_of_a_file_is_checked_before_it_is_used(tmp_path: Path) -> None:
    """Empty names, missing folders and impossible names are refused in words; the ending is added."""
    assert free_name(tmp_path, " kestrel ") == tmp_path / "kestrel.toml"
    for name, says in (
        (" ", "name is needed"),
        ("no/such", "no such folder"),
        ("a\0b", "name is needed"),
        ("x" * 300, "no name of a file"),
    ):
        with pytest.raises(ValueError, match=says):
            free_name(tmp_path, name)


def test_every_key_of_the_site_file_is_on_one_page() -> None:
    """The pages hold every key once, beside the first page that gathers the required ones."""
    shown = [
        path.replace("[0]", "") for page in formpages.pages(SiteDraft(PIT, "x"))[1:] for path in page.paths
    ]
    assert sorted(shown) == sorted(f"{one.section}.{one.name}" for one in sitekeys.all_keys())


@pytest.mark.skipif(os.name != "posix", reason="pseudo-terminals")
def test_form_in_a_real_terminal_without_colour(pit: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """From a bare start at 80x24: no colour code is sent, a burst of keys lands where it was meant, ctrl+q asks."""
    monkeypatch.chdir(pit.parent)
    harness = runpy.run_path(str(Path(__file__).with_name("terminal_harness.py")))  # POSIX alone can load it
    with harness["Terminal"](harness["EASTFALL"], 80, 24, NO_COLOR="1") as terminal:
        terminal.wait("heron.toml")
        terminal.press("\x1b[B\x1b[B\x1b[Be")
        terminal.wait("no fault: this file can be used")
        # All at once, as over a slow line: two down, a letter, back, enter, a choice, up twice, two letters, one back.
        terminal.press("\x1b[B\x1b[B57\x7f\r\x1b[C\x1b[A\x1b[A12\x7f\x1b[A")
        terminal.wait("512.05")
        terminal.wait("48.201 ")
        terminal.wait("run.kind                  hung")
        terminal.press("\x11")
        terminal.wait("Leave without saving?")
        terminal.press("y")
        assert terminal.ended() == 0
        codes = b";".join(re.findall(rb"\x1b\[([0-9;]*)m", bytes(terminal.raw))).split(b";")
    # 39 and 49 are the terminal's own; 1, 2, 4, 7 are bold, dim, underlined, reversed.
    assert set(codes) <= {b"", b"0", b"1", b"2", b"4", b"7", b"39", b"49"}
    assert pit.read_text() == PIT
