"""A terminal with plain letters only gets plain letters everywhere: screens, dialogs, help, tables, printed answers."""

import json
import os
import shutil
import subprocess
import sys
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from screen_harness import AskedLive, built, settled, shown, text_of
from textual.widgets import Input

from eastfall.io.emulator import demo_site
from eastfall.physics.findings import AlarmView
from eastfall.tui.app import Dashboard
from eastfall.tui.glyphs import GLYPHS
from eastfall.tui.letters import in_ascii, is_plain, speaks_unicode
from eastfall.tui.plainfilter import stand_in
from eastfall.tui.screens.explorer import ExplorerScreen
from eastfall.tui.screens.planner import PlannerScreen
from eastfall.tui.screens.porttrial import PortTrial
from eastfall.tui.screens.shelf import ShelfScreen
from eastfall.tui.screens.siteform import SiteForm
from eastfall.tui.screens.start import StartScreen
from eastfall.tui.session import Session
from eastfall.tui.store import Snapshot

pytestmark = pytest.mark.invariant

NAME = "Malmö ″Łódź″ 竖井 №3 – µ"
SAMPLES = Path(__file__).parents[2] / "replay_logs"
SUFFIX = ".eastfall.jsonl"


# Letters.


@pytest.mark.parametrize(
    ("words", "plain"),
    [
        (
            "residual 4.4 ± 0.6 mm toward 345°, limit 30.0 mm",
            "residual 4.4 +- 0.6 mm toward 345 deg, limit 30.0 mm",
        ),
        ("55.0 °C, 5°/s, 53°33′, 1″", "55.0 C, 5 deg/s, 53 deg 33', 1\""),
        ("74 µrad at 9.81 m/s² in 2670 kg/m³", "74 urad at 9.81 m/s2 in 2670 kg/m3"),
        ("in units of √L: 3/4 κL², ω cos φ", "in units of sqrt L: 3/4 kappaL2, omega cos phi"),
        ("3 – 5 … “x” · ≤ 4 ½", '3 - 5 ... "x" - <= 4 1/2'),
        ("géodésique, Łódź, Ærø, Straße", "geodesique, Lodz, AEro, Strasse"),
        ("↑ ↓ ← →", "up down left right"),
        ("竖井", "??"),
        ("plain", "plain"),
    ],
)
def test_letters_are_spelled_as_a_reader_would(words: str, plain: str) -> None:
    """Signs in words, accents left off, a question mark for what has no letters here."""
    assert in_ascii(words) == plain.replace("AE", "Ae")


def test_whatever_comes_in_is_ascii_that_comes_out() -> None:
    """Every character there is, also a lone surrogate, becomes ASCII."""
    for code in range(0x20000):
        assert in_ascii(chr(code)).isascii(), hex(code)


@pytest.mark.parametrize("letter", "a±é─│┌▄⣿竖●")
def test_stand_in_is_as_wide_as_the_letter(letter: str) -> None:
    """Nothing on a line moves when a letter is replaced; a wide one is two."""
    assert stand_in(letter).isascii()
    assert len(stand_in(letter)) == (2 if letter == "竖" else 1)
    assert stand_in("\u0301") == ""


@pytest.mark.parametrize(
    ("environment", "encoding", "plain"),
    [
        ({}, "utf-8", False),
        ({"LANG": "nb_NO.UTF-8", "TERM": "linux"}, "utf-8", False),
        ({}, "ascii", True),
        ({}, "iso-8859-1", True),
        ({}, None, True),
        ({"LC_ALL": "C"}, "utf-8", True),
        ({"LC_ALL": "C", "EASTFALL_GLYPHS": "braille"}, "utf-8", False),
        ({"EASTFALL_GLYPHS": "braille"}, "ascii", True),
        ({"EASTFALL_GLYPHS": "ascii"}, "utf-8", True),
        ({"TERM": "dumb"}, "utf-8", True),
        ({"TERM": "vt220"}, "utf-8", True),
        ({"LANG": "C", "LC_CTYPE": "C.UTF-8"}, "utf-8", True),
        ({"LC_CTYPE": "C.UTF-8"}, "utf-8", False),
        ({"LC_ALL": "", "LC_CTYPE": "en_GB.UTF-8", "LANG": "C"}, "utf-8", False),
    ],
)
def test_plain_letters_follow_locale_terminal_and_encoding(
    environment: dict[str, str], encoding: str | None, plain: bool
) -> None:
    """Python writes UTF-8 in a C locale too (PEP 538, 540): what the person set counts; no wish beats the encoding."""
    assert is_plain(environment, encoding) is plain


@pytest.mark.parametrize("named", ["POSIX", "de_DE", "de_DE@euro", "ja_JP.eucJP", "ru_RU.KOI8-R"])
def test_locales_without_unicode_are_known_by_name(named: str) -> None:
    """Also where the machine does not have them, so that Python fell back to C."""
    assert not speaks_unicode({"LANG": named, "LC_CTYPE": "C.UTF-8"})


# Screens.


async def plain_on(app: Dashboard, size: tuple[int, int], *ways: str) -> set[str]:
    """Open what keys lead to, one way after the other from the first screen, and return all that was seen."""
    seen = set()
    async with app.run_test(size=size, notifications=True) as pilot:
        for way in ("", *ways):
            text = await settled(pilot, *way.split())
            assert {one for one in text if not one.isascii()} == set(), f"{way}:\n{text}"
            seen.add(text)
            for _ in range(5):
                if len(app.screen_stack) > 2:
                    await pilot.press("escape")
    return seen


_WAYS = (
    *(
        "question_mark",
        "s",
        "s enter",
        "l",
        "l z",
        "n",
        "j",
        "q",
        "d",
        "f2",
        "f2 down down down down down enter",
    ),
    *("u", "v", "v", "r", "w", "n é ö enter", "c"),
)


@pytest.mark.parametrize("size", [(80, 24), (120, 40)])
async def test_run_and_its_pages_have_no_letter_beyond_ascii(
    session: Callable[..., Session],
    snapshot: Callable[..., Snapshot],
    alarm: Callable[..., AlarmView],
    size: tuple[int, int],
) -> None:
    """Whatever is opened over a run, the characters on the screen are ASCII; each way leads somewhere else."""
    app = built(replace(session(), title=NAME), AskedLive(), glyphs=GLYPHS["ascii"])
    seen = set()
    async with app.run_test(size=size, notifications=True) as pilot:
        await shown(pilot, snapshot(alarms=(alarm(message=f"{NAME}: 5°"),)))
        for way in ("", *_WAYS):
            text = await settled(pilot, *way.split())
            assert {one for one in text if not one.isascii()} == set(), f"{way}:\n{text}"
            seen.add(text)
            while app.screen is not app.first:
                await pilot.press("escape")
    assert len(seen) >= len(_WAYS) - 1  # a note that was taken leads back to the picture as it was


async def test_screens_before_a_run_have_no_letter_beyond_ascii(tmp_path: Path) -> None:
    """Start, form with its dialogs, port trial, shelf and comparison, over names of every script."""
    for number in range(12):
        shutil.copy(SAMPLES / "guided.toml", tmp_path / f"ünï {number}.toml")
    site = tmp_path / "ünï 0.toml"
    site.write_text(site.read_text().replace("Sandrigg East", NAME), encoding="utf-8")
    look: dict[str, Any] = {"glyphs": GLYPHS["ascii"]}
    start = Dashboard(StartScreen(tmp_path, log_suffix=SUFFIX, ports=lambda: [f"/dev/{NAME}"]), **look)
    assert len(await plain_on(start, (80, 24), "f1", "f2", "end enter")) == 4
    form = Dashboard(SiteForm.over(site), **look)  # type: ignore[arg-type]  # as elsewhere
    ways = ("f1", "pagedown down down down down down down down enter", "f9", "pageup é ö", "f3", "f4")
    assert len(await plain_on(form, (80, 24), *ways)) == len(ways) + 1
    trial = Dashboard(PortTrial(ports=lambda: [f"/dev/{NAME}"]), **look)  # type: ignore[arg-type]  # as above
    assert len(await plain_on(trial, (80, 24), "down", "é", "f1")) == 4
    shelf = Dashboard(ShelfScreen((SAMPLES,)), **look)  # type: ignore[arg-type]  # as above
    assert len(await plain_on(shelf, (80, 24), "f1", "o", "r", "x", "c")) == 6


@pytest.mark.parametrize("size", [(80, 24), (120, 40)])
async def test_predictions_have_no_letter_beyond_ascii(size: tuple[int, int]) -> None:
    """Explorer with B and budget, planner: curves, tables, warnings, dialogs."""
    assumptions = demo_site("drop").assumptions
    look: dict[str, Any] = {"glyphs": GLYPHS["ascii"]}
    explorer = Dashboard(ExplorerScreen(assumptions, name=NAME), **look)  # type: ignore[arg-type]  # as above
    assert len(await plain_on(explorer, size, "f1", "k down down right", "v", "u", "d", "p")) == 7
    planner = Dashboard(PlannerScreen(assumptions, name=NAME), **look)  # type: ignore[arg-type]  # as above
    assert len(await plain_on(planner, size, "f1", "g", "w")) == 4


async def test_what_is_typed_beyond_ascii_is_kept_as_it_was_typed(
    session: Callable[..., Session], snapshot: Callable[..., Snapshot]
) -> None:
    """The screen shows plain letters; the note goes into the record with its own."""
    feed = AskedLive()
    app = built(session(), feed, glyphs=GLYPHS["ascii"])
    async with app.run_test(size=(80, 24)) as pilot:
        await shown(pilot, snapshot())
        await pilot.press("n")
        app.screen.query_one(Input).value = "Förder 竖"
        await pilot.pause()
        assert "Forder ?" in text_of(app)
        await pilot.press("enter")
    assert feed.calls == [("note", "Förder 竖", "Ada")]


# The command line.

PROGRAM = str(Path(sys.executable).parent / "eastfall")
BARE = {"LC_ALL": "C", "PYTHONUTF8": "0", "PYTHONIOENCODING": "ascii", "TERM": "dumb", "LANG": ""}


def told(folder: Path, environment: dict[str, str], *words: str) -> tuple[int, bytes, bytes]:
    """Run the program and return status and both streams."""
    done = subprocess.run(
        [PROGRAM, *words],
        cwd=folder,
        env={**os.environ, **environment},
        capture_output=True,
        stdin=subprocess.DEVNULL,
        timeout=60,
        check=False,
    )
    return done.returncode, done.stdout, done.stderr


_VERBS = (
    "--help",
    "expect --help",
    "expect SITE --every 100",
    "expect SITE --every 100 --budget",
    "expect SITE --every 100 --line --apart 3 --decay 300",
    "expect SITE --every 100 --format json",
    "expect SITE --every 100 --format csv",
    "replay LOG --plain",
    "reduce LOG",
    "reduce LOG --format json",
    "reduce .",
    "report LOG",
    "verify LOG",
    "compare LOG",
    "runs .",
    "runs . --format csv",
    "runs . --format json",
    "selfcheck",
    "selfcheck --format csv",
    "selfcheck --format json",
    "ports",
    "expect nowhere",
    "",
)


@pytest.fixture(scope="module")
def bare_place(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Record a short run of a site whose name needs letters beyond ASCII."""
    folder = tmp_path_factory.mktemp("bare")
    text = (SAMPLES / "guided.toml").read_text().replace("Sandrigg East", NAME)
    (folder / "site.toml").write_text(text, encoding="utf-8")
    status, out, err = told(
        folder,
        BARE,
        *["record", "site.toml", "--link", "emulate:?rate=50&pace=8", "--for", "2", "--into", "."],
    )
    assert status == 0, err
    (folder / os.fsdecode(out.strip())).rename(folder / f"run{SUFFIX}")
    return folder


@pytest.mark.parametrize("words", _VERBS)
def test_no_verb_writes_beyond_ascii_where_it_cannot_be_read(bare_place: Path, words: str) -> None:
    """With a C locale and ASCII streams every verb answers, in ASCII, and none breaks off."""
    named = words.replace("SITE", "site.toml").replace("LOG", f"run{SUFFIX}").split()
    status, out, err = told(bare_place, BARE, *named)
    assert status in {0, 1, 2}
    assert out.isascii()
    assert err.isascii()
    assert b"Traceback" not in err
    assert out or status == 2
    if "json" in words:
        found = json.loads(out)
        assert found.get("site", NAME) == NAME
        assert all(one["site"] == NAME for one in found.get("runs", ()))


@pytest.mark.parametrize("environment", [{"LC_ALL": "C"}, {"LANG": "C", "LC_ALL": ""}, {"TERM": "vt100"}])
def test_answers_are_plain_by_locale_or_terminal_alone(bare_place: Path, environment: dict[str, str]) -> None:
    """Python's own UTF-8 in a C locale does not matter; with a locale of Unicode the same line has its signs."""
    words = ("replay", f"run{SUFFIX}", "--plain")
    _, out, _ = told(bare_place, environment, *words)
    assert out.isascii()
    assert b" +- " in out
    _, out, _ = told(bare_place, {}, *words)
    assert " ± " in out.decode()


def test_paths_are_written_to_the_last_byte(bare_place: Path) -> None:
    """A shell can take up a file whose name no encoding at hand can write."""
    name = os.fsdecode("rü\udcff.csv".encode("utf-8", "surrogateescape"))
    for environment in (BARE, {}):
        status, out, err = told(bare_place, environment, "export", f"run{SUFFIX}", name, "--force")
        assert status == 0, err
        assert out == os.fsencode(name) + b"\n"
