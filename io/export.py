"""Stations in files for other programs: CSV for spreadsheets, JSON, and LAS 2.0 for well-log readers."""

import csv
import io as text_io
import json
from collections import Counter
from collections.abc import Callable, Iterable, Mapping, Sequence
from datetime import UTC
from pathlib import Path
from typing import Any

from eastfall.io.errors import OutputError
from eastfall.io.outputs import refuse_sources, write_text
from eastfall.io.reduce import Reduction
from eastfall.io.safetext import guarded, safe_json
from eastfall.io.tables import STATION_KEYS, reduce_table, station_row

LAS_NULL = -999.25
_LAS_CURVES = (
    ("ME", "measured_east_mm", "measured offset east"),
    ("MN", "measured_north_mm", "measured offset north"),
    ("XE", "expected_east_mm", "expected offset east"),
    ("XN", "expected_north_mm", "expected offset north"),
    ("RE", "residual_east_mm", "measured less expected east"),
    ("RN", "residual_north_mm", "measured less expected north"),
    ("UE", "u_east_mm", "standard uncertainty of the residual east"),
    ("UN", "u_north_mm", "standard uncertainty of the residual north"),
)


def table_csv(rows: Iterable[Mapping[str, Any]], names: Sequence[str]) -> str:
    """Return rows as CSV (RFC 4180): a header line, plain numbers, guarded text.

    Parameters
    ----------
    rows : iterable of mapping
        Cells by name; what is missing is left empty.
    names : sequence of str
        The columns, in order.
    """
    out = text_io.StringIO(newline="")
    writer = csv.writer(out)
    writer.writerow([guarded(one) for one in names])
    for row in rows:
        writer.writerow([guarded(row.get(one)) for one in names])
    return out.getvalue()


def stations_csv(reduction: Reduction) -> str:
    """Return the stations as CSV."""
    return table_csv([station_row(one) for one in reduction.result.stations], STATION_KEYS)


def table_json(table: object) -> str:
    """Return a table as JSON; what JSON has no word for (NaN) is refused, not written."""
    return safe_json(json.dumps(table, ensure_ascii=False, allow_nan=False, indent=1)) + "\n"


def reduction_json(reduction: Reduction) -> str:
    """Return what `reduce` prints as JSON."""
    return table_json(reduce_table(reduction))


def _las_text(value: object) -> str:
    """Return a value for a LAS header line: printable ASCII without the colon that ends it."""
    text = str(value).encode("ascii", "replace").decode()
    return "".join(one if one.isprintable() and one != ":" else " " for one in text).strip()


def _las_line(mnemonic: str, unit: str, value: object, description: str) -> str:
    return f"{mnemonic}.{unit} {_las_text(value)} : {_las_text(description)}"


def _by_pass(reduction: Reduction) -> dict[tuple[int, int], dict[float, Mapping[str, Any]]]:
    """Sort stations into passes, and repeated visits to one depth within a pass into columns of their own."""
    visits: Counter[tuple[int, float]] = Counter()
    found: dict[tuple[int, int], dict[float, Mapping[str, Any]]] = {}
    for one in reduction.result.stations:
        row = station_row(one)
        depth = row["depth_m"]
        if depth is not None:
            visit = visits[one.passing, depth]
            visits[one.passing, depth] += 1
            found.setdefault((one.passing, visit), {})[depth] = row
    return dict(sorted(found.items()))


def stations_las(reduction: Reduction) -> str:
    """Return the stations as LAS 2.0, indexed by depth.

    A log file has one row a depth, so each pass has curves of its own: `RE_P1` is the residual east of the first
    pass; a second visit to the same depth in one pass goes to `RE_P1V2`. Values are those of the CSV, to the digit.

    References
    ----------
    Canadian Well Logging Society, LAS version 2.0 (1992): sections ~V, ~W, ~C, ~A; STEP 0 where the spacing varies.
    """
    passes = _by_pass(reduction)
    depths = sorted({depth for rows in passes.values() for depth in rows})
    heads = [
        _las_line("DEPT", "M", "", "depth below the collar"),
        *(
            _las_line(f"{short}_{_pass_name(key)}", "MM", "", f"{words}, {_pass_words(rows)}")
            for key, rows in passes.items()
            for short, _, words in _LAS_CURVES
        ),
    ]
    lines = [_las_version(), _las_well(reduction, depths), "~CURVE INFORMATION", *heads, "~ASCII"]
    lines += [
        " ".join(_las_number(one) for one in [depth, *_cells(passes.values(), depth)]) for depth in depths
    ]
    return "\n".join(lines) + "\n"


def _pass_name(key: tuple[int, int]) -> str:
    number, visit = key
    return f"P{number + 1}" if visit == 0 else f"P{number + 1}V{visit + 1}"


def _pass_words(rows: Mapping[float, Mapping[str, Any]]) -> str:
    return f"pass {next(iter(rows.values()))['pass']}"


def _cells(passes: Iterable[Mapping[float, Mapping[str, Any]]], depth: float) -> list[float | None]:
    return [rows.get(depth, {}).get(key) for rows in passes for _, key, _ in _LAS_CURVES]


def _las_number(value: float | None) -> str:
    return f"{LAS_NULL}" if value is None else f"{value:.6f}"


def _las_version() -> str:
    return "\n".join(
        [
            "~VERSION INFORMATION",
            _las_line("VERS", "", "2.0", "CWLS LOG ASCII STANDARD - VERSION 2.0"),
            _las_line("WRAP", "", "NO", "ONE LINE PER DEPTH STEP"),
        ]
    )


def _las_well(reduction: Reduction, depths: list[float]) -> str:
    start, stop = (depths[0], depths[-1]) if depths else (0.0, 0.0)
    # The basic form of ISO 8601: a header line has no room for colons.
    started = f"{reduction.started_at.astimezone(UTC):%Y%m%dT%H%M%SZ}" if reduction.started_at else ""
    run = reduction.site.assumptions.run
    return "\n".join(
        [
            "~WELL INFORMATION",
            _las_line("STRT", "M", f"{start:.6f}", "FIRST DEPTH"),
            _las_line("STOP", "M", f"{stop:.6f}", "LAST DEPTH"),
            _las_line("STEP", "M", "0", "SPACING VARIES"),
            _las_line("NULL", "", LAS_NULL, "ABSENT VALUE"),
            _las_line("COMP", "", "", "COMPANY"),
            _las_line("WELL", "", reduction.site.assumptions.site.name, "SHAFT"),
            _las_line("FLD", "", "", "FIELD"),
            _las_line("LOC", "", "", "LOCATION"),
            _las_line("SRVC", "", "", "SERVICE COMPANY"),
            _las_line("DATE", "", started, "START OF THE RUN, UTC"),
            "~PARAMETER INFORMATION",
            _las_line("KIND", "", run.kind, "kind of run"),
            _las_line("REFL", "", run.reference, "line that offsets are measured from"),
            _las_line("SEAL", "", reduction.seal_state or "none", "state of the run log's seals"),
        ]
    )


FORMATS: dict[str, Callable[[Reduction], str]] = {
    ".csv": stations_csv,
    ".json": reduction_json,
    ".las": stations_las,
}


def export(reduction: Reduction, path: Path, *, force: bool = False) -> None:
    """Write a reduction to a file; the suffix picks the format.

    Parameters
    ----------
    reduction : Reduction
        What to write.
    path : Path
        Ends in .csv, .json or .las.
    force : bool
        Replace a file that stands there.

    Raises
    ------
    OutputError
        The suffix is none of these, something stands there, it is the run itself, or the file cannot be written.
    """
    make = FORMATS.get(path.suffix.lower())
    if make is None:
        raise OutputError(f"{path}: ends in {path.suffix!r}; expected one of {', '.join(FORMATS)}")
    refuse_sources(path, reduction.path, Path(reduction.site.path))
    write_text(path, make(reduction), force=force)
