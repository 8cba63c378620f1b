"""The inputs of a prediction as numbers to type and choices to turn, over the assumptions of a site; knows no screen.

Names, ranges and units are those of the site file's keys; in feet and inches lengths are typed in those.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from math import degrees, isfinite, radians
from typing import Any

from eastfall.io import sitekeys
from eastfall.physics.errors import ParameterError
from eastfall.physics.settings import Assumptions, Body
from eastfall.tui.units import METRIC, Units, size_of

LINE_SPEED = "line speed"
FLOW_SPEED, FLOW_TOWARD = "cross-flow speed", "cross-flow toward"
LEVEL = "level"
"""Inputs that are no single key: speed of probe or line, the air across all of the shaft, the depth looked at."""


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
        found = sitekeys.key(self.like or self.path)
        assert found is not None, self.path  # noqa: S101 (a misspelt table of dials)
        return found

    @property
    def help(self) -> str:
        """A line of help."""
        return self.about or self.key.help

    @property
    def span(self) -> tuple[float | None, float | None]:
        """Smallest and largest value, in the unit of the key."""
        return _SPANS.get(self.path, (self.key.low, self.key.high))

    @property
    def lowest_is_out(self) -> bool:
        """Whether the smallest value itself is not accepted."""
        return "more than" in self.key.expectation


_SPANS = {FLOW_TOWARD: (-360.0, 360.0), FLOW_SPEED: (0.0, 40.0), "body.drag_coefficient": (0.0, 5.0)}


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
"""Inputs of the drop planner."""
_OPTIONAL = {"shaft.diameter_m": "not given", "body.mass_kg": "not given", "body.diameter_mm": "not given"}
"""What an empty input means, where it may be empty."""
_IN_FILE = "as in file"


def line_speed(assumptions: Assumptions) -> float:
    """Return the speed that a prediction is for [m/s], down positive; of a drop there is none."""
    speeds = {"guided": assumptions.guide.line_speed, "hung": assumptions.line.line_speed}
    return speeds.get(assumptions.run.kind, 0.0)


def value_of(assumptions: Assumptions, dial: Dial) -> Any:
    """Return what assumptions say for a dial, in the unit of its key; None where they say nothing."""
    flow = assumptions.air.cross_flow
    match dial.path:
        case "line speed":
            return line_speed(assumptions)
        case "cross-flow speed":
            return (flow[0][2] if flow else 0.0) if len(flow) < 2 else None
        case "cross-flow toward":
            return (degrees(flow[0][3]) if flow else 0.0) if len(flow) < 2 else None
        case "level":
            return assumptions.shaft.depth
    section, _, name = dial.path.partition(".")
    record = getattr(assumptions, section)
    if record is None:
        return dial.key.default
    return sitekeys.from_si(name, getattr(record, sitekeys.si_name(name)))


@dataclass(frozen=True, slots=True, kw_only=True)
class Inputs:
    """What was changed against a site.

    Parameters
    ----------
    base : Assumptions
        Of the site.
    units : Units
        That lengths are typed in.
    typed : mapping
        From the path of a dial to its text as it stands; the others are as in the site.
    """

    base: Assumptions
    units: Units = METRIC
    typed: Mapping[str, str] = field(default_factory=dict)

    def unit(self, dial: Dial) -> str:
        """Return the unit shown beside a dial."""
        return size_of(dial.key.unit, self.units)[0]

    def text(self, dial: Dial) -> str:
        """Return what stands in a dial."""
        if dial.path in self.typed:
            return self.typed[dial.path]
        value = value_of(self.base, dial)
        if value is None:
            return _IN_FILE if dial.path in {FLOW_SPEED, FLOW_TOWARD} else ""
        return value if isinstance(value, str) else self._number(dial, value)

    def _number(self, dial: Dial, value: float) -> str:
        shown = f"{value / size_of(dial.key.unit, self.units)[1]:.6g}"
        return "0" if shown == "-0" else shown

    def shown(self, dial: Dial) -> str:
        """Return what stands in a dial, or what nothing there means."""
        text = self.text(dial)
        if text:
            return text
        return "sphere" if dial.path == "body.drag_coefficient" else _OPTIONAL.get(dial.path, "")

    def put(self, dial: Dial, text: str) -> "Inputs":
        """Return the inputs with another text in a dial."""
        return replace(self, typed={**self.typed, dial.path: text})

    def restored(self, dial: Dial | None = None) -> "Inputs":
        """Return the inputs with one dial, or all, as in the site."""
        if dial is None:
            return replace(self, typed={})
        return replace(self, typed={name: one for name, one in self.typed.items() if name != dial.path})

    def stepped(self, dial: Dial, by: int) -> "Inputs":
        """Return the inputs with a dial turned by steps, no farther than its range, or to its next choice."""
        choices = dial.key.choices
        if choices:
            at = choices.index(self.text(dial)) + by
            return self.put(dial, choices[at % len(choices)])
        try:
            value = self.value(dial)
        except ValueError:
            value = None
        start = value if isinstance(value, float) else 0.0
        size = size_of(dial.key.unit, self.units)[1]
        low, high = dial.span
        turned = start + by * dial.step * size
        turned = min(turned, high) if high is not None else turned
        turned = max(turned, low) if low is not None else turned
        if dial.lowest_is_out and low is not None and turned <= low:
            return self
        return self.put(dial, self._number(dial, turned))

    def value(self, dial: Dial) -> Any:
        """Return what a dial says, in the unit of its key; None for nothing.

        Raises
        ------
        ValueError
            With one line that says what is accepted.
        """
        text = self.text(dial).strip()
        if dial.key.choices:
            return text
        if dial.path == "body.drag_coefficient" and text in {"", "sphere"}:
            return "sphere"
        if text == _IN_FILE or (text == "" and dial.path in _OPTIONAL):
            return None
        return self._in_range(dial, text)

    def _in_range(self, dial: Dial, text: str) -> float:
        mark, size = size_of(dial.key.unit, self.units)
        low, high = dial.span
        try:
            value = float(text) * size
        except ValueError:
            value = float("nan")
        short = low is not None and (value < low or (value == low and dial.lowest_is_out))
        if not isfinite(value) or short or (high is not None and value > high):
            begin = "more than" if dial.lowest_is_out else "from"
            span = f"{begin} {_round(low, size)} to {_round(high, size)} {mark}".rstrip()
            raise ValueError(f"{dial.says.strip()}: {text or 'nothing'}; expected a number {span}")
        return value

    def assumptions(self, dials: tuple[Dial, ...] = CONDITIONS) -> Assumptions:
        """Return the assumptions with all changes made.

        Raises
        ------
        ValueError
            With one line, for a dial that is out of range or does not go with another.
        """
        values = {one.path: self.value(one) for one in dials if one.path in self.typed}
        try:
            return _applied(self.base, values)
        except ParameterError as error:
            raise ValueError(f"{error.name.replace('_', ' ')}: expected {error.expected}") from error

    def against(self, other: "Inputs", dials: tuple[Dial, ...] = CONDITIONS) -> str:
        """Return how B, these inputs, differs from A, the others, as one line."""
        apart = [
            f"{dial.says.strip()} {self.shown(dial)} {self.unit(dial)}".rstrip()
            for dial in dials
            if self.text(dial) != other.text(dial)
        ]
        return f"B has {', '.join(apart)}" if apart else "B has the same inputs as A"

    def level(self, deepest: float) -> float:
        """Return the depth looked at [m]: as typed, or the deepest.

        Raises
        ------
        ValueError
            When it is below the deepest.
        """
        if LEVEL not in self.typed:
            return deepest
        level = float(self.value(RELEASE[0]))
        if level > deepest:
            bottom = f"{self.units.depth(deepest)} {self.units.long}"
            raise ValueError(
                f"level looked at: {self.text(RELEASE[0])}; expected at most the shaft's {bottom}"
            )
        return level


def _round(value: float | None, size: float) -> str:
    return "any" if value is None else f"{value / size:.5g}"


def _applied(base: Assumptions, values: Mapping[str, Any]) -> Assumptions:
    changed: dict[str, Any] = {}
    for path, value in values.items():
        section, _, name = path.partition(".")
        if name:
            changed.setdefault(section, {})[sitekeys.si_name(name)] = (
                None if value is None else sitekeys.to_si(name, value)
            )
    body = _body(base.body, changed.pop("body", {}))
    records = {section: replace(getattr(base, section), **fields) for section, fields in changed.items()}
    made = replace(base, body=body, **records)
    return _with_flow(_with_speed(made, values), values)


def _body(base: Body | None, fields: dict[str, Any]) -> Body | None:
    """Return the body with changes; none at all when neither mass nor diameter is given."""
    known = {name: getattr(base, name) for name in Body.__slots__} if base is not None else {}
    known |= fields
    mass, diameter = known.get("mass"), known.get("diameter")
    if mass is None and diameter is None:
        return None
    if mass is None or diameter is None:
        raise ParameterError(
            "body", None, "", "both its mass and its diameter, or neither: a point in vacuum"
        )
    return Body(**known)


def _with_speed(made: Assumptions, values: Mapping[str, Any]) -> Assumptions:
    if LINE_SPEED not in values:
        return made
    speed = values[LINE_SPEED]
    guide, line = replace(made.guide, line_speed=speed), replace(made.line, line_speed=speed)
    return replace(made, guide=guide, line=line)


def _with_flow(made: Assumptions, values: Mapping[str, Any]) -> Assumptions:
    """Blow across from collar to bottom, unless the site's own table stands."""
    speed, toward = values.get(FLOW_SPEED), values.get(FLOW_TOWARD)
    if speed is None and toward is None:
        return made
    row = made.air.cross_flow[0] if len(made.air.cross_flow) == 1 else (0.0, made.shaft.depth, 0.0, 0.0)
    blown = (
        row[0],
        max(row[1], made.shaft.depth),
        row[2] if speed is None else speed,
        row[3] if toward is None else radians(toward),
    )
    flow = (blown,) if blown[2] > 0.0 else ()
    return replace(made, air=replace(made.air, cross_flow=flow))
