"""What is known of every key of the site file, and the one rule from its unit to SI.

The keys stand in `sitesections` and `readerkeys`, defaults in `physics.settings` alone: a key that is not given is
left out when the record is built. The site form and the messages read unit, range, default and help from here.
"""

import math
import re
from dataclasses import MISSING, dataclass, fields
from typing import Any, Literal, get_args

import msgspec
from msgspec import Meta

from eastfall.io.readerkeys import ColumnName, Form, LinkKeys, Section
from eastfall.io.sitesections import RECORDS, SECTIONS, SiteDocument
from eastfall.physics.settings import ARCSECOND, DEGREE

__all__ = [
    "RECORDS",
    "SECTIONS",
    "ColumnName",
    "Form",
    "Key",
    "LinkKeys",
    "SiteDocument",
    "all_keys",
    "from_si",
    "key",
    "names_in",
    "si_name",
    "to_si",
    "unit",
]

_UNITS: dict[str, tuple[str, str, float]] = {
    "_deg_per_c": ("_per_c", "deg/°C", DEGREE),
    "_degps": ("", "deg/s", DEGREE),
    "_deg": ("", "deg", DEGREE),
    "_arcsec": ("", "arcsec", ARCSECOND),
    "_mmps": ("", "mm/s", 1e-3),
    "_mmpm": ("", "mm/m", 1e-3),
    "_mps2": ("", "m/s²", 1.0),
    "_mps": ("", "m/s", 1.0),
    "_mm": ("", "mm", 1e-3),
    "_kgpm": ("", "kg/m", 1.0),
    "_kgm3": ("", "kg/m³", 1.0),
    "_kg": ("", "kg", 1.0),
    "_gpa": ("", "GPa", 1e9),
    "_ppmpc": ("", "1e-6/°C", 1e-6),
    "_cpkm": ("", "°C/km", 1e-3),
    "_m": ("", "m", 1.0),
    "_s": ("", "s", 1.0),
    "_v": ("", "V", 1.0),
    "_days": ("_days", "d", 1.0),
}
"""Suffix of a key: what stands for it in the SI name, how it is shown, and its size in SI units."""
_KELVIN = 273.15


def _suffix(name: str) -> str:
    return next((one for one in _UNITS if name.endswith(one)), "")


def si_name(name: str) -> str:
    """Return the field of `physics.settings` that a key stands for."""
    if name.endswith("temperature_c"):
        return name.removesuffix("_c")
    suffix = _suffix(name)
    return name.removesuffix(suffix) + _UNITS[suffix][0] if suffix else name


def unit(name: str) -> str:
    """Return the unit of a key as shown to people; empty for a word or a pure number."""
    if name.endswith("temperature_c"):
        return "°C"
    suffix = _suffix(name)
    return _UNITS[suffix][1] if suffix else ""


def to_si(name: str, value: Any) -> Any:
    """Convert the value of a key to SI units and radians."""
    if name == "cross_flow":
        return tuple((top, end, speed, toward * DEGREE) for top, end, speed, toward in value)
    if name in {"deflections_arcsec", "table_mm"}:
        size = _UNITS[_suffix(name)][2]
        return tuple((row[0], *(one * size for one in row[1:])) for row in value)
    if isinstance(value, str | tuple):
        return value
    if name.endswith("temperature_c"):
        return value + _KELVIN
    suffix = _suffix(name)
    return value * _UNITS[suffix][2] if suffix else value


def from_si(name: str, value: Any) -> Any:
    """Convert back: what to write for a key; a number is rounded to the 12 digits that survive the conversion."""
    if name == "cross_flow":
        return [[top, end, speed, _rounded(toward / DEGREE)] for top, end, speed, toward in value]
    if name in {"deflections_arcsec", "table_mm"}:
        size = _UNITS[_suffix(name)][2]
        return [[row[0], *(_rounded(one / size) for one in row[1:])] for row in value]
    if isinstance(value, tuple):
        return [list(one) if isinstance(one, tuple) else one for one in value]
    if isinstance(value, str) or value is None:
        return value
    if name.endswith("temperature_c"):
        return _rounded(value - _KELVIN)
    suffix = _suffix(name)
    return _rounded(value / _UNITS[suffix][2]) if suffix else value


def _rounded(value: float) -> float:
    return float(f"{value:.12g}") if math.isfinite(value) else value


@dataclass(frozen=True, slots=True, kw_only=True)
class Key:
    """One key, for messages and for the site form."""

    section: str
    name: str
    unit: str
    help: str
    choices: tuple[str, ...]
    low: float | None
    high: float | None
    low_is_out: bool
    """Whether `low` itself is not accepted."""
    required: bool
    default: Any
    """In the unit of the key; None where there is none."""
    expectation: str
    """What is accepted, in words, as it follows "expected"."""


def names_in(section: str) -> list[str]:
    """Return the keys of a section, or the sections for an empty name."""
    plain = re.sub(r"\[\d+\]", "", section)
    struct = SECTIONS.get(plain)
    return list(struct.__struct_fields__) if struct is not None else list(SECTIONS)


def required_in(section: str) -> list[str]:
    """Return the keys that a section cannot do without."""
    struct = SECTIONS[section]
    return [name for name in struct.__struct_fields__ if _is_required(struct, name)]


def key(path: str) -> Key | None:
    """Return what is known of "section.key"; None for anything else."""
    section, _, name = path.partition(".")
    struct = SECTIONS.get(section)
    if struct is None or name not in struct.__struct_fields__:
        return None
    return _described(section, name, struct)


def all_keys() -> list[Key]:
    """Return every key in the order of the file."""
    return [
        _described(section, name, struct)
        for section, struct in SECTIONS.items()
        for name in struct.__struct_fields__
    ]


def _described(section: str, name: str, struct: type[Section]) -> Key:
    annotation = struct.__annotations__[name]
    candidates = (annotation, *get_args(annotation))
    base, meta = get_args(next(one for one in candidates if hasattr(one, "__metadata__")))[:2]
    choices = get_args(base) if _is_choice(base) else ()
    low, high = _range(meta)
    return Key(
        section=section,
        name=name,
        unit=unit(name),
        help=meta.description or "",
        choices=tuple(choices),
        low=low,
        high=high,
        low_is_out=meta.gt is not None,
        required=_is_required(struct, name),
        default=_default(section, name),
        expectation=_in_words(base, meta, tuple(choices), unit(name)),
    )


def _is_choice(annotation: Any) -> bool:
    return getattr(annotation, "__origin__", None) is Literal


def _is_required(struct: type[Section], name: str) -> bool:
    return any(one.name == name and one.required for one in msgspec.structs.fields(struct))


def _default(section: str, name: str) -> Any:
    if section == "link":
        found = next(one for one in msgspec.structs.fields(LinkKeys) if one.name == name)
        return None if found.required else found.default
    default = next(one.default for one in fields(RECORDS[section]) if one.name == si_name(name))
    return None if default is MISSING else from_si(name, default)


def _in_words(base: Any, meta: Meta, choices: tuple[str, ...], shown: str) -> str:
    if choices:
        return "one of " + ", ".join(choices)
    if base is str:
        return (
            meta.description
            if meta.pattern and meta.description
            else "one character"
            if meta.max_length == 1
            else f"text of at most {meta.max_length} characters"
        )
    low, high = _range(meta)
    if base in {float, int} and low is not None and high is not None:
        what = "a whole number" if base is int else "a number"
        between = f"more than {low:.9g} and at most" if meta.gt is not None else f"from {low:.9g} to"
        return f"{what} {between} {high:.9g} {shown}".rstrip()
    return meta.description or "another value"


def _range(meta: Meta) -> tuple[float | None, float | None]:
    return (meta.ge if meta.ge is not None else meta.gt), (meta.le if meta.le is not None else meta.lt)
