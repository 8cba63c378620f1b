"""Comparing surveys: known movements are found, chance is not, and nothing is extrapolated."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from results_help import RESULT, SOUND, numbered, reduction, station

from eastfall.io.compare import (
    DIFFERENCE_KEYS,
    between_passes,
    compare_passes,
    compare_runs,
    difference_rows,
    in_words,
)
from eastfall.io.errors import InputError
from eastfall.io.reduce import Reduction, reduce_file
from eastfall.physics.findings import Result, Station
from eastfall.physics.verdict import horizontal

GUIDED = next((Path(__file__).parents[2] / "replay_logs").glob("sandrigg*.jsonl"))


def _run(*stations: Station) -> Reduction:
    result = Result(frames=1, stations=numbered(*stations), alarms=(), closure=None, rest_point=None)
    return reduction(result)


def test_a_moved_lining_is_found_where_it_moved() -> None:
    """A bulge of 8 mm between 20 and 40 m shows there, with both uncertainties combined, and nowhere else."""
    depths = np.arange(0.0, 60.0, 10.0)
    first = _run(*(station(z, 0.002, 0.001) for z in depths))
    second = _run(*(station(z, 0.002 + (0.008 if 20 <= z <= 40 else 0.0), 0.001) for z in depths))
    found = compare_runs(first, second)
    assert [one.depth for one in found.moved] == [20.0, 30.0, 40.0]
    assert found.moved[0].east == pytest.approx(0.008, abs=1e-12)
    assert found.moved[0].u_east == pytest.approx(0.001 * 2**0.5, rel=1e-12)
    assert "at 3 of 6 depths; most at 20.0 m: +8.0 mm east" in in_words(found)
    assert "at any of 6 depths" in in_words(compare_runs(first, first))


def test_stations_between_are_interpolated_and_beyond_are_left_out() -> None:
    """The second survey is read linearly between its stations; depths beyond its reach are counted, not guessed."""
    first = _run(*(station(z, 0.0) for z in (5.0, 15.0, 25.0, 35.0)))
    second = _run(station(10.0, 0.001), station(20.0, 0.003, u_east=0.003), station(30.0, 0.003))
    found = compare_runs(first, second)
    assert [one.depth for one in found.rows] == [15.0, 25.0]
    assert found.left_out == 2
    assert found.rows[0].east == pytest.approx(0.002, abs=1e-12)
    assert found.rows[0].u_east == pytest.approx(np.hypot(0.001, 0.002), rel=1e-12)


def test_two_passes_of_one_run_are_compared_by_depth() -> None:
    """Pass 2 against pass 1 of the demo run differs by no more than chance makes likely."""
    run = reduce_file(GUIDED)
    found = compare_passes(run)
    assert len(found.rows) == 19
    assert len(found.moved) <= 3  # of 19 at one in twenty each, 3 or fewer are 98 % likely (binomial)
    row = next(one for one in found.rows if one.depth == 240.0)
    down, up = (next(s for s in run.result.stations if (s.depth, s.passing) == (240.0, n)) for n in (0, 1))
    assert row.east == up.residual_east - down.residual_east


def test_surveys_without_a_common_depth_are_refused() -> None:
    """Nothing in common, or a pass that is not there, is one clear line."""
    with pytest.raises(InputError, match="no depth in common"):
        compare_runs(_run(station(10.0, 0.0)), _run(station(20.0, 0.0)))
    with pytest.raises(InputError, match="passes 1 and 3 have no depth in common"):
        compare_passes(reduction(), 0, 2)
    with pytest.raises(InputError):
        compare_runs(_run(), _run(station(20.0, 0.0)))


def test_the_table_has_fixed_keys_and_millimetres() -> None:
    """Each row is a plain dict in millimetres; an absent value is None."""
    found = compare_runs(reduction(RESULT), _run(*(station(z, 0.001) for z in (10.0, 40.0))))
    rows = difference_rows(found)
    assert all(tuple(one) == DIFFERENCE_KEYS for one in rows)
    assert rows[0]["difference_east_mm"] == -2.0
    assert any(one["first_north_mm"] is None and one["moved"] == "unknown" for one in rows)
    assert found.left_out == 0
    assert found.notes == ("no uncertainty is known at 1 of 3 depths",)


def test_surveys_of_two_shafts_or_of_a_changed_record_are_told_apart() -> None:
    """Another name, another place and a record that is not as it was written each stand in a note."""
    one = _run(station(10.0, 0.0))
    assert compare_runs(one, one).notes == ()
    settings = one.site.assumptions
    elsewhere = replace(settings.site, name="Cold Side", latitude=settings.site.latitude + 0.02)
    other = replace(one, site=replace(one.site, assumptions=replace(settings, site=elsewhere)))
    changed = replace(SOUND, state="changed", reason="line 726 is not as it was written")
    notes = compare_runs(one, replace(other, path=Path("b.jsonl"), verification=changed)).notes
    assert notes == (
        "the runs name different shafts: Kestrel Hollow No. 2 and Cold Side",
        "the runs are at different latitudes: 57.3000° and 58.4459°",
        "the record b.jsonl is changed: line 726 is not as it was written",
    )


def _pass(face: float | None, number: int, **parts: tuple[float, float]) -> list[Station]:
    names = tuple(name.replace("_", " ").replace("tilt ", "tilt, ") for name in parts)
    return [station(20.0, 0.0, passing=number, face=face, inputs=names, parts=tuple(parts.values()))]


def test_what_one_cause_moves_in_both_coordinates_counts_along_the_difference() -> None:
    """By hand [mm]: (1, 1.2) of one cause in both surveys, 2.5 east and 3.0 north apart: u = √2 · 1.5621 along it.

    Apart across it, 3.0 east and -2.5 north, that cause is nothing. As uncorrelated it were 1.6 of 3.9, and 1.5.
    """
    one_cause = {"covariance": 1e-3 * 1.2e-3}
    first = _run(station(20.0, 0.0, 0.0, **one_cause))
    for east, north, u in ((2.5e-3, 3.0e-3, 2**0.5 * np.hypot(1.0, 1.2)), (3.0e-3, -2.5e-3, 0.0)):
        (row,) = compare_runs(first, _run(station(20.0, east, north, **one_cause))).rows
        assert (row.u_east, row.u_north) == pytest.approx((1e-3 * 2**0.5, 1.2e-3 * 2**0.5))
        assert 1e3 * horizontal(row.east, row.north, row.u_east, row.u_north, row.covariance)[
            1
        ] == pytest.approx(u, abs=1e-6)
        assert row.moved == ("no" if u else "yes")


def test_a_part_that_turned_between_two_passes_shows_with_its_sign() -> None:
    """By hand [mm]: one cause of (0.3, 0.4) in the first pass and (0.3, -0.2) in the second: (0, 0.6) apart."""
    down = _pass(None, 0, azimuth=(3e-4, 4e-4), depth=(1e-4, 1e-4))
    up = _pass(None, 1, azimuth=(3e-4, -2e-4), depth=(2e-4, 3e-4))
    stations = [replace(one, correlations=(1.0, 1.0)) for one in down + up]
    found = between_passes(stations, 0, 1)
    assert found is not None
    assert (found.rows[0].u_east, found.rows[0].u_north) == pytest.approx((1e-4, np.hypot(6e-4, 2e-4)))
    assert found.rows[0].covariance == pytest.approx(1e-4 * 2e-4)


@pytest.mark.invariant
@pytest.mark.parametrize(
    ("faces", "u"),
    [
        ((None, None), (0.5, 0.5)),
        ((0.0, 0.0), (0.5, 0.5)),
        ((0.0, np.pi), (6.02079729, 8.01561)),
    ],
)
def test_what_two_passes_share_is_no_part_of_their_difference(faces, u) -> None:
    """A zero of 3 and 4 mm cancels in one face and doubles in opposite ones; scale cancels; noise does not.

    By hand [mm]: hypot(0.3, 0.4) = 0.5 in one face; in opposite ones hypot(2 x 3, 0.5) east, hypot(2 x 4, 0.5) north.
    """
    common = {"tilt_zero": (0.003, 0.004), "tilt_scale": (0.002, 0.001)}
    down = _pass(faces[0], 0, **common, tilt_random=(0.0003, 0.0003))
    up = _pass(faces[1], 1, **common, tilt_random=(0.0004, 0.0004))
    found = between_passes(down + up, 0, 1)
    assert found is not None
    assert 1e3 * np.array([found.rows[0].u_east, found.rows[0].u_north]) == pytest.approx(u, rel=1e-6)
