"""Exports: what another program reads back is what was found, to the digit."""

import csv
import io
import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import lasio
import numpy as np
import pytest
from results_help import RESULT, STATIONS, numbered, reduction, station

from eastfall.io.errors import OutputError
from eastfall.io.export import export, guarded, reduction_json, stations_csv, stations_las, table_csv
from eastfall.io.outputs import write_text
from eastfall.io.tables import STATION_KEYS, reduce_table, station_row
from eastfall.physics.findings import Result

EMPTY = Result(frames=0, stations=(), alarms=(), closure=None, rest_point=None)


def _las(text: str) -> Any:
    return lasio.read(io.StringIO(text))


@pytest.mark.independent
def test_lasio_reads_every_value_back_to_the_digit() -> None:
    """Each curve at each depth equals the JSON value exactly; what a pass does not have is absent."""
    las = _las(stations_las(reduction()))
    assert las.version["VERS"].value == 2.0
    assert las.well["WELL"].value == "Kestrel Hollow No. 2"
    assert (las.well["STRT"].value, las.well["STOP"].value, las.well["STEP"].value) == (10.0, 30.5, 0)
    assert las.well["NULL"].value == -999.25
    assert las.index.tolist() == [10.0, 20.0, 30.5]
    assert las.curves["RE_P1"].unit == "MM"
    seen = 0
    for one in STATIONS:
        row = station_row(one)
        at = las.index.tolist().index(one.depth)
        for short, key in (("ME", "measured_east_mm"), ("RN", "residual_north_mm"), ("UN", "u_north_mm")):
            value = las[f"{short}_P{one.passing + 1}"][at]
            assert value == row[key] or (row[key] is None and np.isnan(value)), (one, key)
            seen += row[key] is not None
    assert seen == 14  # fifteen less the one that is absent
    assert np.isnan(las["RE_P2"][0])


@pytest.mark.independent
def test_lasio_reads_the_start_of_the_run_whole() -> None:
    """A colon ends a header's value: the start stands in the basic form of ISO 8601, which has none."""
    assert _las(stations_las(reduction())).well["DATE"].value == "20260114T083005Z"


@pytest.mark.independent
def test_las_keeps_repeated_visits_apart_and_lasio_reads_an_empty_run() -> None:
    """Two stations at one depth in one pass have curves of their own; no stations is an empty log, not an error."""
    twice = replace(RESULT, stations=numbered(station(5.0, 0.001), station(5.0, 0.002)))
    las = _las(stations_las(reduction(twice)))
    assert (las["RE_P1"][0], las["RE_P1V2"][0]) == (1.0, 2.0)
    assert len(_las(stations_las(reduction(EMPTY))).well) >= 4


def test_las_headers_cannot_be_broken_by_a_name() -> None:
    """Line ends, colons and control characters in the shaft's name stay inside its value."""
    one = reduction()
    nasty = replace(one.site.assumptions.site, name="A:\n~CURVE\x1b[31m é")
    site = replace(one.site, assumptions=replace(one.site.assumptions, site=nasty))
    text = stations_las(reduction(site=site))
    assert text.isascii()
    assert text.count("\n~CURVE") == 1
    assert _las(text).well["WELL"].value == "A  ~CURVE [31m ?"


@pytest.mark.independent
def test_csv_numbers_read_back_as_the_numbers() -> None:
    """The standard reader gives every cell of the JSON shape back; absent is empty."""
    rows = list(csv.DictReader(io.StringIO(stations_csv(reduction()), newline="")))
    assert len(rows) == len(STATIONS)
    for row, one in zip(rows, STATIONS, strict=True):
        expected = station_row(one)
        assert tuple(row) == STATION_KEYS
        for key in STATION_KEYS:
            value = expected[key]
            assert row[key] == ("" if value is None else value if isinstance(value, str) else repr(value))


@pytest.mark.parametrize("text", ["=1+1", "+1", "-1", "@SUM(A1)", "\t=1", "\r=1", " =1", "\n=1", "\x00=1"])
def test_text_that_a_spreadsheet_would_run_is_guarded(text: str) -> None:
    """A text cell that begins like a formula gets an apostrophe; a negative number does not."""
    assert guarded(text) == "'" + text
    assert guarded(-1.5) == -1.5
    table = table_csv([{"name": text, "x": -1.5}], ["name", "x"])
    cells = next(csv.DictReader(io.StringIO(table, newline="")))
    assert cells == {"name": "'" + text, "x": "-1.5"}


def test_json_has_the_agreed_shape_with_null_for_absent() -> None:
    """Keys and units are those that other programs rely on, and NaN or infinity never appear."""
    text = reduction_json(reduction())
    table = json.loads(text, parse_constant=pytest.fail)
    assert list(table)[:8] == [
        "kind",
        "site",
        "frames",
        "rejected",
        "stations",
        "alarms",
        "closure",
        "rest_point",
    ]
    assert tuple(table["stations"][0])[: len(STATION_KEYS)] == STATION_KEYS
    assert table["stations"][2]["measured_north_mm"] is None
    assert table["stations"][1]["residual_east_mm"] == 7.1234
    assert table["alarms"][1] == {
        "time_s": 1004.0,
        "host_time_s": 4.0,
        "depth_m": None,
        "name": "feed silent",
        "from": "active",
        "to": "acknowledged",
    }
    assert table["closure"] == {
        "depth_m": 20.0,
        "east_mm": -3.0,
        "north_mm": 0.0,
        "expected_east_mm": -2.5,
        "expected_north_mm": 0.0,
    }
    assert table["rest_point"]["decay_s"] is None
    assert list(table["rest_point"]) == [
        "east_mm",
        "north_mm",
        "u_east_mm",
        "u_north_mm",
        "period_s",
        "decay_s",
        "swings",
    ]
    nothing = reduce_table(reduction(EMPTY))
    assert (nothing["closure"], nothing["rest_point"], nothing["stations"]) == (None, None, [])


@pytest.mark.parametrize("suffix", [".csv", ".json", ".las", ".LAS"])
def test_an_existing_file_is_never_written_over_unasked(tmp_path: Path, suffix: str) -> None:
    """A second export is refused and leaves the first; with force it replaces it and leaves nothing else behind."""
    path = tmp_path / f"out{suffix}"
    export(reduction(), path)
    first = path.read_bytes()
    with pytest.raises(OutputError, match="stands already"):
        export(reduction(EMPTY), path)
    assert path.read_bytes() == first
    export(reduction(EMPTY), path, force=True)
    assert path.read_bytes() != first
    assert list(tmp_path.iterdir()) == [path]


def test_an_export_never_replaces_the_run_that_it_is_made_from(tmp_path: Path) -> None:
    """A capture may well be named .csv: forced or not, and by a hard link too, it stays."""
    capture = tmp_path / "run.csv"
    capture.write_text("0,0,0\n", encoding="utf-8")
    (tmp_path / "same.csv").hardlink_to(capture)
    one = replace(reduction(), path=capture)
    for name in ("run.csv", "same.csv"):
        with pytest.raises(OutputError, match="is what this is made from"):
            export(one, tmp_path / name, force=True)
    assert capture.read_text(encoding="utf-8") == "0,0,0\n"


def test_bad_targets_are_one_clear_line(tmp_path: Path) -> None:
    """An unknown suffix, a missing folder and a folder in the place of the file end in the program's own error."""
    for path, expected in (
        (tmp_path / "x.xlsx", "expected one of .csv, .json, .las"),
        (tmp_path / "no" / "x.csv", "cannot be written"),
    ):
        with pytest.raises(OutputError, match=expected):
            export(reduction(), path)
    folder = tmp_path / "d.csv"
    folder.mkdir()
    for force in (False, True):
        with pytest.raises(OutputError):
            write_text(folder, "x", force=force)
    dangling = tmp_path / "link.csv"
    dangling.symlink_to(tmp_path / "elsewhere.csv")
    with pytest.raises(OutputError, match="stands already"):
        write_text(dangling, "x")
    assert not (tmp_path / "elsewhere.csv").exists()
