"""From expected curves to what the prediction explorer says of them: lines, tables, budget; draws nothing."""

from collections.abc import Sequence
from dataclasses import dataclass
from math import hypot
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.budget import COVERAGE_FACTOR, combined
from eastfall.physics.expected import ExpectedCurve, expected_curve
from eastfall.physics.models import Pair
from eastfall.physics.settings import Assumptions
from eastfall.tui import words
from eastfall.tui.typed import example_depths, read_depth
from eastfall.tui.units import METRIC, Units

What = Literal["expected", "bob", "dropped"]
WHATS: tuple[What, ...] = ("expected", "bob", "dropped")
SAYS: dict[What, str] = {"expected": "expected", "bob": "hanging bob", "dropped": "dropped body"}


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Prospect:
    """One prediction, and the line speed that it is for [m/s]."""

    curve: ExpectedCurve
    speed: float

    @classmethod
    def of(cls, assumptions: Assumptions) -> "Prospect":
        """Work it out; raises ParameterError for assumptions outside the models' domain."""
        return cls(curve=expected_curve(assumptions), speed=assumptions.line_speed)

    @property
    def assumptions(self) -> Assumptions:
        """What it rests on."""
        return self.curve.assumptions

    @property
    def deepest(self) -> float:
        """Depth of the shaft [m]."""
        return self.assumptions.shaft.depth

    def offsets(self, what: What, depth: Sequence[float]) -> Pair:
        """Return east and north at depths, from the run's reference line [m], shape (2, n); NaN below the shaft."""
        z = np.where(np.asarray(depth, dtype=float) <= self.deepest, depth, np.nan)
        if what == "expected":
            return self.curve.expected(z, self.speed)
        return self.curve.look_up(self.curve.bob if what == "bob" else self.curve.body, z)

    def expanded(self, depth: Sequence[float]) -> Pair:
        """Return the expanded uncertainty (k = 2) of what is expected at depths [m], shape (2, n)."""
        return COVERAGE_FACTOR * self.curve.look_up(self.curve.u, np.asarray(depth, dtype=float))


def quarters(deepest: float) -> tuple[float, ...]:
    """Return the four depths of the table when none were asked for [m]."""
    return tuple(deepest * part for part in (0.25, 0.5, 0.75, 1.0))


def title(one: Prospect) -> str:
    """Return kind of run, line speed and reference line."""
    run = one.assumptions.run
    return f"{words.KIND[run.kind]} from {words.REFERENCE[run.reference]}"


def answer(one: Prospect, units: Units = METRIC) -> str:
    """Return what a plumb shaft would show at the bottom, as one line."""
    east, north = one.offsets("expected", [one.deepest])[:, 0]
    wide = float(np.max(one.expanded([one.deepest])))
    offset = f"E {units.signed(float(east))} N {units.signed(float(north))}"
    riding = f", line at {units.depth(one.speed)} {units.speed}" if one.speed else ""
    return f"EXPECT {units.depth(one.deepest)} {units.long}: {offset} ± {units.offset(wide)} {units.short}{riding}"


def least_gap(one: Prospect) -> float | None:
    """Return the least gap between the dropped body and the wall on its way [m]; None without a diameter."""
    shaft, body = one.assumptions.shaft, one.assumptions.body
    if shaft.diameter is None:
        return None
    inside = one.curve.depth <= shaft.depth
    east, north = (one.curve.body + one.curve.reference)[:, inside]
    room = (shaft.diameter - (body.diameter if body else 0.0)) / 2.0
    return float(np.min(room - np.hypot(east - shaft.centre_east, north - shaft.centre_north)))


def wall(one: Prospect, units: Units = METRIC) -> str:
    """Return where a dropped body meets the wall, or how far off it keeps, and how long it falls, as one line."""
    depth = one.curve.wall_contact_depth
    if depth is not None:
        return f"Dropped body: MEETS THE WALL at {units.depth(depth)} {units.long}."
    seconds = float(one.curve.look_up(one.curve.fall_time, [one.deepest])[0])
    speed = float(one.curve.look_up(one.curve.fall_speed, [one.deepest])[0])
    fall = f"falls {seconds:.1f} s, lands at {units.depth(speed, 0)} {units.speed}"
    gap = least_gap(one)
    if gap is None:
        return f"Dropped body: {fall}; no shaft diameter given, so no wall."
    return f"Dropped body: clear of the wall by {units.depth(gap, 2)} {units.long}; {fall}."


def table(
    one: Prospect, other: Prospect | None, what: What, depths: Sequence[float], units: Units = METRIC
) -> list[str]:
    """Return the numbers at depths, a head and a line each.

    Parameters
    ----------
    one, other : Prospect
        A, and B where there is one to compare with.
    what : {"expected", "bob", "dropped"}
        What is compared with B; alone, all three stand side by side.
    depths : sequence of float
        [m].
    units : Units
        Of the reader.
    """
    if other is None:
        columns = [one.offsets(which, depths) for which in WHATS]
        heads = ["expected E N", "± E N", "bob E N", "dropped E N"]
        columns.insert(1, one.expanded(depths))
    else:
        mine, its = one.offsets(what, depths), other.offsets(what, depths)
        columns, heads = [mine, its, mine - its], [f"A {SAYS[what]}", "B", "A less B"]
    lines = [f"{'depth ' + units.long:>9}" + "".join(f"{head:>{_WIDTH}}" for head in heads)]
    for row, depth in enumerate(depths):
        pairs = [
            f"{_number(pair[0, row], units, head)} {_number(pair[1, row], units, head)}"
            for head, pair in zip(heads, columns, strict=True)
        ]
        lines.append(f"{units.depth(depth):>9}" + "".join(f"{text:>{_WIDTH}}" for text in pairs))
    return lines


_WIDTH = 17


def _number(value: float, units: Units, head: str) -> str:
    return f"{units.offset(value) if head.startswith('±') else units.signed(value):>8}"


def budget(one: Prospect, depths: Sequence[float], units: Units = METRIC, room: int = 70) -> list[str]:
    """Return what each input contributes to the uncertainty of what is expected, the largest first, as lines.

    Parameters
    ----------
    one : Prospect
        The prediction.
    depths : sequence of float
        At most the three deepest are shown, as far as there is room [m].
    units : Units
        Of the reader.
    room : int
        Columns.
    """
    count = max(1, min(3, (room - _NAME) // _PAIR))
    name_room = min(_NAME, max(room - count * _PAIR, 8))
    shown = [depth for depth in depths if depth <= one.deepest][-count:]
    parts = np.abs(one.curve.budget.at(shown))
    named = zip(one.curve.budget.names, parts, strict=True)
    rows = sorted(named, key=lambda row: -hypot(*row[1][:, -1]))
    seen = [(name, part) for name, part in rows if part.max() >= _SMALL]
    seen.append(("together", combined(parts)))
    lines = [
        f"{units.short:<{name_room}}"
        + "".join(f"{f'{units.depth(depth)} {units.long}':>{_PAIR}}" for depth in shown),
        f"{'':<{name_room}}" + "".join(f"{'E':>6}{'N':>7}" for _ in shown),
    ]
    for name, part in seen:
        numbers = "".join(_pair_of(part[:, at], units) for at in range(len(shown)))
        lines.append(f"{name[: name_room - 1]:<{name_room}}{numbers}")
    small = [name for name, part in rows if part.max() < _SMALL]
    if small:
        lines.append(f"below {units.offset(_SMALL, 2)} {units.short}: {', '.join(small)}")
    return lines


_NAME, _PAIR = 22, 13
_SMALL = 1e-5
"""Parts below a hundredth of a millimetre are only named [m]."""


def _pair_of(part: NDArray[np.float64], units: Units) -> str:
    return f"{units.offset(float(part[0]), 2):>6}{units.offset(float(part[1]), 2):>7}"


def read_depths(text: str, deepest: float, units: Units = METRIC) -> tuple[float, ...]:
    """Read depths such as "100, 250, 940", or "100 250"; nothing typed is the quarters of the shaft.

    Returns
    -------
    tuple of float
        Rising [m], at most eight.

    Raises
    ------
    ValueError
        With one line that says what is accepted.
    """
    parts = text.replace(",", " ").replace(";", " ").split()
    bottom = f"{units.depth(deepest)} {units.long}"
    try:
        found = sorted({read_depth(one, units) for one in parts})
    except ValueError:
        example = example_depths(deepest, units)
        raise ValueError(f"Not understood. Depths: {example}, each at most {bottom}.") from None
    if len(found) > _MOST or (found and found[-1] > deepest * (1.0 + 1e-9)):
        raise ValueError(f"At most {_MOST} depths, each at most {bottom}.")
    return tuple(found) or quarters(deepest)


_MOST = 8
