"""The settings of a run as a list, and what differs between the recorded ones and others; nothing is changed here."""

from dataclasses import dataclass, fields, replace
from functools import cache
from typing import Any, NamedTuple

from eastfall.io import sitekeys
from eastfall.io.sitefile import LinkSettings, SiteFile
from eastfall.io.sitekeys import all_keys


@cache
def _known() -> tuple[sitekeys.Key, ...]:
    """Return every key; describing them all takes 50 ms, which a list of a thousand runs cannot spare."""
    return tuple(all_keys())


class Difference(NamedTuple):
    """One setting that is not as recorded, in the unit of its key; None where there is none."""

    key: str
    recorded: Any
    used: Any


@dataclass(frozen=True, slots=True, kw_only=True)
class Setting:
    """One setting in force."""

    key: str
    value: Any
    """In the unit of the key."""
    unit: str
    given: bool
    """Whether it stands in the site file; else it is the default."""
    help: str = ""


def settings_of(site: SiteFile) -> tuple[Setting, ...]:
    """Return every setting of a run in the order of the site file, links apart."""
    found = []
    for one in _known():
        record = getattr(site.assumptions, one.section, None)
        field = sitekeys.si_name(one.name)
        if record is None or not hasattr(record, field):
            continue
        path = f"{one.section}.{one.name}"
        value = sitekeys.from_si(one.name, getattr(record, field))
        found.append(Setting(key=path, value=value, unit=one.unit, given=path in site.given, help=one.help))
    return tuple(found)


def differences(recorded: SiteFile, used: SiteFile) -> tuple[Difference, ...]:
    """List what differs between two sets of settings.

    Parameters
    ----------
    recorded, used : SiteFile
        As the run was recorded with, and as it is looked at now.

    Returns
    -------
    tuple of Difference
        (key, recorded value, used value) in the order of the site file; empty if they mean the same.
    """
    if recorded is used:
        return ()
    old = {one.key: one.value for one in settings_of(recorded)} | _of_links(recorded.links)
    new = {one.key: one.value for one in settings_of(used)} | _of_links(used.links)
    keys = [*old, *(key for key in new if key not in old)]
    return tuple(Difference(key, old.get(key), new.get(key)) for key in keys if old.get(key) != new.get(key))


def _of_links(links: tuple[LinkSettings, ...]) -> dict[str, Any]:
    return {
        f"link[{number}].{one.name}": getattr(link, one.name)
        for number, link in enumerate(links)
        for one in fields(link)
        if one.name not in {"url", "baud"}  # where the lines came from is no assumption
    }


def with_lines_of(used: SiteFile, recorded: SiteFile) -> SiteFile:
    """Return `used`, reading the lines as `recorded` does where it does not say itself how they are read."""
    return used if used.links else replace(used, links=recorded.links)
