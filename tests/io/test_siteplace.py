"""What the models refuse of a site's numbers is told with file, line and key, wherever the models are built."""

from pathlib import Path

import pytest
from click.testing import CliRunner

from eastfall.io.errors import SiteFileError
from eastfall.io.pipeline import Pipeline
from eastfall.io.recording import open_recording
from eastfall.io.reduce import reduce_file
from eastfall.io.sitefile import parse_site
from eastfall.io.siteplace import refusals_of
from eastfall.physics.errors import ParameterError
from eastfall.tui.main import cli

pytestmark = pytest.mark.invariant

LOGS = Path(__file__).parents[2] / "replay_logs"
UPCAST = """\
# a shaft whose fan blows a ball upward
[site]
latitude_deg = 50.0
[shaft]
depth_m = 300.0
diameter_m = 5.0
[run]
kind = "drop"
[body]
mass_kg = 0.004
diameter_mm = 50.0
[air]
vertical_mps = -30.0
"""
SAYS = "line 13: air.vertical_mps is -30.0; expected an upcast too slow to carry the body"


def test_live_run_names_line_and_key() -> None:
    """A pipeline over a site that the models refuse says where the number stands, in the file's own unit."""
    with pytest.raises(SiteFileError, match=f"pit.toml, {SAYS}") as caught:
        Pipeline(parse_site(UPCAST, "pit.toml"))
    assert caught.value.key == "air.vertical_mps"


def test_record_under_such_a_site_names_line_and_key() -> None:
    """So do a replay and a reduction with another site file."""
    log = next(LOGS.glob("carnwick*"))
    site = parse_site(UPCAST, "pit.toml")
    with pytest.raises(SiteFileError, match=SAYS):
        open_recording(log, site).pipeline()
    with pytest.raises(SiteFileError, match=SAYS):
        reduce_file(log, site=site)


@pytest.mark.parametrize("more", [(), ("--budget",), ("--line",)])
def test_expect_names_line_and_key(tmp_path: Path, more: tuple[str, ...]) -> None:
    """The table, the budget and the line's own numbers; a line in still air needs no body."""
    path = tmp_path / "pit.toml"
    path.write_text(UPCAST)
    outcome = CliRunner().invoke(cli, ["expect", str(path), "--every", "100", *more])
    if more == ("--line",):
        assert outcome.exit_code == 0
    else:
        assert isinstance(outcome.exception, SiteFileError)
        assert SAYS in str(outcome.exception)


def test_value_is_told_as_it_stands_in_the_file() -> None:
    """Millimetres stay millimetres; of two keys of one name that one which has the value is meant."""
    site = parse_site(UPCAST, "pit.toml")
    with (
        pytest.raises(SiteFileError, match=r"line 11: body\.diameter_mm is 50\.0; expected less"),
        refusals_of(site),
    ):
        raise ParameterError("diameter", 0.05, "m", "less")
    with (
        pytest.raises(SiteFileError, match=r"line 6: shaft\.diameter_m is 5\.0; expected less"),
        refusals_of(site),
    ):
        raise ParameterError("diameter", 5.0, "m", "less")


def test_default_is_told_as_a_default() -> None:
    """A key that does not stand in the file has no line."""
    site = parse_site(UPCAST, "pit.toml")
    density = site.assumptions.air.density
    with pytest.raises(SiteFileError) as caught, refusals_of(site):
        raise ParameterError("density", density, "kg/m³", "thinner air")
    assert str(caught.value) == f"pit.toml: air.density_kgm3 is {density} by default; expected thinner air"


def test_what_is_no_key_of_the_site_stays_as_it_was() -> None:
    """A refusal that speaks of something else is not laid at the site's door."""
    site = parse_site(UPCAST, "pit.toml")
    with pytest.raises(ParameterError, match="apart is 3 m; expected less") as caught, refusals_of(site):
        raise ParameterError("apart", 3, "m", "less")
    assert not isinstance(caught.value, SiteFileError)
