"""The report on a recording: one self-contained HTML file for paper, or Markdown for the terminal.

What it says is `reportview`, what it draws `figures`, how it looks `report.html`.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from importlib.metadata import version
from pathlib import Path
from typing import Any

import numpy as np

from eastfall.io import reportfindings, reportview
from eastfall.io.compare import Comparison, in_words
from eastfall.io.errors import OutputError
from eastfall.io.outputs import refuse_existing, refuse_sources, write_text
from eastfall.io.prediction import REFERENCE_LINES
from eastfall.io.reduce import Reduction
from eastfall.io.reportview import Table
from eastfall.io.safetext import safe
from eastfall.io.sources import formulas
from eastfall.physics.budget import COVERAGE_FACTOR

_MARKDOWN_STATIONS = 60
_SUFFIXES = (".html", ".htm")
_DIFFERENCE = ("depth", "east", "north", "u_east", "u_north")


@dataclass(frozen=True, slots=True, kw_only=True)
class Compared:
    """A comparison with another survey, as `compare` puts it for the report."""

    words: str
    figure: str
    """SVG."""
    table: Table


def compared(comparison: Comparison) -> Compared:
    """Return a comparison ready for the report."""
    from eastfall.io import figures  # noqa: PLC0415 - matplotlib is heavy, and only for reports

    rows = comparison.rows
    columns = {name: np.array([getattr(one, name) for one in rows]) for name in _DIFFERENCE}
    table = Table(
        heads=("depth m", "first E", "N", "second E", "N", "difference E", "N", "U E", "U N", "moved"),
        rows=tuple(
            (
                f"{one.depth:.2f}",
                *(
                    reportview.mm(x)
                    for x in (one.first_east, one.first_north, one.second_east, one.second_north)
                ),
                *(reportview.mm(x) for x in (one.east, one.north)),
                *(reportview.plain_mm(COVERAGE_FACTOR * x) for x in (one.u_east, one.u_north)),
                one.moved,
            )
            for one in rows
        ),
    )
    words = [
        f"First: {safe(comparison.first, 200)}. Second: {safe(comparison.second, 200)}.",
        in_words(comparison),
        *(f"Note: {one}." for one in comparison.notes),
    ]
    return Compared(words=" ".join(words), figure=figures.difference_figure(**columns), table=table)


def write_report(
    reduction: Reduction,
    out: Path,
    *,
    compared: Compared | None = None,
    made_at: datetime | None = None,
    force: bool = False,
) -> None:
    """Write the report as one HTML file that needs nothing else.

    Parameters
    ----------
    reduction : Reduction
        What to report.
    out : Path
        The file; must not exist unless `force` is given.
    compared : Compared, optional
        A comparison to include.
    made_at : datetime, optional
        Stated as the time of making; now by default.
    force : bool
        Replace a file that stands there.

    Raises
    ------
    OutputError
        The name does not end in .html, something stands there, it is the run itself, or the file cannot be written.
    """
    if out.suffix.lower() not in _SUFFIXES:
        raise OutputError(f"{out}: ends in {out.suffix!r}; expected {' or '.join(_SUFFIXES)}")
    refuse_sources(out, reduction.path, Path(reduction.site.path))
    if not force:
        refuse_existing(out)  # before the figures are drawn
    write_text(out, report_html(reduction, compared=compared, made_at=made_at), force=force)


def report_html(
    reduction: Reduction, *, compared: Compared | None = None, made_at: datetime | None = None
) -> str:
    """Return the report as HTML; see `write_report`."""
    from jinja2 import Environment, FileSystemLoader, StrictUndefined  # noqa: PLC0415 - heavy, and only for reports

    environment = Environment(
        loader=FileSystemLoader(Path(__file__).parent), autoescape=True, undefined=StrictUndefined
    )
    environment.filters["css"] = _css_text
    run = reduction.site.assumptions.run
    made = (made_at or datetime.now(UTC)).astimezone(UTC)
    view = {**reportview.view(reduction), **reportfindings.view(reduction)}
    return environment.get_template("report.html").render(
        v=view,
        verdict="undecided" if reduction.seal_state == "changed" else reduction.verdict or "",
        kind=run.kind,
        reference=REFERENCE_LINES[run.reference],
        figures=_figures(reduction),
        formulas=formulas(run.kind),
        comparison=compared,
        made=made.strftime("%Y-%m-%d %H:%M UTC"),
        version=version("eastfall"),
        footer=f"{view['title']} · {reduction.path.name}",
    )


def _css_text(text: str) -> str:
    """Return text for a CSS string: everything but plain letters, digits and blanks as an escape."""
    from markupsafe import Markup  # noqa: PLC0415 - comes with jinja2

    plain = (
        one if one.isascii() and (one.isalnum() or one in " .-_") else f"\\{ord(one):x} " for one in text
    )
    return Markup("".join(plain))  # noqa: S704 - nothing but letters, digits, blanks, .-_ and escapes is left


def _figures(reduction: Reduction) -> dict[str, str]:
    stations = reduction.result.stations
    if not stations:
        return {}
    from eastfall.io import figures  # noqa: PLC0415 - matplotlib is heavy, and only for reports

    place = "residual" if reduction.kind == "guided" else "measured"
    return {
        "residual": figures.residual_figure(stations),
        "offsets": figures.offsets_figure(stations),
        "plan": figures.plan_figure(stations, reduction.site.assumptions.shaft, place=place),
    }


def report_text(reduction: Reduction) -> str:
    """Return the report as Markdown, for a terminal or a mail: everything but figures, formulas and defaults."""
    view = {**reportview.view(reduction), **reportfindings.view(reduction)}
    run = reduction.site.assumptions.run
    parts = [
        f"# {_inert(view['title'])}",
        f"**{_inert(view['answer'])}**",
        *(f"Note: {_inert(one)}" for one in view["remarks"]),
        "\n".join(f"- {one}" for one in view["cautions"]),
        _section("The run", _facts(view["facts"])),
        _section("Instrument and calibration", _facts(view["instrument"])),
        _section("Environment assumed", _facts(view["environment"])),
        _section("Stations (mm)", _markdown(view["stations"], most=_MARKDOWN_STATIONS)),
        _section("Closure", "\n\n".join(one for one in (view["closure"], view["rest_point"]) if one)),
        *(
            _section(title, _markdown(view[name]))
            for title, name in (
                ("Best estimate (mm)", "best"),
                ("Lean and clearance", "checks"),
                ("What would decide (mm)", "undecided"),
            )
            if view[name].rows
        ),
        *([_section("Two faces", view["faces"])] if view["faces"] else []),
        _section("Alarms", _markdown(view["alarms"])),
        _section("Notes, acknowledgements, settings changed", _markdown(view["people"])),
        _section("Uncertainty budget", _markdown(view["budget"])),
        _section("Not as recorded", _markdown(view["differences"])),
        _section("Reference line", f"Offsets are measured from {REFERENCE_LINES[run.reference]}."),
        _section("The record", _facts(view["record"])),
    ]
    return "\n\n".join(one for one in parts if one) + "\n"


def _section(title: str, body: str) -> str:
    return f"## {title}\n\n{body}" if body else f"## {title}\n\nnone"


def _inert(text: str) -> str:
    """Return text that Markdown takes as it stands."""
    return "".join(f"\\{one}" if one in "\\`*_|<>#[]" else one for one in text)


def _facts(rows: Sequence[tuple[str, str]]) -> str:
    return "\n".join(f"- {name}: {_inert(value)}" for name, value in rows)


def _markdown(table: Table, most: int | None = None) -> str:
    if not table.rows:
        return ""
    rows: list[Any] = [[_inert(cell) for cell in row] for row in table.rows[:most]]
    widths = [max(len(head), *(len(row[at]) for row in rows)) for at, head in enumerate(table.heads)]
    lines = [
        "| " + " | ".join(cell.ljust(width) for cell, width in zip(row, widths, strict=True)) + " |"
        for row in [list(table.heads), ["-" * width for width in widths], *rows]
    ]
    left_out = len(table.rows) - len(rows)
    return "\n".join(lines) + (f"\n\n{left_out} more rows are in the full report." if left_out else "")
