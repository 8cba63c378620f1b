"""Lengths as a reader wants them: metres and millimetres, or feet and inches; files and records stay metric."""

import re
from dataclasses import dataclass
from math import isfinite
from typing import Literal

Name = Literal["metric", "feet"]

NONE = "–"
"""Stands where there is no number."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Units:
    """One pair of units: a long one for depths, a short one for offsets.

    Parameters
    ----------
    name : {"metric", "feet"}
        As the settings call it.
    long, short : str
        The marks that stand beside the numbers.
    long_size, short_size : float
        What one of each is [m].
    finer : int
        Decimal places of the short unit beyond those that millimetres would have.
    """

    name: Name
    long: str
    short: str
    long_size: float
    short_size: float
    finer: int

    @property
    def speed(self) -> str:
        """The mark of a speed: the long unit per second."""
        return f"{self.long}/s"

    @property
    def depth_head(self) -> str:
        """What stands over a column of depths, seven letters in either unit."""
        return f"depth {self.long}" if self.name == "metric" else f"{self.long} down"

    def depth(self, value: float, places: int = 1) -> str:
        """Return metres in the long unit, without its mark."""
        return _written(value / self.long_size, places)

    def offset(self, value: float, places: int = 1) -> str:
        """Return metres in the short unit, without its mark; `places` are those of millimetres."""
        return _written(value / self.short_size, self._places(places))

    def signed(self, value: float, places: int = 1) -> str:
        """Return metres in the short unit with their sign, without the mark."""
        return _written(value / self.short_size, self._places(places), "+")

    def _places(self, places: int) -> int:
        return places + self.finer

    @property
    def long_name(self) -> str:
        """The long unit as a word."""
        return {"metric": "metres", "feet": "feet"}[self.name]

    @property
    def short_name(self) -> str:
        """The short unit as a word."""
        return {"metric": "millimetres", "feet": "inches"}[self.name]

    def in_words(self) -> str:
        """Return both units as a sentence part."""
        return f"{self.long_name} and {self.short_name}" + (", decimal" if self.name == "feet" else "")


def _written(value: float, places: int, sign: str = "") -> str:
    """Return a number of so many places; nothing is written as minus nothing."""
    if not isfinite(value):
        return NONE
    return f"{round(value, places) + 0.0:{sign}.{places}f}"


METRIC = Units(name="metric", long="m", short="mm", long_size=1.0, short_size=1e-3, finer=0)
FEET = Units(name="feet", long="ft", short="in", long_size=0.3048, short_size=0.0254, finer=2)
"""The international foot of 0.3048 m exactly and the inch of 25.4 mm (agreement of 1959; NIST Special Publication
811, 2008, appendix B.8). Two places more than millimetres: 0.01 in is 0.25 mm."""
UNITS: dict[Name, Units] = {"metric": METRIC, "feet": FEET}


def size_of(mark: str, units: Units) -> tuple[str, float]:
    """Return how a metric unit of the site file is shown to a reader, and what one of the shown is in it.

    Parameters
    ----------
    mark : str
        As the site file's keys have it: "m", "mm", "m/s", "mm/s"; any other is left as it is.
    units : Units
        Of the reader.

    Returns
    -------
    tuple of str and float
        ("ft", 0.3048) for "m" in feet and inches.
    """
    if units.name == "metric":
        return mark, 1.0
    return {
        "m": (units.long, units.long_size),
        "mm": (units.short, units.short_size * 1e3),
        "m/s": (units.speed, units.long_size),
        "mm/s": (f"{units.short}/s", units.short_size * 1e3),
    }.get(mark, (mark, 1.0))


_NUMBER = r"[+-]?\d+(?:\.\d+)?"
_LENGTHS = re.compile(
    rf"(?<![\w.:/+-])(?<!\d, )((?:(?<=\bat )(?:{_NUMBER}, )+)?{_NUMBER}) (mm/s|mm|m/s|m)(?![\w/²³])"
)
"""A number, or some behind "at", with a unit."""


def lengths_in(sentence: str, units: Units) -> str:
    """Return a sentence with its metric lengths and speeds in a reader's units, no coarser than they were written.

    Parameters
    ----------
    sentence : str
        Of the engine, which speaks in metres and millimetres: "at 212.3 m, 15.8 mm", "at 10, 20 m".
    units : Units
        Of the reader.
    """
    if units.name == "metric":
        return sentence

    def changed(found: re.Match[str]) -> str:
        mark, size = size_of(found[2], units)
        finer = units.finer if found[2].startswith("mm") else 0

        def number(one: re.Match[str]) -> str:
            places = len(one[0].partition(".")[2]) + finer
            sign = "+" if one[0].startswith("+") else ""
            return f"{float(one[0]) / size:{sign}.{places}f}"

        return f"{re.sub(_NUMBER, number, found[1])} {mark}"

    return _LENGTHS.sub(changed, sentence)
