"""Inputs typed and turned over the assumptions of a site, and the assumptions that follow; knows no screen."""

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from math import isfinite, radians
from typing import Any

from eastfall.io import sitekeys
from eastfall.physics.errors import ParameterError
from eastfall.physics.settings import Assumptions, Body
from eastfall.tui.dials import (
    CONDITIONS,
    FLOW_SPEED,
    FLOW_TOWARD,
    IN_FILE,
    LEVEL,
    LINE_SPEED,
    OPTIONAL,
    RELEASE,
    Dial,
    value_of,
)
from eastfall.tui.units import METRIC, Units, size_of


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
            return IN_FILE if dial.path in {FLOW_SPEED, FLOW_TOWARD} else ""
        return value if isinstance(value, str) else _number(dial, value, self.units)

    def shown(self, dial: Dial) -> str:
        """Return what stands in a dial, or what nothing there means."""
        text = self.text(dial)
        if text:
            return text
        return "sphere" if dial.path == "body.drag_coefficient" else OPTIONAL.get(dial.path, "")

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
        if dial.key.low_is_out and low is not None and turned <= low:
            return self
        return self.put(dial, _number(dial, turned, self.units))

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
        if text == IN_FILE or (text == "" and dial.path in OPTIONAL):
            return None
        return self._in_range(dial, text)

    def _in_range(self, dial: Dial, text: str) -> float:
        mark, size = size_of(dial.key.unit, self.units)
        low, high = dial.span
        try:
            value = float(text) * size
        except ValueError:
            value = float("nan")
        short = low is not None and (value < low or (value == low and dial.key.low_is_out))
        if not isfinite(value) or short or (high is not None and value > high):
            begin = "more than" if dial.key.low_is_out else "from"
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

    def reckoned_in(self, units: Units, dials: tuple[Dial, ...]) -> "Inputs":
        """Return the same inputs typed in other units; what is no number stays as it is typed."""
        there = replace(self, units=units)
        typed = dict(self.typed)
        for dial in dials:
            if dial.path not in typed or self.unit(dial) == there.unit(dial):
                continue
            try:
                value = self.value(dial)
            except ValueError:
                continue
            typed[dial.path] = typed[dial.path] if value is None else _number(dial, value, units)
        return replace(there, typed=typed)

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


def _number(dial: Dial, value: float, units: Units) -> str:
    """Return a value in the unit of the key as it is typed in the reader's."""
    shown = f"{value / size_of(dial.key.unit, units)[1]:.6g}"
    return "0" if shown == "-0" else shown


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
