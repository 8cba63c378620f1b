"""Captures of a known guide with known instrument errors: found within the stated uncertainty; no false "within"."""

import numpy as np
import pytest
from scipy import stats
from truth_help import DEPTH, Errors, Guide, capture

from eastfall.physics import settings
from eastfall.physics.readings import Readings
from eastfall.physics.settings import Instrument, Limits
from eastfall.physics.survey import JUMP, Survey

U_ZERO, U_SCALE, U_AZIMUTH, U_TILT = np.radians(0.01), 0.003, np.radians(2.0), np.radians(0.002)
STATED = Instrument(u_tilt=U_TILT, u_zero=U_ZERO, u_scale=U_SCALE, u_azimuth=U_AZIMUTH)


def found(shaft, readings, **changes):
    """Give the survey of a capture."""
    survey = Survey(shaft(depth=DEPTH, **{"instrument": STATED, **changes}), feed_watched=False)
    survey.feed(readings)
    survey.close(float("nan"))
    return survey


def drawn(rng):
    """Draw the errors of one instrument from what is stated of it."""
    zero_a, zero_b = rng.normal(0.0, U_ZERO, 2)
    return Errors(
        zero_a=zero_a,
        zero_b=zero_b,
        scale=rng.normal(0.0, U_SCALE),
        azimuth=rng.normal(0.0, U_AZIMUTH),
        noise=U_TILT,
    )


def off(one, guide=None):
    """Give how far a residual is from the truth, over its standard uncertainty: east and north; 0 at the start."""
    true = (guide or Guide()).offset(np.array([one.depth]))[:, 0]
    residual = (
        (one.residual_east, one.residual_north) if hasattr(one, "residual_east") else (one.east, one.north)
    )
    pairs = zip(residual, true, (one.u_east, one.u_north), strict=True)
    return [0.0 if u == 0.0 and found == real else (found - real) / u for found, real, u in pairs]


def covered(shaft, seeds, *, faces):
    """Give how often |error| ≤ 2u at the deepest station, at one half-way up, and of the best estimate half-way."""
    inside = np.zeros((seeds, 3, 2), dtype=bool)
    curve = None
    for seed in range(seeds):
        survey = Survey(shaft(depth=DEPTH, instrument=STATED), feed_watched=False, curve=curve)
        curve = survey.curve
        survey.feed(capture(seed, drawn(np.random.default_rng([seed, 7])), faces=faces))
        survey.close(float("nan"))
        result = survey.result()
        by = {(one.depth, one.direction): one for one in result.stations}
        best = {one.depth: one for one in result.best}
        for at, one in enumerate((by[DEPTH, "down"], by[60.0, "up"], best[60.0])):
            inside[seed, at] = np.abs(off(one)) <= 2.0
    return inside


def bounds(trials, share=0.9545, chance=1e-4):
    """Give the counts that a fair coin of that share stays between, but for two chances in ten thousand."""
    return stats.binom.ppf(chance, trials, share), stats.binom.isf(chance, trials, share)


@pytest.mark.parametrize("faces", [False, True])
def test_errors_drawn_as_stated_are_covered_by_two_u_as_often_as_they_should(shaft, faces):
    """120 instruments with zero, scale, azimuth and noise drawn from the stated u: 95.45 % within 2u, binomially."""
    inside = covered(shaft, 120, faces=faces)
    low, high = bounds(120)
    counts = inside.sum(axis=0)
    # The zero cancels in opposite faces, and what is left is known better still; all are held to the same bounds.
    assert np.all(counts >= low), counts
    assert np.all(counts[:2] <= high), counts


@pytest.mark.soak
@pytest.mark.parametrize("faces", [False, True])
def test_coverage_is_95_within_3_percent_over_many_seeds(shaft, faces):
    """1500 instruments: between 92 and 98 % of errors within 2u, at the bottom and half-way up, and no less of both.

    The zero is gone from the best estimate in two faces; what is left beside scale and azimuth (bends taken at speed, a
    vertical bent by local masses) is counted in full and hardly there in these captures, so that it covers more.
    """
    share = covered(shaft, 1500, faces=faces).mean(axis=0)
    assert np.all(share >= 0.92), share
    assert np.all(share[:2] <= 0.98), share


def test_an_instrument_with_every_error_stays_within_its_stated_uncertainty(shaft):
    """Zero 0.01°, scale 0.3 %, azimuth 2°, two faces: every station within 2u, best estimate too, zero found."""
    errors = Errors(zero_a=np.radians(0.01), zero_b=np.radians(-0.01), scale=0.003, azimuth=np.radians(2.0))
    result = found(shaft, capture(3, errors, faces=True, rest=12.0)).result()
    assert len(result.stations) == 25
    for one in (*result.stations, *result.best):
        assert max(map(abs, off(one))) <= 2.0
    for zero, u, true in (
        (result.faces.zero_a, result.faces.u_zero_a, errors.zero_a),
        (result.faces.zero_b, result.faces.u_zero_b, errors.zero_b),
    ):
        assert abs(zero - true) <= 4.0 * u
        assert u < np.radians(0.0005)
    assert result.best[6].u_north < 0.1 * next(one.u_north for one in result.stations if one.depth == 60.0)


def test_a_guide_that_bends_at_the_collar_lets_no_face_sum_stand_apart(shaft):
    """A guide that turns by 3 mm/m within the first station, hardly any noise: face sums are twice the zero to 4 µrad.

    Down and up, the rows of the first and of the last station lie on different sides of their steps.
    """
    quiet = Instrument(u_tilt=1e-5, u_zero=U_ZERO)
    errors = Errors(zero_a=np.radians(0.01), noise=1e-7)
    readings = capture(6, errors, guide=Guide(size=(0.012, -0.009), wave=(30.0, 23.0)), faces=True)
    faces = found(shaft, readings, instrument=quiet).result().faces
    assert faces.suspect_depths == ()
    assert faces.sum_a == pytest.approx([np.radians(0.02)] * len(faces.depth), abs=4e-6)


def test_a_zero_far_beyond_its_stated_uncertainty_is_pointed_out(shaft):
    """0.01° where 0.0005° is stated: the faces say so, and both passes together are still right."""
    claimed = Instrument(u_tilt=U_TILT, u_zero=np.radians(0.0005), u_scale=U_SCALE, u_azimuth=U_AZIMUTH)
    errors = Errors(zero_a=np.radians(0.01))
    result = found(shaft, capture(4, errors, faces=True), instrument=claimed).result()
    assert any("the faces show a zero on A of 0.01" in one for one in result.notes)
    assert not any("disagree" in one for one in result.notes)
    assert all(max(map(abs, off(one))) <= 3.0 for one in result.best)


def test_no_station_that_is_over_is_ever_called_within(shaft):
    """80 instruments in a guide 20 mm out at most, limits around that: false "within" is below the 2.5 % of w = U."""
    guide = Guide(size=(0.02, 0.0))
    false, judged = 0, 0
    for seed in range(80):
        readings = capture(seed, drawn(np.random.default_rng([seed, 9])), guide=guide)
        limits = Limits(warning=0.012, action=0.015)
        result = found(shaft, readings, limits=limits).result()
        for one in result.stations[2:12]:
            true = float(np.hypot(*guide.offset(np.array([one.depth]))[:, 0]))
            judged += true > limits.action
            false += true > limits.action and one.verdict == "within"
    assert judged > 200
    # Stations of one instrument share its errors: the bound is that of the instruments, not of the stations.
    assert false <= 0.025 * judged + 3.0 * np.sqrt(0.025 * 80.0) * judged / 80.0


def test_spikes_of_depth_change_nothing_but_their_count(shaft):
    """Rows whose depth leaps away and back: left aside, and every station where it was to 50 µm."""
    readings = capture(5)
    spoiled = Readings(readings.data.copy())
    spoiled.data[2, [100, 250, 251, 252, 900]] += 35.0
    clean, other = found(shaft, readings), found(shaft, spoiled)
    assert other.unused["depth spike"] == 5
    for one, two in zip(clean.result().stations, other.result().stations, strict=True):
        assert abs(two.residual_east - one.residual_east) < 5e-5


@pytest.mark.parametrize("slip", [2.5, -2.5, 8.0])
def test_a_jump_of_depth_is_an_alarm_and_leaves_the_sum_within_its_uncertainty(shaft, slip):
    """The counter slips at 40 m on the way down: latched alarm, nothing summed across, residuals within 2u after it."""
    readings = capture(6)
    at = int(np.argmax(readings.depth >= 40.0))
    readings.data[2, at:] += slip
    readings = readings[readings.depth >= 0.0]
    survey = found(shaft, readings)
    changes = [(one.old, one.new) for one in survey.result().alarms if one.name == JUMP]
    assert changes == [("normal", "active"), ("active", "latched")]
    for one in survey.result().stations:
        # The guide is where the probe was, not where the slipped counter says.
        assert max(map(abs, off(one, _Slipped(one, readings.depth[at] - slip, slip)))) <= 2.0
    assert {one.state for one in survey.alarms() if one.name == JUMP} == {"latched"}


class _Slipped:
    """The guide as a slipped counter tells its depths, for one station."""

    def __init__(self, station, begins, slip):
        self._after = station.direction == "up" or station.depth > begins
        self._slip = slip

    def offset(self, depth):
        return Guide().offset(depth - self._slip * self._after)


def test_a_frozen_stretch_is_an_alarm_and_stays_within_the_uncertainty(shaft):
    """Forty metres with the same two tilts: alarm, readings left aside, every station within 3u of the truth."""
    readings = capture(7)
    rows = slice(150, 350)
    readings.data[3:5, rows] = readings.data[3:5, 150:151]
    survey = found(shaft, readings)
    result = survey.result()
    first = next(one for one in result.alarms if one.name == "tilt frozen")
    # Two seconds by default, and a run too long to be chance.
    assert 2.0 <= first.time - readings.time[150] <= 3.0
    assert survey.unused["no usable tilt"] == pytest.approx(175, abs=5)
    assert all(max(map(abs, off(one))) <= 3.0 for one in result.stations)
    assert any(name == "readings missing" for name in result.stations[-1].inputs)


def test_a_suspect_depth_is_found_by_its_face_sums(shaft):
    """Something loose between 55 and 65 m in one face only, 0.02°: that depth stands apart, the others do not."""
    readings = capture(8, Errors(zero_a=np.radians(0.003)), faces=True)
    up = (readings.column("face") > 1.0) & (np.abs(readings.depth - 60.0) < 5.0)
    readings.data[3, up] += np.radians(0.02)
    result = found(shaft, readings).result()
    assert result.faces.suspect_depths == (60.0,)
    assert any("face sums stand apart at 60 m" in one for one in result.notes)


def test_a_known_end_takes_the_zero_away(shaft):
    """Tied to the true end, a zero of 0.01° leaves less than a millimetre, and the uncertainty says so honestly."""
    east, north = (float(one) for one in Guide().offset(np.array([DEPTH]))[:, 0])
    errors = Errors(zero_a=np.radians(0.01), zero_b=np.radians(0.01))
    readings = capture(9, errors)
    tied = found(shaft, readings, guide=settings.Guide(end_east=east, end_north=north)).result()
    assert tied.best[-1].depth == DEPTH
    assert (tied.best[-1].east, tied.best[-1].north) == pytest.approx((east, north), abs=1e-12)
    assert all(one.tied and one.passes == 2 for one in tied.best)
    assert all(max(map(abs, off(one))) <= 2.0 for one in tied.best[1:])
    middle, single = tied.best[6], next(one for one in tied.stations if one.depth == 60.0)
    assert middle.u_north < 0.2 * single.u_north
    assert any("tied to the known end at 120 m" in one for one in tied.notes)


def test_stop_and_read_sums_only_what_was_read_at_rest(shaft):
    """Halts every 10 m, rubbish while moving: the sum of the halts is the guide, and each is a still station."""
    rng = np.random.default_rng(10)
    levels = np.arange(0.0, DEPTH + 1.0, 10.0)
    time = np.arange(0.0, levels.size * 18.0, 0.1)
    depth = np.interp(time % 18.0, [0.0, 8.0, 18.0], [0.0, 0.0, 1.0]) * 10.0 + 10.0 * (time // 18.0)
    depth = np.minimum(depth, DEPTH)
    slope = Guide().slope(np.round(depth / 10.0) * 10.0)
    moving = np.abs(np.gradient(depth)) > 0.0
    tilt = slope[::-1] + rng.normal(0.0, np.where(moving, 0.01, U_TILT), (2, time.size))
    tilt[0, ::37] += 0.05
    readings = Readings.of(time=time, depth=depth, tilt_a=tilt[0], tilt_b=tilt[1])
    result = found(shaft, readings, guide=settings.Guide(readings="still")).result()
    assert [round(one.depth, 2) for one in result.stations] == levels.tolist()
    # Of 51 readings at a halt the one or two knocked ones are left aside.
    assert all(one.still and 49 <= one.readings <= 51 for one in result.stations)
    coarse = np.cumsum((slope_at(levels)[:, 1:] + slope_at(levels)[:, :-1]) * 5.0, axis=1)
    for one, true in zip(result.stations[1:], coarse.T, strict=True):
        u = one.parts[one.inputs.index("tilt, random")][0]
        assert abs(one.measured_east - true[0]) <= 3.0 * u
        # A bad reading in 37 would shift a plain mean by 0.05/37 and the sum by 13 mm a station.
        assert abs(one.measured_north - true[1]) <= 3.0 * u + 1e-4


def slope_at(depth):
    """Give the slope of the guide, shape (2, n)."""
    return Guide().slope(depth)
