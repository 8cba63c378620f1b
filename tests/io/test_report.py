"""The report: everything a reader needs is in it, it needs nothing else, and hostile text comes out inert."""

import html.parser
import os
import re
import subprocess
import sys
from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path

import pytest
from record_help import SITE_TEXT, site
from results_help import RESULT, SOUND, STATIONS, numbered, reduction, station

from eastfall.io.arrivals import RunEvent
from eastfall.io.compare import compare_runs
from eastfall.io.errors import OutputError
from eastfall.io.reduce import reduce_file
from eastfall.io.report import compared, report_html, report_text, write_report
from eastfall.io.reportview import answer, toward
from eastfall.io.whatif import differences
from eastfall.physics.findings import Result

LOGS = sorted((Path(__file__).parents[2] / "replay_logs").glob("*.eastfall.jsonl"))
MADE = datetime(2026, 2, 1, tzinfo=UTC)
EMPTY = Result(frames=0, stations=(), alarms=(), closure=None, rest_point=None)
VOID = frozenset({"meta", "col", "br", "img", "link", "input", "hr"})


@pytest.fixture(scope="module")
def page_text() -> str:
    """Return the page of the hand-made reduction."""
    return report_html(reduction(), made_at=MADE)


class _Page(html.parser.HTMLParser):
    """Collects text, elements and attributes, and checks that elements nest."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.words: list[str] = []
        self.tags: list[str] = []
        self.links: list[tuple[str, str]] = []
        self.ids: list[str] = []
        self._open: list[str] = []
        self.feed(text)
        assert self._open == []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append(tag)
        self.links += [(k, v or "") for k, v in attrs if k.endswith(("href", "src")) or k.startswith("on")]
        self.ids += [v or "" for k, v in attrs if k == "id"]
        if tag not in VOID:
            self._open.append(tag)

    def handle_endtag(self, tag: str) -> None:
        assert self._open.pop() == tag

    def handle_data(self, data: str) -> None:
        self.words.append(data)

    @property
    def text(self) -> str:
        return re.sub(r"\s+", " ", " ".join(self.words))


def test_every_section_is_there_with_its_numbers(page_text: str) -> None:
    """The printed page says answer, place, instrument, stations, closure, alarms and who, budget, formulas, seal."""
    page = _Page(page_text)
    for words in (
        "OVER the action limit at 2 of 5 stations",
        "26.4 mm toward 81° at 30.5 m",
        "aid to judgement, not a safety device",
        "Nobody below a suspended or dropped load",
        "licensed surveyor's practice come first",
        "electronics are allowed in the atmosphere",
        "latitude 57.30000°",
        "the straight vertical at the collar",
        "no date given",
        "the rest, -0.50 and +0.00 mm, is misclosure",
        "active → acknowledged",
        "R. Vane",
        "water at 12 m",
        "tilt, zero",
        "instrument.u_tilt_deg",
        "Hofmann-Wellenhof",
        "ε = 2 ω v cos φ / g",
        SOUND.seal,
        "measured by",
    ):
        assert words in page.text, words
    assert page.tags.count("svg") == 3
    assert "default" in page.text
    assert "given" in page.text


def test_the_page_needs_nothing_from_outside_and_runs_nothing(page_text: str) -> None:
    """No address but fragments of the page itself, no script, no event attribute, and no id twice."""
    page = _Page(page_text)
    assert {k: v for k, v in page.links if not v.startswith("#")} == {}
    assert not {"script", "img", "link", "iframe", "object"} & set(page.tags)
    assert len(page.ids) == len(set(page.ids))
    addresses = set(re.findall(r"https?://[^\s\"'<>]+", page_text))
    assert addresses <= {"http://www.w3.org/2000/svg", "http://www.w3.org/1999/xlink"}  # names, never fetched
    targets = {v[1:] for _, v in page.links} | set(re.findall(r"url\(#([^)]+)\)", page_text))
    assert targets <= set(page.ids)


def test_text_in_figures_stays_text(page_text: str) -> None:
    """Axis words are text elements that can be searched, not outlines."""
    page = _Page(page_text)
    assert "measured less expected, east [mm]" in page.text
    assert "text" in page.tags


@pytest.mark.parametrize(
    "nasty",
    [
        "<script>alert(1)</script>",
        '"><img src=x onerror=alert(1)>',
        "\x1b[2J\x07 \u202egpj.exe",
        '"; } body { display: none } @import url(//x) ; a { b: "',
        "$\\frac{1}{2}$ {{ 7*7 }} {% raw %}",
        "</style><b>",
    ],
)
def test_hostile_names_notes_and_file_names_come_out_inert(nasty: str) -> None:
    """Markup, style, template and control characters in what people or instruments wrote stay words."""
    one = reduction(
        EMPTY,
        events=(RunEvent(time=1.0, name="note", fields={"text": nasty, "who": nasty}),),
        path=Path("x") / nasty.replace("/", "_"),
        faults={nasty: 1},
    )
    named = replace(one.site.assumptions.site, name=nasty)
    one = replace(one, site=replace(one.site, assumptions=replace(one.site.assumptions, site=named)))
    text = report_html(one, made_at=MADE)
    plain = _Page(report_html(reduction(EMPTY), made_at=MADE))
    page = _Page(text)
    assert set(page.tags) == set(plain.tags)
    assert page.tags.count("style") == plain.tags.count("style")
    assert all(c.isprintable() or c == "\n" for c in text)
    assert "49" not in re.sub(r"[\d.]*\d[\d.]*\.\d+", "", page.text) or "{{ 7*7 }}" in page.text
    style = text[text.index("<style>") : text.index("</style>")]
    assert style.count("{") == style.count("}")
    assert "@import" not in style
    markdown = report_text(one)
    assert all(c.isprintable() or c == "\n" for c in markdown)
    assert "<script" not in markdown.replace("\\<", "")


@pytest.mark.parametrize("log", LOGS, ids=lambda one: one.name.split("_")[0])
def test_each_kind_of_demo_run_is_reported(log: Path, tmp_path: Path) -> None:
    """Guided, hung and drop runs each give a whole page with the seal of their log."""
    run = reduce_file(log)
    out = tmp_path / "report.html"
    write_report(run, out)
    page = _Page(out.read_text(encoding="utf-8"))
    assert run.verification is not None
    assert run.verification.seal in page.text
    assert "WITHIN the action limit" in page.text
    with pytest.raises(OutputError, match="stands already"):
        write_report(run, out)


def test_a_report_is_html_and_never_written_over_its_own_run(tmp_path: Path) -> None:
    """Another suffix would lie about what is in the file; the run is refused under whatever name, forced or not."""
    log = tmp_path / "run.html"
    log.write_bytes(LOGS[0].read_bytes())
    (tmp_path / "link.html").symlink_to(log)
    run = reduce_file(log)
    for name in ("run.html", "link.html"):
        with pytest.raises(OutputError, match="is what this is made from"):
            write_report(run, tmp_path / name, force=True)
    for name in ("report.pdf", "report"):
        with pytest.raises(OutputError, match=r"expected \.html or \.htm"):
            write_report(run, tmp_path / name)
    assert log.read_bytes() == LOGS[0].read_bytes()
    assert sorted(one.name for one in tmp_path.iterdir()) == ["link.html", "run.html"]


def test_a_changed_record_and_other_settings_stand_at_the_top() -> None:
    """A log that is not intact, and settings that are not the recorded ones, are said beside the answer and listed."""
    other = site(SITE_TEXT.replace("57.30", "45.0"))
    broken = replace(SOUND, state="changed", reason="line 7 is not as it was written", sealed=False)
    page = _Page(
        report_html(reduction(verification=broken, differences=differences(site(), other)), made_at=MADE)
    )
    top = page.text[: page.text.index("The run")]
    assert "The record is changed: line 7 is not as it was written" in top
    assert "other settings than the run was recorded with" in top
    assert "site.latitude_deg 57.3 45" in page.text


def test_what_a_record_lacks_stands_at_the_top() -> None:
    """Lines that could not be written are told beside the answer, with their number; nonsense in their place is not."""
    told = [RunEvent(time=1.0, name="lost", fields={"count": one}) for one in (500, 7, -3, "x", None)]
    page = _Page(report_html(reduction(events=tuple(told)), made_at=MADE))
    assert "The record lacks 507 lines or events" in page.text[: page.text.index("The run")]
    assert "lacks" not in _Page(report_html(reduction(), made_at=MADE)).text


def test_a_run_without_stations_is_still_a_report() -> None:
    """Nothing measured: the page says so, draws nothing, and fails nowhere; a capture says that it has no seals."""
    page = _Page(report_html(reduction(EMPTY, verification=None, started_at=None), made_at=MADE))
    assert "No station was closed" in page.text
    assert "nothing shows whether it was changed" in page.text
    assert "svg" not in page.tags
    assert "No station was closed" in report_text(reduction(EMPTY))


def test_the_answer_is_one_line_for_each_verdict() -> None:
    """Within, undecided and over each say how many stations, how far, where to and at what depth."""
    within = replace(RESULT, stations=numbered(station(10.0, 0.0, -0.016), station(20.0, 0.001)))
    undecided = replace(RESULT, stations=numbered(station(10.0, 0.024, verdict="undecided")))
    assert answer(reduction(within)) == (
        "WITHIN the action limit at all 2 stations; 1 beyond the warning limit; "
        "farthest out 16.0 mm toward 180° at 10.0 m (down; action limit 25.0 mm there)."
    )
    assert answer(reduction(undecided)).startswith(
        "UNDECIDED at 1 of 1 station, none over; farthest out 24.0 mm"
    )
    assert answer(reduction()).startswith("OVER")
    assert [toward(*one) for one in ((0.0, 1.0), (1.0, 0.0), (-1.0, 0.0))] == ["0°", "90°", "270°"]


def test_the_same_findings_make_the_same_page(page_text: str) -> None:
    """Made twice with the same time of making, the page is the same to the byte."""
    assert report_html(reduction(), made_at=MADE) == page_text


def test_a_comparison_is_part_of_the_report_when_asked() -> None:
    """Differences come with their words, figure and table."""
    comparison = compare_runs(
        reduction(), reduction(replace(RESULT, stations=numbered(station(10.0, 0.02), STATIONS[2])))
    )
    page = _Page(report_html(reduction(), compared=compared(comparison), made_at=MADE))
    assert "Second less first, with the band" in page.text
    assert page.tags.count("svg") == 4
    assert "+17.00" in page.text


def test_markdown_says_the_same_as_the_page() -> None:
    """The text for the terminal has the answer, the tables in columns, who acknowledged, and the seal."""
    text = report_text(reduction())
    for words in (
        "# Kestrel Hollow No. 2",
        "**OVER the action limit",
        "| 30.50 ",
        "R. Vane",
        SOUND.seal,
        "misclosure",
    ):
        assert words in text
    rows = [line for line in text.splitlines() if line.startswith("| 20.00")]
    assert len(rows) == 2
    assert len({len(line) for line in rows}) == 1


def test_a_report_says_nothing_of_a_home_that_cannot_be_written(tmp_path: Path) -> None:
    """The figures' library would tell at length that it keeps its list of fonts elsewhere."""
    file = tmp_path / "file"
    file.touch()
    kept = {name: value for name, value in os.environ.items() if not name.startswith(("XDG_", "MPL"))}
    outcome = subprocess.run(
        [sys.executable, "-c", "import eastfall.io.figures"],
        env={**kept, "HOME": str(file / "x"), "TMPDIR": str(tmp_path)},
        capture_output=True,
        check=True,
        timeout=60,
    )
    assert outcome.stderr == b""
