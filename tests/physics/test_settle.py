"""What would settle a verdict: done as it says, it is settled."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from survey_help import run

from eastfall.physics.findings import Station
from eastfall.physics.readings import Readings
from eastfall.physics.settings import Body
from eastfall.physics.settle import settle
from eastfall.physics.verdict import horizontal, verdict

NAMES = ("tilt, random", "tilt, zero", "azimuth")


def station(east, north, parts, readings=100, action=0.025, together=(0.0, 0.0, 0.0)):
    """Give a station with a residual and a budget."""
    u = [sum(one[row] ** 2 for one in parts) ** 0.5 for row in (0, 1)]
    shared = sum(one * part[0] * part[1] for one, part in zip(together, parts, strict=True))
    length, u_length = horizontal(east, north, *u, shared)
    return Station(
        number=0,
        depth=50.0,
        passing=0,
        direction="down",
        time=0.0,
        measured_east=east,
        measured_north=north,
        expected_east=0.0,
        expected_north=0.0,
        u_east=u[0],
        u_north=u[1],
        warning=0.015,
        action=action,
        verdict=verdict(float(length), float(u_length), action),
        readings=readings,
        still=False,
        inputs=NAMES,
        parts=tuple(parts),
        correlations=tuple(together),
        covariance=shared,
    )


def with_part(one, row, factor):
    """Give the station with one input's part multiplied."""
    parts = [tuple(x * (factor if at == row else 1.0) for x in part) for at, part in enumerate(one.parts)]
    return station(one.measured_east, one.measured_north, parts, one.readings, together=one.correlations)


def test_a_decided_verdict_needs_nothing():
    """Clearly within, clearly over: None."""
    assert settle(station(0.005, 0.0, [(1e-3, 1e-3)] * 3)) is None
    assert settle(station(0.050, 0.0, [(1e-3, 1e-3)] * 3)) is None


def test_a_worked_case():
    """24 mm against 25 mm needs u ≤ 0.5 mm: of 0.6 random, 0.3 zero, 0.1 azimuth only more readings will do.

    Room for the random part is √(0.25 - 0.10) = 0.3873 mm: (0.6/0.3873)² = 2.4 times the readings, 140 more than 100.
    """
    found = settle(station(0.024, 0.0, [(6e-4, 0.0), (3e-4, 0.0), (1e-4, 0.0)]))
    assert found.u_needed == pytest.approx(5e-4)
    assert [one.name for one in found.remedies] == ["tilt, random"]
    assert found.remedies[0].needed == pytest.approx(0.15**0.5 * 1e-3)
    assert found.more_readings == 140
    assert found.leans_to == "within"


def test_the_remedy_that_asks_for_least_stands_first():
    """26 mm against 25 mm, u ≤ 0.5 mm wanted, u² = 0.30 mm²: of three inputs the largest has the least way to go.

    0.4, 0.3 and 0.223607 mm leave room for √(0.25 - 0.30 + p²): 0.331662, 0.2 and nothing.
    """
    found = settle(station(0.026, 0.0, [(3e-4, 0.0), (4e-4, 0.0), (5e-8**0.5, 0.0)]))
    assert [one.name for one in found.remedies] == ["tilt, zero", "tilt, random"]
    assert [one.factor for one in found.remedies] == pytest.approx([0.331662 / 0.4, 0.2 / 0.3], rel=1e-5)
    assert found.leans_to == "over"


@pytest.mark.parametrize("axes", [1, -1])
def test_a_residual_inside_its_uncertainty_is_settled_on_the_axis_known_worse(axes):
    """2 mm of residual, u of 10 mm on one axis and 1 mm on the other: the 10 mm of 6 and 8 are what must shrink.

    A limit of 12 mm wants 5 mm, which neither input alone gives; one of 18 mm wants 8: √(8² - 6²) of the larger, and
    nothing at all of the smaller.
    """
    parts = [pair[::axes] for pair in ((6e-3, 6e-4), (8e-3, 8e-4), (0.0, 0.0))]
    found = settle(station(0.002, 0.0, parts, action=0.012))
    assert found.u == pytest.approx(0.010)
    assert (found.u_needed, found.remedies) == (pytest.approx(0.005), ())
    found = settle(station(0.002, 0.0, parts, action=0.018))
    assert [one.present for one in found.remedies] == pytest.approx([8e-3])
    assert [one.needed for one in found.remedies] == pytest.approx([28e-6**0.5])


def test_on_the_limit_itself_nothing_will_do():
    """A residual equal to the limit stays undecided at any uncertainty."""
    found = settle(station(0.025, 0.0, [(6e-4, 0.0)] * 3))
    assert (found.more_readings, found.remedies) == (None, ())


@pytest.mark.invariant
@given(
    st.floats(0.015, 0.035),
    st.floats(-0.01, 0.01),
    st.lists(st.tuples(st.floats(1e-5, 3e-3), st.floats(-3e-3, 3e-3)), min_size=3, max_size=3),
    st.tuples(st.just(0.0), st.floats(-1.0, 1.0), st.just(1.0)),
)
def test_doing_what_it_says_decides(east, north, parts, together):
    """Each remedy, applied alone, makes the verdict "within" or "over"; and so do the readings it asks for."""
    one = station(east, north, parts, together=together)
    found = settle(one)
    assert (found is None) == (one.verdict != "undecided")
    if found is None:
        return
    for remedy in found.remedies:
        better = with_part(one, NAMES.index(remedy.name), remedy.factor * (1.0 - 1e-9))
        assert better.verdict == found.leans_to
    if found.more_readings is not None:
        more = replace(one, readings=one.readings + found.more_readings)
        better = with_part(more, 0, (one.readings / more.readings) ** 0.5 * (1.0 - 1e-9))
        assert better.verdict == found.leans_to


@pytest.mark.invariant
def test_a_series_of_drops_is_decided_by_as_many_bodies_more_as_it_says_and_not_by_one_less(shaft):
    """Every body is released anew, so the release's part falls with their number too, as that of the marks does."""
    assumptions = shaft("drop", body=Body(mass=0.5, diameter=0.05, u_release_speed=0.002))

    def landed(count, east):
        marks = Readings.of(
            time=np.arange(float(count)), depth=[300.0] * count, east=[east] * count, north=[0.0] * count
        )
        return run(assumptions, marks)[0].result().stations[0]

    first = landed(1, 0.0)
    east = first.expected_east + 0.9 * first.action
    found = settle(landed(2, east))
    assert found is not None
    assert found.more_readings
    assert landed(2 + found.more_readings, east).verdict == found.leans_to
    assert landed(1 + found.more_readings, east).verdict == "undecided"
