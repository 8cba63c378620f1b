"""Editing a site file: what is not touched stays to the byte, and the file's own reader says what is wrong."""

import re
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from eastfall.io import sitekeys
from eastfall.io.errors import SiteFileError
from eastfall.io.siteedit import NEW_SITE, SiteDraft, changed_since, edited, open_draft, take_link
from eastfall.io.sitefile import LinkSettings, parse_site
from eastfall.io.sitevalues import headings, joined, shape, typed, understood

pytestmark = pytest.mark.invariant

COMMENTED = """\
# Linden Cross, as found in spring.
[site]
name = "Linden Cross"   # the old name
latitude_deg = 57.300          # geodetic
rock_density = [
    [0.0, 2670.0],   # granite
    [410.0, 2810.0], # gneiss
]
# the collar was levelled twice

# --- the shaft ---
[shaft]
depth_m = 940.0
# not measured: diameter

[run]
kind = 'guided'

[limits]
warning_mm = 15   # agreed
action_mm = 25.0

[[link]]
url = "/dev/ttyUSB0"
columns = ["depth_m", "tilt_a_deg", "tilt_b_deg"] # in this order

[[link]]
url = "socket://10.0.0.7:4001"   # the winch
columns = ["depth_m"]
"""


def _path(one: sitekeys.Key) -> str:
    return joined(one.section, 0 if one.section == "link" else None, one.name)


KEYS = [_path(one) for one in sitekeys.all_keys()]
WITH_DEFAULT = [
    (_path(one), one.default)
    for one in sitekeys.all_keys()
    if not one.required and one.default not in (None, "", [], ())
]


@pytest.fixture
def draft() -> SiteDraft:
    """Return a draft of the commented file."""
    return SiteDraft(COMMENTED, "linden.toml")


def test_text_without_a_change_is_the_text_itself(draft: SiteDraft) -> None:
    """Opening and saving changes no byte, and neither does typing what stands there already."""
    for path in KEYS:
        draft.put_typed(path, typed(path, draft.value(path)))
    assert draft.text == COMMENTED


@pytest.mark.parametrize(
    ("path", "text", "before", "after"),
    [
        ("site.latitude_deg", "57.3100", "57.300          #", "57.3100          #"),
        ("site.name", "Lindenhøj", '"Linden Cross"   #', '"Lindenhøj"   #'),
        ("limits.warning_mm", "14.50", "15   # agreed", "14.50   # agreed"),
        ("site.rock_density", "0.0 2670.0\n410.0 2795", "2810.0], # gneiss", "2795], # gneiss"),
        ("link[1].url", "COM7", '"socket://10.0.0.7:4001"   #', '"COM7"   #'),
        (
            "link[0].columns",
            "depth_m, tilt_a_deg, -",
            '"tilt_b_deg"] # in',
            '"-"] # in',
        ),
        ("run.kind", "hung", "'guided'", '"hung"'),
    ],
)
def test_one_change_leaves_every_other_byte(
    draft: SiteDraft, path: str, text: str, before: str, after: str
) -> None:
    """Comment, order, blank lines and the spelling of other numbers stay; the digits are as typed."""
    draft.put_typed(path, text)
    assert COMMENTED.count(before) == 1
    assert draft.text == COMMENTED.replace(before, after)


def test_new_key_stands_in_its_section_ahead_of_the_next_heading(draft: SiteDraft) -> None:
    """A key is added behind the last of its section and before the comment that leads to the next."""
    draft.put_typed("site.elevation_m", "210")
    want = "]\n# the collar was levelled twice\nelevation_m = 210\n\n# --- the shaft ---\n[shaft]"
    assert want in draft.text
    assert len(draft.text) == len(COMMENTED) + len("elevation_m = 210\n")


def test_key_taken_out_and_put_back_is_no_change(draft: SiteDraft) -> None:
    """Emptying a line while typing must not move the key to the end or lose its comment."""
    draft.put_typed("site.latitude_deg", "")
    assert "latitude_deg" not in draft.text
    draft.put_typed("site.latitude_deg", "57.300")
    assert draft.text == COMMENTED


def test_rows_can_grow_and_shrink(draft: SiteDraft) -> None:
    """Rows are added and removed at the end; what stays keeps its comment."""
    draft.put_typed("site.rock_density", "0.0 2670.0; 410.0 2810.0; 700, 2900")
    assert parse_site(draft.text, "x").assumptions.site.rock_density[2] == (700.0, 2900.0)
    assert "# gneiss" in draft.text
    draft.put_typed("site.rock_density", "0.0 2670.0")
    assert parse_site(draft.text, "x").assumptions.site.rock_density == ((0.0, 2670.0),)
    assert "# granite" in draft.text


def test_new_section_begins_after_a_blank_line(draft: SiteDraft) -> None:
    """A section that the file had not is set apart, also behind a text without a last line end."""
    draft.put_typed("air.density_kgm3", "1.25")
    assert draft.text.endswith('columns = ["depth_m"]\n\n[air]\ndensity_kgm3 = 1.25\n')
    bare = SiteDraft('[run]\nkind = "drop"', "x")
    bare.put_typed("shaft.depth_m", "5")
    assert bare.text == '[run]\nkind = "drop"\n\n[shaft]\ndepth_m = 5\n'


def test_links_are_added_and_taken_out(draft: SiteDraft) -> None:
    """The other links stay as they are, whichever goes."""
    draft.add_link()
    draft.put_typed("link[2].url", "-")
    assert [one.url for one in parse_site(draft.text, "x").links] == [
        "/dev/ttyUSB0",
        "socket://10.0.0.7:4001",
        "-",
    ]
    draft.remove_link(0)
    assert [one.url for one in parse_site(draft.text, "x").links] == ["socket://10.0.0.7:4001", "-"]
    assert "# the winch" in draft.text
    draft.remove_link(1)
    draft.remove_link(0)
    assert draft.links == 0
    assert parse_site(draft.text, "x").links == ()


def test_every_fault_is_told_in_the_words_of_the_file_reader(draft: SiteDraft) -> None:
    """Several faults are found at once, each as `parse_site` tells it where it is the only one."""
    wrong = {
        "site.latitude_deg": "95",
        "site.elevation_m": "high",
        "shaft.depth_m": "",
        "limits.ratio": "0.5",
        "link[1].baud": "9600.5",
        "link[0].checksum": "parity",
    }
    alone = {}
    for path, text in wrong.items():
        one = SiteDraft(COMMENTED, "linden.toml")
        one.put_typed(path, text)
        with pytest.raises(SiteFileError) as error:
            parse_site(one.text, "linden.toml")
        alone[path] = str(error.value).partition(": ")[2]
        draft.put_typed(path, text)
    assert draft.faults() == alone


def test_fault_between_keys_is_told_at_one_of_them(draft: SiteDraft) -> None:
    """A warning limit above the action limit, and a north that needs a longitude, are found too."""
    draft.put_typed("limits.warning_mm", "40")
    draft.put_typed("instrument.azimuth_from", "magnetic")
    assert set(draft.faults()) >= {"limits.warning_mm", "site.longitude_deg"}


def test_new_site_lacks_two_keys_and_is_then_usable() -> None:
    """From the first text on, latitude and depth are all that is missing."""
    draft = SiteDraft(NEW_SITE, "new")
    assert set(draft.faults()) == {"site.latitude_deg", "shaft.depth_m"}
    draft.put_typed("site.latitude_deg", "-26.20")
    draft.put_typed("shaft.depth_m", "2100")
    assert draft.faults() == {}
    assert parse_site(draft.text, "new").assumptions.shaft.depth == 2100.0


def test_empty_text_lacks_the_three_required_keys() -> None:
    """The kind of run is asked for as well where the file does not begin with it."""
    assert set(SiteDraft("", "x").faults()) == {"site.latitude_deg", "shaft.depth_m", "run.kind"}


def test_stray_key_is_named_and_can_be_taken_out() -> None:
    """A key that no site file has can be emptied like any other."""
    draft = SiteDraft(COMMENTED.replace("depth_m = 940.0", "depth_m = 940.0\ndepht_m = 3"), "x")
    assert draft.strays("shaft") == ["depht_m"]
    assert "did you mean depth_m" in draft.faults()["shaft.depht_m"]
    draft.put_typed("shaft.depht_m", "")
    assert draft.faults() == {}
    assert draft.text == COMMENTED


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("[site\n", "not TOML"),
        ("site = 3\n", "site is 3"),
        ("link = 3\n[site]\n", "link is 3"),
        ("[[site]]\n", "site is"),
    ],
)
def test_text_that_is_no_site_file_is_refused_with_the_place(text: str, says: str) -> None:
    """What has no sections cannot be shown as a form; the reader's own message says why."""
    with pytest.raises(SiteFileError, match=re.escape(says)):
        SiteDraft(text, "odd.toml")


def test_file_that_cannot_be_read_is_refused_with_its_name(tmp_path: Path) -> None:
    """A missing file and one that is no text are told by name."""
    with pytest.raises(SiteFileError, match=r"none\.toml"):
        open_draft(tmp_path / "none.toml")
    (tmp_path / "bytes.toml").write_bytes(b"\xff\xfe")
    with pytest.raises(SiteFileError, match="not UTF-8"):
        open_draft(tmp_path / "bytes.toml")


def test_line_ends_of_another_system_stay(tmp_path: Path) -> None:
    """A file with carriage returns is read and changed without turning all its lines."""
    path = tmp_path / "dos.toml"
    path.write_bytes(COMMENTED.replace("\n", "\r\n").encode())
    draft = open_draft(path)
    draft.put_typed("site.latitude_deg", "58.1")
    assert draft.text == COMMENTED.replace("\n", "\r\n").replace("57.300", "58.1")
    assert changed_since(path, COMMENTED.replace("\n", "\r\n")) == ""
    path.write_bytes(b"")
    assert "Another program changed it" in changed_since(path, COMMENTED)


def test_link_taken_over_writes_only_what_is_not_by_default() -> None:
    """Port and form come in; a speed that is the default and was not given stays out."""
    draft = SiteDraft(NEW_SITE, "x")
    draft.put_typed("site.latitude_deg", "1")
    draft.put_typed("shaft.depth_m", "1")
    draft.add_link()
    taken = LinkSettings(
        url="COM4", delimiter=" ", columns=("time_s", "depth_m", "-", "tilt_a_deg"), checksum="xor"
    )
    take_link(draft, 0, taken)
    assert parse_site(draft.text, "x").links == (taken,)
    assert "baud" not in draft.text
    assert "form" not in draft.text


@pytest.mark.parametrize(("path", "default"), WITH_DEFAULT)
def test_default_as_typed_is_understood_as_itself(path: str, default: object) -> None:
    """For every key with a default, what is shown of it can be typed in, and then the file says the same."""
    plain = list(default) if isinstance(default, tuple) else default
    assert understood(path, typed(path, default)) == plain


@pytest.mark.parametrize(
    ("path", "count"), [("site.rock_density", 2), ("air.cross_flow", 4), ("limits.table_mm", 3)]
)
def test_tables_have_a_heading_for_each_number(path: str, count: int) -> None:
    """What the numbers of a row mean is known for every table."""
    assert shape(path) == "rows"
    assert len(headings(path)) == count


ANYTHING = st.text(st.characters(exclude_categories=["Cs", "Cc"]), max_size=20)


@settings(max_examples=25, deadline=None)
@given(st.lists(st.tuples(st.sampled_from(KEYS), ANYTHING), max_size=6))
def test_whatever_is_typed_the_text_stays_toml_and_keeps_its_comments(
    typing: list[tuple[str, str]],
) -> None:
    """No text of a person breaks the file: it is judged key by key, and undoing all gives the bytes back."""
    draft = SiteDraft(COMMENTED, "x")
    for path, text in typing:
        draft.put_typed(path, text)
    again = SiteDraft(draft.text, "x")
    assert all(again.value(path) == draft.value(path) for path, _ in typing)
    assert draft.faults() == again.faults()
    for comment in ("# Linden Cross, as found", "# the collar was", "# --- the shaft", "# not measured"):
        assert comment in draft.text
    for path, _ in typing:
        draft.put_typed(path, typed(path, SiteDraft(COMMENTED, "x").value(path)))
    assert draft.text == COMMENTED


@settings(max_examples=40, deadline=None)
@given(st.floats(-90.0, 90.0), st.floats(0.1, 12000.0), st.sampled_from(["guided", "hung", "drop"]))
def test_numbers_come_back_as_typed(latitude: float, depth: float, kind: str) -> None:
    """What is written is what the file reader gives, to the last bit."""
    text = edited(NEW_SITE, {"site.latitude_deg": understood("site.latitude_deg", repr(latitude))})
    draft = SiteDraft(text, "x")
    draft.put_typed("shaft.depth_m", repr(depth))
    draft.put_typed("run.kind", kind)
    site = parse_site(draft.text, "x").assumptions
    assert (site.shaft.depth, site.run.kind) == (depth, kind)
    assert repr(latitude).removesuffix(".0") in draft.text
