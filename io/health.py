"""How a run does, as frozen snapshots for the screen: links, record, and what the last step brought."""

from collections.abc import Mapping
from dataclasses import dataclass

from eastfall.physics.findings import AlarmView, Findings, Standing


@dataclass(frozen=True, slots=True, kw_only=True)
class LinkHealth:
    """How one link does."""

    name: str
    url: str
    state: str
    """open, lost or ended."""
    retry_in: float | None
    """Seconds until the next try; None while it is not lost, or is being tried."""
    lines: int
    rate: float
    """Lines per second over the last few seconds."""
    silent_for: float
    """Seconds since the last line, or since the start."""
    last_fault: str
    """The latest bad line and what was expected, or why the link is lost; safe to show."""
    queue_dropped: int
    """Lines that found no room in the queue and are lost."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Health:
    """How the feed and the record do."""

    links: tuple[LinkHealth, ...]
    frames: int
    rejected: int
    faults: Mapping[str, int]
    log_path: str
    log_bytes: int
    log_state: str
    log_lost: int = 0
    """Lines and events missing from the record."""
    set_aside: int = 0
    """Readings that came before the run was armed."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class RunUpdate:
    """What one step brought, and how things stand."""

    findings: tuple[Findings, ...]
    standing: Standing | None
    alarms: tuple[AlarmView, ...]
    health: Health
    time: float
    """Host time [s] since the start of the run."""
    armed: bool = True
