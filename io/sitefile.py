"""The site file: TOML text in the units of its keys, checked key by key, into assumptions in SI units.

The keys and what they mean stand in `io.sitekeys`; here they are read, refused with their place, and converted.
"""

import difflib
import math
import re
import tomllib
from codecs import BOM_UTF8
from collections.abc import Iterator
from dataclasses import dataclass, replace
from datetime import date
from pathlib import Path
from typing import Any

import msgspec

from eastfall.io import sitekeys
from eastfall.io.checksum import Checksum
from eastfall.io.columns import ColumnsDecoder, DecimalSign
from eastfall.io.errors import SiteFileError
from eastfall.io.sitekeys import Form, SiteDocument
from eastfall.io.siteplace import Place
from eastfall.physics.errors import ParameterError
from eastfall.physics.settings import Assumptions

_LARGEST = 1_000_000
"""Bytes of a site file; a larger file is something else."""


HAND = "hand:"
"""The URL of a link without an instrument: a person reads offsets by eye and types them on the dashboard."""


@dataclass(frozen=True, slots=True, kw_only=True)
class LinkSettings:
    """One instrument link and the form of its lines."""

    url: str
    baud: int = 9600
    form: Form = "columns"
    columns: tuple[str, ...] = ("depth_m", "tilt_a_deg", "tilt_b_deg")
    delimiter: str = ","
    checksum: Checksum = "none"
    decimal: DecimalSign = "point"
    latency: float = 0.0
    """How much older a reading is than its arrival [s]."""


@dataclass(frozen=True, slots=True, kw_only=True)
class SiteFile:
    """A site file as read: its text for the record, and what it says."""

    path: str
    text: str
    assumptions: Assumptions
    links: tuple[LinkSettings, ...]
    given: frozenset[str]
    """The keys that stand in the file, as "section.key"; all others are defaults."""
    notes: tuple[str, ...] = ()
    """What a reader of the answer must know of the site's own statements on that day."""

    @property
    def by_hand(self) -> bool:
        """Whether no instrument speaks: silence is no fault then."""
        return bool(self.links) and all(one.url == HAND for one in self.links)


def load_site(path: Path, *, on: date | None = None) -> SiteFile:
    """Read and check a site file.

    Parameters
    ----------
    path : Path
        The file.
    on : date, optional
        The day of the run, for the magnetic declination and the age of the calibration; today by default.

    Raises
    ------
    SiteFileError
        With the file, the line and the key, what stands there and what was expected.
    """
    try:
        with path.open("rb") as file:
            raw = file.read(_LARGEST + 1)
    except OSError as error:
        raise SiteFileError(f"{path}: {error.strerror or error}; expected a site file (TOML)") from error
    if len(raw) > _LARGEST:
        raise SiteFileError(f"{path}: too large; expected a site file of at most {_LARGEST} bytes")
    try:
        text = decoded(raw)
    except UnicodeDecodeError as error:
        line = raw.count(b"\n", 0, error.start) + 1
        raise SiteFileError(f"{path}, line {line}: not UTF-8 text; expected a site file (TOML)") from error
    return parse_site(text, str(path), on=on)


def decoded(raw: bytes) -> str:
    """Return the text of a site file: UTF-8, with or without the mark that some editors put in front."""
    return raw.removeprefix(BOM_UTF8).decode("utf-8")


def parse_site(text: str, source: str, *, on: date | None = None) -> SiteFile:
    """Check the text of a site file.

    Parameters
    ----------
    text : str
        TOML.
    source : str
        What to call it in messages.
    on : date, optional
        The day of the run, for the magnetic declination and the age of the calibration; today by default.

    Raises
    ------
    SiteFileError
        As `load_site`.
    """
    try:
        tree = tomllib.loads(text)
    except (tomllib.TOMLDecodeError, RecursionError) as error:
        raise SiteFileError(
            f"{source}: not TOML: {error}; expected lines such as latitude_deg = 57.3"
        ) from error
    place = Place(source, text)
    _date_as_text(tree)
    for path, value in _leaves(tree, ""):
        if isinstance(value, float) and not math.isfinite(value):
            raise place.error(path, value, "a finite number")
    document = _converted(tree, place)
    assumptions = _assumptions(document, tree, place)
    links = tuple(_link(one) for one in document.link)
    _check_columns(assumptions, links, place)
    notes = _calibration_notes(assumptions, place, on)
    return SiteFile(
        path=source,
        text=text,
        assumptions=_with_true_north(assumptions, place, on),
        links=links,
        given=frozenset(
            f"{section}.{key}" for section, keys in tree.items() if section != "link" for key in keys
        ),
        notes=notes,
    )


def _date_as_text(tree: dict[str, Any]) -> None:
    """Take a date that stands without quotes, as TOML may have it, for its text."""
    instrument = tree.get("instrument")
    if isinstance(instrument, dict) and type(instrument.get("calibrated_on")) is date:
        instrument["calibrated_on"] = instrument["calibrated_on"].isoformat()


def _leaves(tree: object, path: str) -> Iterator[tuple[str, object]]:
    if isinstance(tree, dict):
        for key, value in tree.items():
            yield from _leaves(value, f"{path}.{key}" if path else key)
    elif isinstance(tree, list):
        for number, value in enumerate(tree):
            yield from _leaves(value, f"{path}[{number}]")
    else:
        yield path, tree


def _at(tree: object, path: str) -> object:
    for step in re.findall(r"[^.\[\]]+", path):
        if isinstance(tree, list) and step.isdigit() and int(step) < len(tree):
            tree = tree[int(step)]
        elif isinstance(tree, dict):
            tree = tree.get(step)
        else:
            return None
    return tree


def _converted(tree: dict[str, Any], place: Place) -> SiteDocument:
    try:
        return msgspec.convert(tree, SiteDocument)
    except msgspec.ValidationError as error:
        what, _, at = str(error).partition(" - at `$")
        path = at.removesuffix("`").lstrip(".")
    unknown = re.match(r"Object contains unknown field `(.*)`", what, re.DOTALL)
    missing = re.match(r"Object missing required field `(.*)`", what)
    if unknown:
        raise _unknown_key(unknown[1], path, place)
    if missing:
        full = f"{path}.{missing[1]}" if path else missing[1]
        where = place.line_of(path) if path else None
        head = f"{place.source}, line {where}" if where else place.source
        raise SiteFileError(f"{head}: {full} is missing; expected {_expectation(full, '')}", key=full)
    raise place.error(path, _at(tree, path), _expectation(path, what))


def _unknown_key(key: str, section: str, place: Place) -> SiteFileError:
    known = sitekeys.names_in(section)
    near = difflib.get_close_matches(key, known, n=1)
    hint = f"did you mean {near[0]}? " if near else ""
    path = f"{section}.{key}" if section else key
    line = place.line_of(path)
    where = f"{place.source}, line {line}" if line else place.source
    shown = ascii(key)[1:-1]
    listed = ", ".join(known)
    inside = f"in [{section}]" if section else "at the top level"
    return SiteFileError(f"{where}: unknown key {shown} {inside}; {hint}expected one of {listed}", key=path)


def _expectation(path: str, what: str) -> str:
    key = sitekeys.key(re.sub(r"\[\d+\]", "", path))
    if key is not None:
        return key.expectation
    if path == "link":
        return "[[link]], in double brackets, once for each link"
    if re.fullmatch(r"link\[\d+\]", path):
        return "a section [[link]] with url"
    if path in sitekeys.SECTIONS:
        needed = sitekeys.required_in(path)
        return f"a section [{path}]" + (f" with {' and '.join(needed)}" if needed else "")
    return what.replace("`", "").removeprefix("Expected ")


def _assumptions(document: SiteDocument, tree: dict[str, Any], place: Place) -> Assumptions:
    records: dict[str, Any] = {}
    for section, record in sitekeys.RECORDS.items():
        given = getattr(document, section)
        if given is None:
            continue
        try:
            records[section] = record(**_si_fields(given))
        except ParameterError as error:
            # The record names its field; the key of the same name stands in this section.
            keys = [key for key in sitekeys.names_in(section) if sitekeys.si_name(key) == error.name]
            path = f"{section}.{keys[0] if keys else error.name}"
            raise place.error(path, _at(tree, path), error.expected) from error
    return Assumptions(**records)


def _si_fields(section: msgspec.Struct) -> dict[str, Any]:
    fields = {}
    for name in section.__struct_fields__:
        value = getattr(section, name)
        if value is not msgspec.UNSET:
            fields[sitekeys.si_name(name)] = sitekeys.to_si(name, value)
    return fields


def _link(section: sitekeys.LinkKeys) -> LinkSettings:
    return LinkSettings(
        url=section.url,
        baud=section.baud,
        form=section.form,
        columns=section.columns,
        delimiter=section.delimiter,
        checksum=section.checksum,
        decimal=section.decimal,
        latency=section.latency_s,
    )


_NEEDED = {
    "guided": (("depth_m",), ("tilt_a_deg", "tilt_b_deg")),
    "hung": (("depth_m",), ("tilt_a_deg", "tilt_b_deg", "east_mm", "north_mm")),
    "drop": (("depth_m",), ("east_mm", "north_mm")),
}
"""Per kind of run: groups of columns, of each of which at least one must be read."""


def _check_columns(assumptions: Assumptions, links: tuple[LinkSettings, ...], place: Place) -> None:
    kind = assumptions.run.kind
    if any(one.url == HAND for one in links):
        if kind == "guided":
            raise place.error("link.url", HAND, "an instrument: a guided run has nothing to read by eye")
        return
    if not links or any(one.form == "iec61162" for one in links):
        return
    for number, one in enumerate(links):
        try:
            ColumnsDecoder(one.columns, one.delimiter, one.checksum, one.decimal)
        except ParameterError as error:
            value = getattr(one, error.name)
            shown = list(value) if isinstance(value, tuple) else value
            raise place.error(f"link[{number}].{error.name}", shown, error.expected) from error
    present = {column for one in links for column in one.columns}
    for group in _NEEDED[assumptions.run.kind]:
        if not present & set(group):
            wanted = " or ".join(group)
            raise place.error("link.columns", sorted(present), f"{wanted} among them in a {kind} run")


def _calibration_notes(assumptions: Assumptions, place: Place, on: date | None) -> tuple[str, ...]:
    """Point out a calibration that is too old on the day of the run, or lies in its future."""
    instrument = assumptions.instrument
    if not instrument.calibrated_on:
        return ()
    try:
        calibrated = date.fromisoformat(instrument.calibrated_on)
    except ValueError as error:
        raise place.error(
            "instrument.calibrated_on", instrument.calibrated_on, "a date of the calendar, such as 2026-03-01"
        ) from error
    age = ((on or date.today()) - calibrated).days  # noqa: DTZ011 (a day, not an instant)
    if age < 0:
        return (f"calibrated on {calibrated}, which is {-age} days after this run",)
    if age > instrument.calibration_valid_days:
        return (
            f"calibration is {age} days old ({calibrated}); it was good for {instrument.calibration_valid_days:g}",
        )
    return ()


def _with_true_north(assumptions: Assumptions, place: Place, on: date | None) -> Assumptions:
    """Put the angle from the stated north to true north beside the instrument's azimuth."""
    instrument, site = assumptions.instrument, assumptions.site
    if instrument.azimuth_from == "true":
        return assumptions
    if site.longitude is None:
        raise place.error(
            "site.longitude_deg", None, f"a longitude, for azimuth_from = {instrument.azimuth_from!r}"
        )
    from eastfall.io import north  # noqa: PLC0415 (the magnetic model and the projection library only where used)

    try:
        offset = north.offset_to_true(
            instrument.azimuth_from,
            latitude=site.latitude,
            longitude=site.longitude,
            elevation=site.elevation,
            on=on or date.today(),  # noqa: DTZ011 (a day, not an instant; declination moves 0.1° a year)
            grid=site.grid,
        )
    except SiteFileError as error:
        raise SiteFileError(f"{place.source}: {error}", key="instrument.azimuth_from") from error
    return replace(assumptions, instrument=replace(instrument, north_offset=offset))
