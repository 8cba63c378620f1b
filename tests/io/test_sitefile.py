"""The site file: what is accepted, what is refused and where, and the units."""

from datetime import date
from math import degrees, pi, radians

import pytest
from hypothesis import given
from hypothesis import strategies as st

from eastfall.io import sitekeys
from eastfall.io.errors import SiteFileError
from eastfall.io.sitefile import load_site, parse_site

LEAST = """
[site]
latitude_deg = 46.5
[shaft]
depth_m = 400.0
[run]
kind = "guided"
"""

FULL = """
[site]
name = "Marram Pit"
latitude_deg = 57.30
longitude_deg = 12.10
elevation_m = 210.0
gravity_mps2 = 9.8167
rock_density = [[0.0, 2670.0], [410.0, 2810.0]]
u_latitude_deg = 0.001
[shaft]
depth_m = 940.0
diameter_m = 6.0
centre_east_m = 0.25
centre_north_m = -0.25
[run]
kind = "guided"
reference = "field-line"
station_every_m = 10.0
[guide]
line_speed_mps = 2.0
start_east_mm = 1.5
start_north_mm = -2.5
method = "minimum-curvature"
[line]
bob_mass_kg = 60.0
bob_density_kgm3 = 7850.0
mass_per_length_kgpm = 0.006165
diameter_mm = 1.0
young_gpa = 200.0
line_speed_mps = 0.5
[body]
mass_kg = 0.514
diameter_mm = 50.0
drag_coefficient = "sphere"
[air]
density_kgm3 = 1.25
temperature_c = 8.0
temperature_gradient_cpkm = 6.5
cross_flow = [[480.0, 500.0, 1.0, 90.0]]
vertical_mps = 0.0
[instrument]
a_azimuth_deg = 45.0
azimuth_from = "true"
zero_a_deg = 0.01
zero_b_deg = -0.02
scale_a = 1.001
scale_b = 0.999
u_tilt_deg = 0.002
u_zero_deg = 0.001
[limits]
warning_mm = 15.0
action_mm = 25.0
ratio = 2000.0
wall_clearance_mm = 150.0
on_delay_s = 3.0
off_delay_s = 3.0
dead_band_mm = 2.0
feed_silent_s = 5.0
[[link]]
url = "/dev/ttyUSB0"
baud = 9600
form = "columns"
columns = ["depth_m", "tilt_a_deg", "tilt_b_deg", "temperature_c"]
delimiter = ","
checksum = "none"
"""


def test_only_latitude_depth_and_kind_are_required():
    """The three required keys make a whole set of assumptions."""
    site = parse_site(LEAST, "least.toml")
    assert site.assumptions.site.latitude == pytest.approx(radians(46.5), rel=1e-15)
    assert site.assumptions.body is None
    assert site.links == ()
    assert site.given == {"site.latitude_deg", "shaft.depth_m", "run.kind"}


def test_every_key_of_the_fixed_format_is_read_in_its_unit():
    """Millimetres, degrees, GPa and Celsius come out as metres, radians, pascal and kelvin."""
    given_file = parse_site(FULL, "full.toml")
    a = given_file.assumptions
    assert a.site.rock_density == ((0.0, 2670.0), (410.0, 2810.0))
    assert (a.guide.start_east, a.guide.start_north) == pytest.approx((0.0015, -0.0025), rel=1e-15)
    assert a.line.young == pytest.approx(200e9, rel=1e-15)
    assert a.line.diameter == pytest.approx(1e-3, rel=1e-15)
    assert a.air.temperature == pytest.approx(281.15, rel=1e-15)
    assert a.air.temperature_gradient == pytest.approx(0.0065, rel=1e-15)
    assert a.air.cross_flow[0] == pytest.approx((480.0, 500.0, 1.0, pi / 2), rel=1e-15)
    assert a.instrument.a_azimuth == pytest.approx(pi / 4, rel=1e-15)
    assert a.limits.wall_clearance == pytest.approx(0.150, rel=1e-15)
    assert a.limits.ratio == 2000.0
    assert given_file.links[0].columns == ("depth_m", "tilt_a_deg", "tilt_b_deg", "temperature_c")


CASES = [
    ("57.30", "95", r"full.toml, line 4: site.latitude_deg is 95; expected a number from -90 to 90 deg"),
    ("57.30", '"north"', r"site.latitude_deg is 'north'; expected a number from -90 to 90 deg"),
    ("57.30", "nan", r"site.latitude_deg is nan; expected a finite number"),
    ("9.8167", "inf", r"site.gravity_mps2 is inf; expected a finite number"),
    (
        "depth_m = 940.0",
        "dept_m = 940.0",
        r"line 11: unknown key dept_m in \[shaft\]; did you mean depth_m\?",
    ),
    ("depth_m = 940.0", "", r"line 10: shaft.depth_m is missing; expected a number from 0.1 to 12000 m"),
    ("depth_m = 940.0", "depth_m = -1", r"shaft.depth_m is -1; expected a number from 0.1 to 12000 m"),
    ("depth_m = 940.0", "depth_m = 1e-300", r"shaft.depth_m is 1e-300; expected a number from 0.1"),
    ('kind = "guided"', 'kind = "lowered"', r"run.kind is 'lowered'; expected one of guided, hung, drop"),
    (
        "[410.0, 2810.0]",
        "[410.0]",
        r"line 8: site.rock_density\[1\] is \[410.0\]; expected \[from depth m, kg/m3\]",
    ),
    ("[410.0, 2810.0]", "[0.0, 2810.0]", r"site.rock_density is .*; expected rising depths"),
    (
        "warning_mm = 15.0",
        "warning_mm = 35.0",
        r"limits.warning_mm is 35.0; expected at most the action limit",
    ),
    (
        '"temperature_c"]',
        '"heat"]',
        r"link\[0\].columns\[3\] is 'heat'; expected names of the fields in order",
    ),
    ("baud = 9600", 'baud = "fast"', r"link\[0\].baud is 'fast'; expected a whole number from 50"),
    ("[site]", "[sight]", r"unknown key sight at the top level; did you mean site\?"),
    ('azimuth_from = "true"', 'azimuth_from = "grid"', r"full.toml: site.grid is ''; expected an EPSG code"),
    ("longitude_deg = 12.10", "", None),
    ("latitude_deg = 57.30", "latitude_deg = = 57", r"full.toml: not TOML: .*line 4"),
    ('columns = ["depth_m", "tilt_a_deg"', 'columns = ["depth_m", "-"', None),
    (
        '["depth_m", "tilt_a_deg", "tilt_b_deg"',
        '["depth_m", "-", "-"',
        r"expected tilt_a_deg or tilt_b_deg among them",
    ),
]


@pytest.mark.parametrize(("old", "new", "message"), CASES)
def test_what_cannot_be_used_is_refused_with_place_value_and_expectation(old, new, message):
    """Each fault gives one line naming file, line, key, what stands there and what was expected."""
    text = FULL.replace(old, new, 1)
    assert text != FULL
    if message is None:
        assert parse_site(text, "full.toml")
        return
    with pytest.raises(SiteFileError, match=message) as caught:
        parse_site(text, "full.toml")
    assert "\n" not in str(caught.value)


def test_a_missing_file_is_named(tmp_path):
    """No such file: its name, and that a site file was expected."""
    with pytest.raises(SiteFileError, match=r"nowhere.toml: No such file or directory; expected a site file"):
        load_site(tmp_path / "nowhere.toml")


def test_binary_rubbish_is_refused_with_its_line(tmp_path):
    """Bytes that are not UTF-8 are refused with the line they stand on."""
    path = tmp_path / "rubbish.toml"
    path.write_bytes(b"[site]\n\xff\xfe\x00\x01\n")
    with pytest.raises(SiteFileError, match=r"rubbish.toml, line 2: not UTF-8 text"):
        load_site(path)


@pytest.mark.published
def test_magnetic_north_is_turned_by_the_world_magnetic_model():
    """Declination at 80° N, 0° E on 2025.0, height 0: +1.28° (test values published with the WMM2025 coefficients).

    NOAA/NCEI and BGS, WMM2025 test values, first row: date 2025.0, height 0 km, latitude 80, longitude 0, D = 1.28°
    (from memory, unconfirmed); printed to two decimals, hence 0.005°.
    """
    text = LEAST.replace("46.5", "80.0\nlongitude_deg = 0.0") + '[instrument]\nazimuth_from = "magnetic"\n'
    site = parse_site(text, "north.toml", on=date(2025, 1, 1))
    assert degrees(site.assumptions.instrument.north_offset) == pytest.approx(1.28, abs=0.0051)


@pytest.mark.published
def test_grid_north_is_turned_by_the_convergence_of_the_projection():
    """Convergence of UTM in zone 32 (central meridian 9° E) is atan(tan Δλ sin φ) on a sphere, to 1e-3 of itself.

    Snyder, J. P. (1987), Map Projections: A Working Manual, USGS PP 1395, eq. 8-8 on the sphere; the ellipsoid adds
    terms of the order e'² Δλ³, below a thousandth here.
    """
    from math import atan, sin, tan

    text = LEAST.replace("46.5", '57.3\nlongitude_deg = 12.1\ngrid = "EPSG:25832"')
    site = parse_site(text + '[instrument]\nazimuth_from = "grid"\n', "grid.toml")
    expected = atan(tan(radians(3.1)) * sin(radians(57.3)))
    assert site.assumptions.instrument.north_offset == pytest.approx(expected, rel=1e-3)


def test_every_key_has_help_and_a_default_that_its_own_range_accepts():
    """The site form can show every key: help for each, and each default inside its range."""
    for one in sitekeys.all_keys():
        assert one.help, f"{one.section}.{one.name}"
        if isinstance(one.default, float) and one.low is not None and one.high is not None:
            assert one.low <= one.default <= one.high, f"{one.section}.{one.name}"


@pytest.mark.invariant
@given(
    st.sampled_from([one for one in sitekeys.all_keys() if one.unit and one.low is not None]),
    st.floats(0.0, 1.0),
)
def test_units_convert_to_si_and_back(key, share):
    """A number goes to SI and back to the same 12 digits."""
    value = key.low + share * (key.high - key.low)
    back = sitekeys.from_si(key.name, sitekeys.to_si(key.name, value))
    assert back == pytest.approx(value, rel=1e-11, abs=1e-9)


CALIBRATED = LEAST + '[instrument]\ncalibrated_on = "2025-03-01"\n'


@pytest.mark.parametrize(
    ("on", "note"),
    [
        (date(2026, 3, 1), None),
        (date(2026, 3, 2), "calibration is 366 days old"),
        (date(2025, 2, 27), "which is 2 days after this run"),
    ],
)
def test_an_old_calibration_is_pointed_out_on_the_day_of_the_run(on, note):
    """365 days by default: the 366th gives a note, as does a calibration that lies in the run's future."""
    notes = parse_site(CALIBRATED, "old.toml", on=on).notes
    assert (len(notes) == 0) if note is None else note in notes[0]


def test_a_day_that_is_not_in_the_calendar_is_refused():
    """2025-02-30 looks like a date and is none."""
    text = CALIBRATED.replace("03-01", "02-30")
    with pytest.raises(SiteFileError, match=r"old.toml, line \d+: instrument.calibrated_on is '2025-02-30'"):
        parse_site(text, "old.toml")


def test_depth_marks_and_latching_alarms_reach_the_settings():
    """Pairs of true and shown depth, and names of alarms, as given; a wrong name is refused with those there are."""
    text = LEAST + '[depth]\nmarks = [[100.0, 100.42]]\n[limits]\nlatching = ["spinning"]\n'
    given = parse_site(text, "marks.toml").assumptions
    assert given.depth.marks == ((100.0, 100.42),)
    assert given.limits.latching == ("spinning",)
    with pytest.raises(SiteFileError, match=r"limits.latching\[0\] is 'spining'; expected"):
        parse_site(text.replace('"spinning"', '"spining"'), "marks.toml")
    with pytest.raises(SiteFileError, match=r"marks is .*no scale or offset beside them"):
        parse_site(text.replace("marks =", "scale = 1.01\nmarks ="), "marks.toml")


@pytest.mark.invariant
@given(st.text(max_size=400))
def test_no_text_makes_anything_but_a_site_or_its_own_error(text):
    """Whatever stands in the file, the outcome is a site file or a SiteFileError in one line."""
    try:
        parse_site(text, "any.toml")
    except SiteFileError as error:
        assert str(error)


@pytest.mark.invariant
@given(st.integers(0, len(FULL) - 1), st.characters())
def test_one_wrong_character_makes_nothing_but_a_site_or_its_own_error(at, letter):
    """Any single character of a good file replaced by any other: a site file or a SiteFileError."""
    try:
        parse_site(FULL[:at] + letter + FULL[at + 1 :], "any.toml")
    except SiteFileError as error:
        assert str(error)


@pytest.mark.parametrize("mark", [b"", b"\xef\xbb\xbf"])
@pytest.mark.parametrize("end", ["\n", "\r\n"])
def test_what_editors_put_into_a_file_does_no_harm(tmp_path, mark, end):
    """A byte order mark in front, and line ends of another system, are read over; the lines still count."""
    path = tmp_path / "site.toml"
    path.write_bytes(mark + LEAST.replace("\n", end).encode())
    assert load_site(path).assumptions.shaft.depth == 400.0
    path.write_bytes(mark + LEAST.replace("46.5", "95").replace("\n", end).encode())
    with pytest.raises(
        SiteFileError, match=r"line 3: site\.latitude_deg is 95; expected a number from -90 to 90"
    ):
        load_site(path)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", r"site is missing; expected a section \[site\] with latitude_deg"),
        ("site = 3", r"line 1: site is 3; expected a section \[site\] with latitude_deg"),
        (LEAST + "[link]\nurl = '-'", r"link is \{.*\}; expected \[\[link\]\], in double brackets"),
        ("link = [3]" + LEAST, r"link\[0\] is 3; expected a section \[\[link\]\] with url"),
        (LEAST + "[[link]]\nurl = '-'\nbaud = 3", "expected a whole number from 50 to 4000000$"),
        (LEAST + "[[link]]\nurl = '-'\ndelimiter = ';;'", "expected one character$"),
        (
            LEAST + "[air]\ncross_flow = [[5, 2, 3, 4]]",
            r"line 9: air.cross_flow is \[\[5, 2, 3, 4\]\]; expected from",
        ),
        (
            LEAST + "[[link]]\nurl = 'hand:'",
            r"link.url is 'hand:'; expected an instrument: a guided run has nothing",
        ),
        (
            LEAST + "[[link]]\nurl = '-'\ndecimal = 'comma'",
            r"link\[0\].delimiter is ','; expected another one than",
        ),
        (
            LEAST + "[[link]]\nurl = '-'\ndelimiter = '.'",
            r"line 10: link\[0\].delimiter is '.'; expected one character",
        ),
        (LEAST + "[guide]\nend_east_mm = 3", "guide.end_north_mm is missing; expected both ends or none"),
        (
            LEAST + "[instrument]\nazimuth_from = 'magnetic'",
            "site.longitude_deg is missing; expected a longitude",
        ),
        (LEAST + "[instrument]\nscale_a = true", "instrument.scale_a is true; expected a number"),
    ],
)
def test_what_is_expected_is_said_in_the_words_of_the_file(text, message):
    """No message speaks of objects and arrays, of None and True, or of a key without its unit."""
    with pytest.raises(SiteFileError, match=message):
        parse_site(text, "site.toml")


def test_a_date_may_stand_without_quotes():
    """TOML has dates of its own."""
    quoted, plain = (
        parse_site(f"{LEAST}[instrument]\ncalibrated_on = {text}", "x", on=date(2026, 6, 1))
        for text in ('"2026-03-01"', "2026-03-01")
    )
    assert quoted.assumptions == plain.assumptions
    assert plain.assumptions.instrument.calibrated_on == "2026-03-01"
