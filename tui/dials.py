"""The inputs of a prediction in a table: which there are, their units, ranges and steps, and what a site says of each.

Names, ranges and units are those of the site file's keys; `inputs` changes them.
"""

from dataclasses import dataclass
from functools import cache
from math import degrees
from typing import Any

from eastfall.io import sitekeys
from eastfall.physics.settings import Assumptions

LINE_SPEED = "line speed"
FLOW_SPEED, FLOW_TOWARD = "cross-flow speed", "cross-flow toward"
LEVEL = "level"
"""Inputs that are no single key: speed of probe or line, the air across all of the shaft, the depth looked at."""


@cache
def _key(path: str) -> sitekeys.Key:
    """Return what the site file says of a key; it is gathered from annotations, which is slow."""
    found = sitekeys.key(path)
    assert found is not None, path  # noqa: S101 (a misspelt table of dials)
    return found


@dataclass(frozen=True, slots=True, kw_only=True)
class Dial:
    """One input.

    Parameters
    ----------
    path : str
        Key of the site file, or one of the names above.
    says : str
        What it is, in a few words.
    step : float
        What an arrow changes it by, in the unit shown.
    like : str
        The key whose unit and range it has, when it is no key itself.
    about : str
        A line of help; the key's own by default.
    """

    path: str
    says: str
    step: float = 1.0
    like: str = ""
    about: str = ""

    @property
    def key(self) -> sitekeys.Key:
        """What the site file says of it."""
        return _key(self.like or self.path)

    @property
    def help(self) -> str:
        """A line of help."""
        return self.about or self.key.help

    @property
    def span(self) -> tuple[float | None, float | None]:
        """Smallest and largest value, in the unit of the key."""
        return _SPANS.get(self.path, (self.key.low, self.key.high))


_SPANS = {FLOW_TOWARD: (-360.0, 360.0), FLOW_SPEED: (0.0, 40.0), "body.drag_coefficient": (0.0, 5.0)}

_AIR = (
    Dial(path="air.density_kgm3", says="air density", step=0.01),
    Dial(
        path=FLOW_SPEED,
        says="air across",
        step=0.1,
        like="air.vertical_mps",
        about="Cross-flow from collar to bottom",
    ),
    Dial(
        path=FLOW_TOWARD,
        says="  toward",
        step=15.0,
        like="instrument.a_azimuth_deg",
        about="Where that air goes, from north",
    ),
    Dial(path="air.vertical_mps", says="air downward", step=0.5),
)
CONDITIONS = (
    Dial(path="run.kind", says="run"),
    Dial(path="run.reference", says="offsets from"),
    Dial(path="site.latitude_deg", says="latitude", step=1.0),
    Dial(path="shaft.depth_m", says="depth", step=10.0),
    Dial(path="shaft.diameter_m", says="shaft diameter", step=0.1),
    Dial(
        path=LINE_SPEED,
        says="line speed",
        step=0.5,
        like="guide.line_speed_mps",
        about="Of probe or lowered line, down positive",
    ),
    Dial(path="body.mass_kg", says="body mass", step=0.1),
    Dial(path="body.diameter_mm", says="body diameter", step=1.0),
    Dial(path="body.drag_coefficient", says="body drag", step=0.05),
    Dial(path="line.bob_mass_kg", says="bob mass", step=5.0),
    Dial(path="line.bob_density_kgm3", says="bob density", step=100.0),
    Dial(path="line.diameter_mm", says="wire diameter", step=0.1),
    Dial(path="line.mass_per_length_kgpm", says="wire mass", step=0.001),
    *_AIR,
)
"""Inputs of the prediction explorer."""
RELEASE = (
    Dial(path=LEVEL, says="level looked at", step=10.0, like="shaft.depth_m", about="Depth of the landing"),
    Dial(path="body.release_east_mm", says="release east", step=10.0),
    Dial(path="body.release_north_mm", says="release north", step=10.0),
    Dial(path="body.u_release_mm", says="u of release", step=0.1),
    Dial(path="body.u_release_speed_mmps", says="u of its speed", step=0.5),
    Dial(path="body.mass_kg", says="body mass", step=0.1),
    Dial(path="body.diameter_mm", says="body diameter", step=1.0),
    Dial(path="body.drag_coefficient", says="body drag", step=0.05),
    Dial(path="site.latitude_deg", says="latitude", step=1.0),
    Dial(path="shaft.depth_m", says="shaft depth", step=10.0),
    Dial(path="shaft.diameter_m", says="shaft diameter", step=0.1),
    Dial(path="shaft.centre_east_m", says="its centre east", step=0.1),
    Dial(path="shaft.centre_north_m", says="its centre north", step=0.1),
    *_AIR,
)
"""Inputs of the drop planner."""
OPTIONAL = {"shaft.diameter_m": "not given", "body.mass_kg": "not given", "body.diameter_mm": "not given"}
"""What an empty input means, where it may be empty."""
IN_FILE = "as in file"


def _flow(table: tuple[tuple[float, float, float, float], ...], path: str) -> float | None:
    """Return speed or direction of one stretch of air across, 0 without any; None of several stretches."""
    if len(table) > 1:
        return None
    _, _, speed, toward = table[0] if table else (0.0, 0.0, 0.0, 0.0)
    return speed if path == FLOW_SPEED else degrees(toward)


def value_of(assumptions: Assumptions, dial: Dial) -> Any:
    """Return what assumptions say for a dial, in the unit of its key; None where they say nothing."""
    if dial.path == LINE_SPEED:
        return assumptions.line_speed
    if dial.path == LEVEL:
        return assumptions.shaft.depth
    if dial.path in {FLOW_SPEED, FLOW_TOWARD}:
        return _flow(assumptions.air.cross_flow, dial.path)
    section, _, name = dial.path.partition(".")
    record = getattr(assumptions, section)
    if record is None:
        return dial.key.default
    return sitekeys.from_si(name, getattr(record, sitekeys.si_name(name)))
