"""The emulator: its lines follow from the seed alone, its physics from the equations of motion, damage shows."""

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from eastfall.io.arrivals import LineBlock
from eastfall.io.broken import broken_kinds
from eastfall.io.emulator import (
    EmulatedLine,
    EmulatedLink,
    EmulateOptions,
    Emulator,
    demo_site,
    emulated_link,
    emulator_for,
    options_of,
)
from eastfall.io.errors import LinkError, SiteFileError
from eastfall.io.forms import Decoded, decoder_for
from eastfall.io.framing import Splitter
from eastfall.io.journey import Winch, down_and_up
from eastfall.io.scenes import DropScene, GuidedScene, HungScene, felt_tilt
from eastfall.io.sitefile import LinkSettings, SiteFile, parse_site
from eastfall.io.truth import Bend, Bulge, Truth, Wave, draw_truth
from eastfall.physics.earth import EARTH_ROTATION
from eastfall.physics.errors import ParameterError
from eastfall.physics.field import local_field
from eastfall.physics.settings import ARCSECOND, DEGREE

CROOKED = Truth(
    lean_east=2e-4,
    lean_north=-1e-4,
    waves=(Wave(wavelength=70.0, phase=0.7, east=2e-3, north=1e-3),),
    bulges=(Bulge(depth=150.0, width=20.0, east=0.01, north=-0.006),),
    bends=(Bend(depth=220.0, width=8.0, east=-3e-4, north=4e-4),),
)

FORMS = {
    "plain columns": LinkSettings(url="x"),
    "every column": LinkSettings(
        url="x",
        columns=(
            "time_s", "-", "depth_m", "tilt_a_deg", "tilt_b_deg", "east_mm", "north_mm", "azimuth_deg", "temperature_c",
            "supply_v", "face_deg",
        ),
        delimiter=";",
        checksum="crc16-modbus",
    ),
    "blank-separated with xor": LinkSettings(url="x", delimiter=" ", checksum="xor"),
    "one column": LinkSettings(url="x", columns=("depth_m",)),
    "sentences": LinkSettings(url="x", form="iec61162"),
    "sentences with offsets": LinkSettings(url="x", form="iec61162", columns=("depth_m", "east_mm", "north_mm")),
}  # fmt: skip


def with_link(site: SiteFile, link: LinkSettings) -> SiteFile:
    """Return a site whose only link is this one."""
    return replace(site, links=(link,))


def decoded(link: LinkSettings, lines: list[EmulatedLine]) -> Decoded:
    """Read lines as the program does: cut, then decoded in one block."""
    data = Splitter().feed(b"".join(one.data for one in lines))
    times = np.zeros(data.count(b"\n"))
    return decoder_for(link).decode(LineBlock(data=data, times=times, first_line=1))


@pytest.mark.invariant
@given(
    polls=st.lists(st.floats(0.0, 60.0), max_size=12),
    seed=st.integers(0, 2**31),
    broken=st.sampled_from([0.0, 0.2, 1.0]),
)
@settings(max_examples=15, deadline=None)
def test_lines_do_not_depend_on_how_often_they_are_asked_for(
    polls: list[float], seed: int, broken: float
) -> None:
    """The lines before a time are the same, byte for byte, however the emulator was polled on the way there."""
    site = demo_site("guided")
    at_once = Emulator(site, seed=seed, broken=broken)
    in_steps = Emulator(site, seed=seed, broken=broken)
    steps = [line for until in sorted(polls) for line in in_steps.take(0, until)]
    assert steps + in_steps.take(0, 60.0) == at_once.take(0, 60.0)
    assert in_steps.counts(0) == at_once.counts(0)


@pytest.mark.invariant
def test_another_seed_gives_other_lines_and_another_truth() -> None:
    """Nothing random is left out of the seed's reach, and the same seed gives the same truth."""
    site = demo_site("guided")
    one, other = Emulator(site, seed=1), Emulator(site, seed=2)
    assert one.truth != other.truth
    assert one.truth == Emulator(site, seed=1).truth
    assert one.lines(0, 20.0) != other.lines(0, 20.0)


@pytest.mark.invariant
@pytest.mark.parametrize("form", FORMS)
def test_good_lines_decode_and_every_broken_line_is_refused(form: str) -> None:
    """What the emulator counts as good becomes a reading, what it counts as broken a fault, in every line form."""
    link = FORMS[form]
    emulator = Emulator(with_link(demo_site("guided"), link), seed=7, broken=0.3, until=150.0)
    lines = emulator.take(0, np.inf)
    counts = emulator.counts(0)
    said = decoded(link, lines)
    per_reading = 2 if link.form == "iec61162" else 1
    assert len(said.readings) * per_reading == counts.pop("good") == 1500 * per_reading
    assert set(counts) == set(broken_kinds(link))
    assert len(said.rejected) == sum(counts.values()) > 300
    assert sum(said.faults.values()) == len(said.rejected)


@pytest.mark.invariant
def test_decoded_readings_are_what_the_scene_said_to_the_last_printed_digit() -> None:
    """Depth comes in whole millimetres, tilt in 0.00001°, offsets in 0.01 mm, time in milliseconds."""
    link = FORMS["every column"]
    site = with_link(demo_site("hung"), link)
    emulator = Emulator(site, seed=3, rate=8.0)
    said = decoded(link, emulator.take(0, 8.0)).readings
    # The emulator draws in chunks of 64 readings, each from its own generator.
    felt = emulator.scene.sample(np.arange(64) / 8.0, np.random.default_rng([3, 2, 0, 0]))
    for channel, step in {
        "time": 1e-3, "depth": 1e-3, "tilt_a": 1e-5 * DEGREE, "tilt_b": 1e-5 * DEGREE, "east": 1e-5, "north": 1e-5,
        "temperature": 0.01, "supply": 0.01,
    }.items():  # fmt: skip
        np.testing.assert_allclose(said.column(channel), felt[channel], rtol=0.0, atol=0.5001 * step)


@pytest.mark.invariant
def test_the_truth_s_slope_and_curvature_are_the_derivatives_of_its_offset() -> None:
    """Central differences of the offset give the slope, and of the slope the curvature."""
    z, h = np.linspace(5.0, 295.0, 200), 1e-3
    slope = (CROOKED.offset(z + h) - CROOKED.offset(z - h)) / (2.0 * h)
    curvature = (CROOKED.slope(z + h) - CROOKED.slope(z - h)) / (2.0 * h)
    # Rounding of a 0.1 m offset over 2 mm is 1e-14; the differences err by h²/6 times the next derivatives.
    np.testing.assert_allclose(CROOKED.slope(z), slope, rtol=0.0, atol=1e-11)
    np.testing.assert_allclose(CROOKED.curvature(z), curvature, rtol=0.0, atol=1e-11)
    np.testing.assert_array_equal(CROOKED.offset(0.0), np.zeros((2, 1)))


@pytest.mark.invariant
@pytest.mark.parametrize("depth", [1.0, 30.0, 300.0, 2000.0])
@pytest.mark.parametrize("stops", [(), (10.0, 120.0, 121.0)])
def test_the_winch_reaches_the_bottom_and_the_collar_within_its_limits(
    depth: float, stops: tuple[float, ...]
) -> None:
    """Depth is the integral of speed, speed of acceleration; neither goes beyond what the winch can do."""
    winch = Winch(speed=2.5, acceleration=0.3, stops=stops)
    journey = down_and_up(depth, winch)
    time = np.arange(0.0, journey.duration, 1e-2)
    at, speed, pull = journey.at(time)
    assert at.max() == pytest.approx(depth, abs=1e-9)
    assert at.min() > -1e-9
    assert np.abs(speed).max() <= 2.5 + 1e-9
    assert np.abs(pull).max() <= 0.3
    # Trapezoids of speed over a jump of acceleration err by at most a h²/4 each.
    steps = 0.5 * (speed[1:] + speed[:-1]) * np.diff(time)
    np.testing.assert_allclose(np.diff(at), steps, rtol=0.0, atol=0.3 * 1e-4)
    assert journey.at(journey.duration + 1000.0)[0] == pytest.approx(0.0, abs=1e-9)
    for stop in stops:
        standing = np.abs(at - stop) < 1e-9
        if stop < depth:
            assert np.sum(standing) * 1e-2 == pytest.approx(2 * winch.stop_time, abs=0.2)


def turned(vector: np.ndarray, angle: float, axis: np.ndarray) -> np.ndarray:
    """Turn a vector about a unit axis (Rodrigues)."""
    along = axis * (axis @ vector)
    return along + np.cos(angle) * (vector - along) + np.sin(angle) * np.cross(axis, vector)


@pytest.mark.independent
@pytest.mark.parametrize("latitude", [58.0, -35.0])
@pytest.mark.parametrize("when", [12.0, 30.0, 46.0, 50.5, 53.0, 57.0, 64.0, 80.0, 100.0])
def test_felt_tilt_is_that_of_the_inertial_acceleration_of_the_ride(latitude: float, when: float) -> None:
    """Second differences of the ride in a frame that does not turn give the same felt vertical.

    The ride is written in axes north, east, down; the Earth's turn carries it along; what the probe feels is
    attraction less inertial acceleration. Of the centripetal terms the field holds those of the rest position.
    """
    site = replace(demo_site("guided").assumptions.site, latitude=latitude * DEGREE)
    field, journey = local_field(site), down_and_up(300.0, Winch(speed=8.0, acceleration=0.8))
    pole = np.array([np.cos(site.latitude), 0.0, -np.sin(site.latitude)])

    def ride(time: float) -> np.ndarray:
        depth = float(journey.at(time)[0][0])
        east, north = CROOKED.offset(depth)[:, 0]
        return np.array([north, east, depth])

    # Rounding of 300 m (6e-14) gives 2e-9 m/s²; the differences err by h²/12 times the fourth derivative, 3e-4 m/s⁴.
    h = 0.01
    before, here, after = (turned(ride(when + step), EARTH_ROTATION * step, pole) for step in (-h, 0.0, h))
    inertial = (before - 2.0 * here + after) / h**2
    centripetal = EARTH_ROTATION**2 * (pole * (pole @ here) - here)
    depth, speed, pull = journey.at(when)
    east, north = CROOKED.offset(depth)[:, 0]
    pulled = np.array([float(one) for one in field.acceleration(north, east, float(depth[0]))])
    felt = pulled - (inertial - centripetal)
    slope = CROOKED.slope(depth)[:, 0]
    expected = slope - felt[[1, 0]] / felt[2]
    # Left out on purpose: the Coriolis pull on the probe's own sideways motion, at most 70 nrad here.
    sideways = 2.0 * EARTH_ROTATION * float(np.hypot(*slope) * abs(speed[0])) / 9.7
    tilt = felt_tilt(CROOKED, field, depth, speed, pull)[:, 0]
    np.testing.assert_allclose(tilt, expected, rtol=0.0, atol=1e-9 + sideways)


@pytest.mark.invariant
def test_a_plumb_guide_seems_to_lean_west_going_down_and_east_coming_up() -> None:
    """The moving line's lean changes sign with the speed and nothing else does, to the 1e-9 of the curved field."""
    site = demo_site("guided").assumptions
    field = local_field(site.site)
    depth, speed = np.array([100.0, 100.0]), np.array([5.0, -5.0])
    down, up = felt_tilt(Truth(), field, depth, speed, np.zeros(2)).T
    assert down[0] < 0.0 < up[0]
    assert down[0] + up[0] == pytest.approx(0.0, abs=1e-12)
    assert down[1] == up[1] == pytest.approx(-float(field.slope(100.0)[0]), rel=1e-9)


@pytest.mark.invariant
def test_the_half_turn_for_the_second_face_changes_the_sign_of_the_tilt_and_not_of_the_zero() -> None:
    """With a column for the face, the way up is read turned by 180°: the sum of both faces is twice the zero."""
    assumptions = replace(demo_site("guided").assumptions)
    quiet = replace(CROOKED, noise=0.0, zero_a=0.02 * DEGREE)
    scene = GuidedScene(assumptions, quiet, rate=10.0, winch=Winch(speed=0.001), faces=True)
    turning = scene.journey.turning
    # Both at the bottom, just before and just after the turn, the line at rest for the latter.
    said = scene.sample(np.array([turning, turning + 1.0]), np.random.default_rng(1))
    assert said["face"].tolist() == [0.0, np.pi]
    zero = assumptions.instrument.zero_a + 0.02 * DEGREE
    assert said["tilt_a"].sum() == pytest.approx(2.0 * zero, abs=1e-9)
    assert abs(np.diff(said["tilt_a"])[0]) > 1e-5


@pytest.mark.independent
def test_the_swing_obeys_the_equation_of_motion_of_foucault_s_pendulum() -> None:
    """Second differences of the closed solution leave only the terms of (ωs)² and 1/τ² (below 2e-6 of the pull)."""
    assumptions = demo_site("hung").assumptions
    truth = Truth(swing_major=0.05, swing_minor=0.01, swing_azimuth=0.4, decay=1200.0)
    scene = HungScene(assumptions, truth, rate=2.0, seed=1)
    t, h = np.linspace(1.0, 300.0, 500), 1e-2
    before, here, after = (np.array([1.0, 1.0j]) @ scene.swing(t + step) for step in (-h, 0.0, h))
    speed, acceleration = (after - before) / (2.0 * h), (after - 2.0 * here + before) / h**2
    field = local_field(assumptions.site)
    stiffness = field.gravity / scene.length
    turn = EARTH_ROTATION * np.sin(assumptions.site.latitude)
    left = acceleration + 2j * turn * speed + 2.0 / 1200.0 * speed + stiffness * here
    assert np.abs(left).max() < (1.0 / 1200.0**2 + 3.0 * turn / 1200.0 + turn**2 + 1e-6) * 0.06
    assert scene.swing(np.zeros(1))[:, 0] == pytest.approx([0.05 * np.sin(0.4), 0.05 * np.cos(0.4)])


@pytest.mark.invariant
def test_a_still_bob_is_read_alike_by_offset_and_by_line_angle() -> None:
    """Without swing, air and noise, tilt times length and the offsets are the expected bob plus the truth."""
    assumptions = demo_site("hung").assumptions
    exact = replace(assumptions, instrument=replace(assumptions.instrument, u_offset=0.0, a_azimuth=0.5))
    scene = HungScene(exact, Truth(rest_east=0.004, rest_north=-0.003, noise=0.0), rate=2.0, seed=1)
    said = scene.sample(np.arange(3.0), np.random.default_rng(1))
    a, b = said["tilt_a"] * scene.length, said["tilt_b"] * scene.length
    np.testing.assert_allclose(said["east"], a * np.sin(0.5) + b * np.cos(0.5), rtol=0.0, atol=1e-9)
    np.testing.assert_allclose(said["north"], a * np.cos(0.5) - b * np.sin(0.5), rtol=0.0, atol=1e-9)
    # A plumb bob hangs toward the pole by about κL²: 0.14 mm here; the truth is added to it.
    assert said["east"] == pytest.approx(0.004, abs=1e-6)
    assert said["north"][0] == pytest.approx(
        -0.003 + 0.17 * ARCSECOND / 1000 * 420**2 * np.sin(2 * 52.87 * DEGREE), rel=0.02
    )


@pytest.mark.invariant
def test_drop_marks_scatter_around_the_trajectory_by_release_and_reading() -> None:
    """Over 400 bodies a level, mean and spread of the marks agree with what the site states (4 standard errors)."""
    assumptions = demo_site("drop").assumptions
    truth = Truth(levels=(60.0, 160.0), bodies=400, rest_east=0.002)
    scene = DropScene(assumptions, truth)
    assert scene.count == 800
    said = scene.sample(np.arange(800) * scene.interval, np.random.default_rng(5))
    body, probe = assumptions.body, assumptions.instrument
    assert body is not None
    for level, depth in enumerate(truth.levels):
        marks = said["east"][said["depth"] == depth]
        assert marks.shape == (400,)
        # t = √(2h/g) is right to a few percent in air, and the release speed is the smaller part of the spread here.
        spread = np.hypot(
            np.hypot(body.u_release, probe.u_offset), body.u_release_speed * np.sqrt(2 * depth / 9.81)
        )
        assert marks.mean() == pytest.approx(scene.middle[0, level], abs=4 * spread / 20)
        assert marks.std() == pytest.approx(spread, rel=4 / np.sqrt(800) + 0.03)
    # First-order fall in vacuum, (1/3) ω cos φ √(8 h³/g), 160 m at 50.68°; air changes it by a few percent.
    vacuum = EARTH_ROTATION * np.cos(assumptions.site.latitude) * np.sqrt(8 * 160.0**3 / 9.811) / 3
    assert scene.middle[0, 1] - 0.002 == pytest.approx(vacuum, rel=0.05)


@pytest.mark.invariant
def test_a_site_without_a_link_speaks_the_usual_columns() -> None:
    """Depth and two tilts, as a `[[link]]` with nothing but a URL would."""
    site = demo_site("guided")
    usual = Emulator(with_link(site, LinkSettings(url="x"))).lines(0, 10.0)
    bare = Emulator(replace(site, links=()))
    assert bare.links == 1
    assert bare.lines(0, 10.0) == usual
    assert usual[0][1].count(b",") == 2


@pytest.mark.invariant
def test_latency_delays_the_arrival_and_not_the_reading() -> None:
    """A line arrives late by the link's latency, with the time and the depth of its sampling."""
    link = LinkSettings(url="x", columns=("time_s", "depth_m"), latency=0.25)
    site = with_link(demo_site("guided"), link)
    prompt = Emulator(with_link(site, replace(link, latency=0.0))).take(0, 30.0)
    late = Emulator(site).take(0, 30.25)
    assert [one.data for one in prompt] == [one.data for one in late]
    assert [one.time + 0.25 for one in prompt] == pytest.approx([one.time for one in late])


@pytest.mark.invariant
def test_errors_are_drawn_only_when_asked_for() -> None:
    """By default the instrument is as the site states; asked for, errors are within 5 standard uncertainties."""
    assumptions = demo_site("guided").assumptions
    plain, erring = draw_truth(assumptions, 3), draw_truth(assumptions, 3, errors=True)
    names = {
        "zero_a": "u_zero", "zero_b": "u_zero", "scale_a": "u_scale", "scale_b": "u_scale", "azimuth": "u_azimuth",
        "depth_scale": "u_depth_fraction",
    }  # fmt: skip
    for name, u in names.items():
        assert getattr(plain, name) == 0.0
        assert 0.0 < abs(getattr(erring, name)) < 5.0 * getattr(assumptions.instrument, u)
    assert replace(erring, **dict.fromkeys(names, 0.0)) == plain


class Hands:
    """A clock that moves when someone waits for it."""

    def __init__(self) -> None:
        self.now = 100.0

    def __call__(self) -> float:
        """Return the time [s]."""
        return self.now

    def wait(self, seconds: float) -> None:
        """Let time pass."""
        self.now += seconds


def test_an_emulated_link_gives_the_emulator_s_bytes_at_its_pace_and_then_the_end() -> None:
    """Ten simulated seconds at pace 5 take two seconds of the clock; after the last line read says None."""
    site, hands = demo_site("guided"), Hands()
    link = EmulatedLink(Emulator(site, until=10.0), pace=5.0, clock=hands, wait=hands.wait)
    got = []
    while (data := link.read(0.1)) is not None:
        got.append(data)
    assert b"".join(got) == b"".join(data for _, data in Emulator(site).lines(0, 10.0))
    assert hands.now == pytest.approx(102.0, abs=0.1)
    link.close()
    assert link.read(0.1) is None


def test_an_emulate_url_sets_every_option() -> None:
    """Each option of the URL reaches the emulator, and `once` ends the feed where the journey ends."""
    url = "emulate:?seed=9&rate=4&pace=20&broken=0.5&errors=1&once=1"
    options = options_of(url)
    assert options == EmulateOptions(seed=9, rate=4.0, pace=20.0, broken=0.5, errors=True, once=True)
    assert options_of("emulate:?until=30").until == 30.0
    site = demo_site("guided")
    emulator = emulator_for(site, options)
    assert emulator.truth == draw_truth(site.assumptions, 9, errors=True)
    last = emulator.take(0, np.inf)[-1].time
    assert emulator.duration - 0.5 < last < emulator.duration + 0.25
    assert emulated_link(url, site).name == url


@pytest.mark.parametrize(
    ("url", "complaint"),
    [
        ("emulate:?sed=1", "unknown option 'sed'; expected seed, rate"),
        ("emulate:?rate=fast", "rate is 'fast'; expected a number"),
        ("emulate:?rate=0", "rate is 0.0 1/s; expected more than 0"),
        ("emulate:?rate=nan", "rate is nan 1/s; expected more than 0"),
        ("emulate:?broken=2", "broken is 2.0; expected 0 to 1"),
        ("emulate:?pace=-1", "pace is -1.0; expected more than 0"),
        ("emulate:?until=nan", "until is nan s; expected"),
        ("emulate:?seed=-1", "seed is -1; expected 0 or more"),
    ],
)
def test_an_unusable_emulate_url_is_refused_by_name(url: str, complaint: str) -> None:
    """The message names the URL, the option, the value and what was expected."""
    with pytest.raises(LinkError) as caught:
        emulated_link(url, demo_site("guided"))
    assert str(caught.value).startswith(url)
    assert complaint in str(caught.value)


def test_a_pace_is_refused_where_lines_do_not_carry_their_time() -> None:
    """Without a time column a hurried journey would show a wrong line speed, so it is refused, except for drops."""
    link = LinkSettings(url="x")
    with pytest.raises(LinkError, match="pace is 4; expected 1"):
        emulated_link("emulate:?pace=4", with_link(demo_site("guided"), link))
    marks = replace(link, columns=("depth_m", "east_mm", "north_mm"))
    assert emulated_link("emulate:?pace=4", with_link(demo_site("drop"), marks)).read(0.1)
    with pytest.raises(LinkError, match="no link 3"):
        emulated_link("emulate:", demo_site("guided"), 3)


def test_the_guided_demo_raises_the_warning_on_both_passes_and_returns_inside_two_minutes() -> None:
    """The hidden guide goes beyond the warning limit once a pass, never beyond the action limit, and comes back."""
    site = demo_site("guided")
    options = options_of(site.links[0].url)
    emulator = emulator_for(site, options)
    limits = site.assumptions.limits
    away = np.hypot(*emulator.truth.offset(np.arange(0.0, site.assumptions.shaft.depth)))
    beyond = away > limits.warning
    assert sum(now and not before for before, now in pairwise(beyond)) == 1
    assert away[-1] < limits.warning - limits.dead_band
    assert away.max() < limits.action
    assert 45.0 < emulator.duration / options.pace < 120.0


@pytest.mark.parametrize("kind", ["guided", "hung", "drop"])
def test_every_demo_site_is_read_by_its_own_decoder(kind: str) -> None:
    """The built-in sites load, and all lines of their emulated instruments decode."""
    site = demo_site(kind)  # type: ignore[arg-type]  # parametrized by the same words
    assert site.assumptions.run.kind == kind
    emulator = emulator_for(site, replace(options_of(site.links[0].url), once=True))
    said = decoded(site.links[0], emulator.take(0, np.inf))
    assert len(said.readings) == emulator.counts(0)["good"] >= 36
    assert not said.faults


def test_a_site_that_the_models_refuse_says_so_with_its_key_and_unit() -> None:
    """A deflection that is not zero at the collar: the key in seconds of arc as it stands, not radians."""
    text = """
[site]
latitude_deg = 50.0
deflections_arcsec = [[0.0, 1.0, 0.0]]
[shaft]
depth_m = 100.0
[run]
kind = "guided"
"""
    with pytest.raises(
        SiteFileError, match=r"site\.deflections_arcsec is \[\[0\.0, 1\.0, 0\.0\]\]; expected zero"
    ):
        emulator_for(parse_site(text, "bent.toml"), EmulateOptions())


def test_a_truth_that_cannot_be_is_refused() -> None:
    """Lengths of waves, widths and times must be more than zero."""
    for make in (
        lambda: Wave(wavelength=0.0),
        lambda: Bulge(depth=1.0, width=-1.0),
        lambda: Bend(depth=1.0, width=0.0),
        lambda: Truth(decay=0.0),
        lambda: Truth(bodies=0),
        lambda: Winch(speed=0.0),
    ):
        with pytest.raises(ParameterError):
            make()
