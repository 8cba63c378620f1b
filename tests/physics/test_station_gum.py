"""The uncertainty of a station against the GUM as another library propagates it through the sum of tilts itself."""

from dataclasses import replace

import GTC
import numpy as np
import pytest
from truth_help import DEPTH, Errors, capture

from eastfall.physics.settings import Instrument
from eastfall.physics.survey import Survey

INSTRUMENT = Instrument(
    u_tilt=np.radians(0.004),
    u_zero=np.radians(0.003),
    u_scale=0.02,
    u_azimuth=np.radians(1.5),
    u_depth_fraction=0.001,
)
NEAR = 1.5e-5
"""[m]: the noise of one slope, 70 µrad, at 90 m through a stretch of 0.1 %, twice over."""


def propagated(readings, at, toward):
    """Give east and north as uncertain numbers: trapezoid over the rows up to the first at a depth, written out.

    The station is asked for at the depth that is shown: where the counter stretches, the guide is met too high or low.
    Beside them the uncertain inputs, by the names that a station gives them.
    """
    zeros = [GTC.ureal(0.0, INSTRUMENT.u_zero) for _ in "ab"]
    scales = [GTC.ureal(1.0, INSTRUMENT.u_scale) for _ in "ab"]
    azimuth = GTC.ureal(toward, INSTRUMENT.u_azimuth)
    stretch = GTC.ureal(1.0, INSTRUMENT.u_depth_fraction)
    rows = int(np.argmax(readings.depth >= at)) + 1
    shown = [[GTC.ureal(one, INSTRUMENT.u_tilt) for one in row[:rows].tolist()] for row in readings.data[3:5]]
    sums, last = [0.0, 0.0], None
    for z, a, b in zip(readings.depth[:rows].tolist(), *shown, strict=True):
        first, second = ((one - zero) / scale for one, zero, scale in zip((a, b), zeros, scales, strict=True))
        north = GTC.sin(first) * GTC.cos(azimuth) - GTC.sin(second) * GTC.sin(azimuth)
        east = GTC.sin(first) * GTC.sin(azimuth) + GTC.sin(second) * GTC.cos(azimuth)
        if last is not None:
            step = 0.5 * (z - last[0]) * stretch
            sums = [sums[0] + step * (east + last[1]), sums[1] + step * (north + last[2])]
        last = (z, east, north)
    shift = last[0] * (stretch - 1.0)
    inputs = {
        "tilt, random": [*shown[0], *shown[1]],
        "tilt, zero": zeros,
        "tilt, scale": scales,
        "azimuth": [azimuth],
        "depth": [stretch],
    }
    return (sums[0] - shift * last[1], sums[1] - shift * last[2]), inputs


@pytest.mark.independent
@pytest.mark.parametrize("toward", [0.0, np.radians(35.0), np.radians(250.0)])
@pytest.mark.parametrize("depth", [30.0, 90.0])
def test_a_stations_parts_are_those_of_the_gum_through_the_whole_sum(shaft, depth, toward):
    """GTC through every row: offset to 0.2 mm, what each input contributes to 1 %, its covariance to 2 %.

    All the same for the last 0.2 m. Left out here and there alike: what is expected, and the pull of the bends.
    """
    readings = capture(1, Errors(zero_a=1e-5, noise=INSTRUMENT.u_tilt, azimuth=toward))
    instrument = replace(INSTRUMENT, a_azimuth=toward)
    survey = Survey(shaft(depth=DEPTH, instrument=instrument), feed_watched=False)
    survey.feed(readings)
    station = next(s for s in survey.result().stations if s.depth == depth and s.direction == "down")
    offset, inputs = propagated(readings, depth, toward)
    # The first row at or beyond the depth lies up to 0.2 m below it.
    assert [GTC.value(one) for one in offset] == pytest.approx(
        (station.measured_east, station.measured_north), abs=2e-4
    )
    for name, sources in inputs.items():
        moved = np.array([[GTC.rp.u_component(one, source) for one in offset] for source in sources])
        part = np.sqrt(np.sum(moved**2, axis=0))
        row = station.inputs.index(name)
        told = np.abs(station.parts[row])
        # The station lies between two rows, of which this sum takes the second: their slopes differ by their noise.
        assert told == pytest.approx(part, rel=0.01, abs=NEAR), name
        shared = station.correlations[row] * station.parts[row][0] * station.parts[row][1]
        near = 0.02 * part[0] * part[1] + NEAR * np.sum(part)
        assert shared == pytest.approx(np.sum(moved[:, 0] * moved[:, 1]), abs=near), name
