"""What a person types: depths, moments, landings; read, or refused with an example that fits the shaft."""

from math import isfinite, nan

from eastfall.io.decoded import believed
from eastfall.tui.units import FEET, METRIC, Units


def example_depth(deepest: float, units: Units = METRIC, part: float = 0.65) -> str:
    """Return a depth as one would type it, some way down a shaft of `deepest` [m], without its unit."""
    return units.depth(part * deepest)


def example_depths(deepest: float, units: Units = METRIC) -> str:
    """Return three depths as one would type them."""
    return " ".join(example_depth(deepest, units, part) for part in (0.1, 0.3, 0.6))


def example_mark(deepest: float, units: Units = METRIC) -> str:
    """Return a landing as one would type it."""
    return f"{units.depth(deepest)} {units.offset(0.0055)} {units.offset(-0.0032)}"


def read_moment(text: str, deepest: float, units: Units = METRIC) -> tuple[str, float]:
    """Read where to jump: "612.5 m" or "2009 ft" is a depth, "12:30" or "1:02:30" or "90 s" a time [s].

    Parameters
    ----------
    text : str
        As typed.
    deepest : float
        Depth of the shaft, for the example in what is said of a text that is not understood [m].
    units : Units
        What a depth without a unit is in.

    Returns
    -------
    tuple of str and float
        "depth" and metres, or "time" and seconds from the start of the run.

    Raises
    ------
    ValueError
        With one line that says what is understood.
    """
    plain = text.strip().lower().replace(",", ".")
    try:
        if ":" in plain:
            parts = [_not_negative(float(one)) for one in plain.split(":")]
            return "time", sum(part * 60.0**power for power, part in enumerate(reversed(parts)))
        if plain.endswith("s"):
            return "time", _not_negative(float(plain[:-1]))
        return "depth", read_depth(plain, units)
    except ValueError:
        example = f"{example_depth(deepest, units)} {units.long}"
        raise ValueError(f"Not understood. A depth: {example}. A time: 12:30 or 90 s.") from None


def read_depth(text: str, units: Units = METRIC) -> float:
    """Return a typed depth [m]; "m" or "ft" behind it overrules the units.

    Raises
    ------
    ValueError
        When it is no number of zero or more.
    """
    plain = text.strip().lower().replace(",", ".")
    size = {"m": 1.0, "ft": FEET.long_size}
    mark = next((one for one in size if plain.endswith(one)), "")
    return _not_negative(float(plain.removesuffix(mark))) * size.get(mark, units.long_size)


def read_mark(text: str, deepest: float, units: Units = METRIC) -> tuple[float, float, float]:
    """Read where a body landed: depth in the long unit, then east and north in the short one, as "210 5.5 -3.2".

    Parameters
    ----------
    text : str
        As typed.
    deepest : float
        Depth of the shaft, for the example [m].
    units : Units
        Of the reader.

    Returns
    -------
    tuple of float
        Depth, east and north [m].

    Raises
    ------
    ValueError
        With one line that says what is understood.
    """
    try:
        plain = text.replace(";", " ").replace(", ", " ").replace(",", ".")
        depth, east, north = (float(one) for one in plain.split())
    except ValueError:
        depth = east = north = nan
    depth, east, north = depth * units.long_size, east * units.short_size, north * units.short_size
    within = believed("depth_m", depth) and believed("east_mm", east) and believed("north_mm", north)
    if not (within and depth >= 0.0):
        raise ValueError(
            f"three numbers: depth in {units.long_name}, east and north in {units.short_name}, "
            f"as {example_mark(deepest, units)}"
        )
    return depth, east, north


def _not_negative(value: float) -> float:
    if not (isfinite(value) and value >= 0.0):
        raise ValueError(value)
    return value
