"""The uncertainty of a station against the GUM as another library propagates it through the sum of tilts itself."""

import GTC
import numpy as np
import pytest
from truth_help import DEPTH, Errors, capture

from eastfall.physics.settings import Instrument
from eastfall.physics.survey import Survey

INSTRUMENT = Instrument(
    u_tilt=np.radians(0.004),
    u_zero=np.radians(0.003),
    u_scale=0.004,
    u_azimuth=np.radians(1.5),
    u_depth_fraction=0.001,
)


def propagated(readings, at):
    """Give east and north as uncertain numbers: trapezoid over the rows up to the first at a depth, written out."""
    zero_a, zero_b = (GTC.ureal(0.0, INSTRUMENT.u_zero) for _ in "ab")
    scale_a, scale_b = (GTC.ureal(1.0, INSTRUMENT.u_scale) for _ in "ab")
    azimuth = GTC.ureal(0.0, INSTRUMENT.u_azimuth)
    stretch = GTC.ureal(1.0, INSTRUMENT.u_depth_fraction)
    rows = int(np.argmax(readings.depth >= at)) + 1
    sums = [0.0, 0.0]
    last = None
    for z, a, b in zip(*readings.data[2:5, :rows].tolist(), strict=True):
        first = (GTC.ureal(a, INSTRUMENT.u_tilt) - zero_a) / scale_a
        second = (GTC.ureal(b, INSTRUMENT.u_tilt) - zero_b) / scale_b
        north = GTC.sin(first) * GTC.cos(azimuth) - GTC.sin(second) * GTC.sin(azimuth)
        east = GTC.sin(first) * GTC.sin(azimuth) + GTC.sin(second) * GTC.cos(azimuth)
        if last is not None:
            step = 0.5 * (z - last[0]) * stretch
            sums = [sums[0] + step * (east + last[1]), sums[1] + step * (north + last[2])]
        last = (z, east, north)
    return sums


@pytest.mark.independent
@pytest.mark.parametrize("depth", [30.0, 90.0])
def test_a_stations_parts_are_those_of_the_gum_through_the_whole_sum(shaft, depth):
    """GTC through every row: offset to 0.1 µm, combined u of the measured part to 1 %.

    Left out here and there alike: what is expected. Each axis has its own scale, of which the station takes the larger
    offset's; the two agree because the azimuth is near north.
    """
    readings = capture(1, Errors(zero_a=1e-5, noise=INSTRUMENT.u_tilt))
    survey = Survey(shaft(depth=DEPTH, instrument=INSTRUMENT), feed_watched=False)
    survey.feed(readings)
    one = next(s for s in survey.result().stations if s.depth == depth and s.direction == "down")
    own = ("tilt, random", "tilt, zero", "tilt, scale", "azimuth", "depth")
    parts = np.array([one.parts[one.inputs.index(name)] for name in own])
    east, north = propagated(readings, depth)
    # The first row at or beyond the depth lies up to 0.2 m below it.
    assert (GTC.value(east), GTC.value(north)) == pytest.approx(
        (one.measured_east, one.measured_north), abs=2e-4
    )
    u = np.sqrt(np.sum(parts**2, axis=0))
    assert u == pytest.approx([GTC.uncertainty(east), GTC.uncertainty(north)], rel=0.01)
