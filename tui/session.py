"""What the screens know of a run before its first reading, and what they may ask of its source."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from eastfall.io.safetext import safe
from eastfall.tui.raster import Floats
from eastfall.tui.store import Mode
from eastfall.tui.units import METRIC, Units

if TYPE_CHECKING:
    from eastfall.io.replay import Replay
    from eastfall.physics.expected import ExpectedCurve
    from eastfall.physics.settings import Assumptions

Curve = Callable[[Floats], tuple[Floats, Floats]]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Session:
    """A run as the screens see it.

    Parameters
    ----------
    assumptions : Assumptions
        Site, shaft, limits and the rest.
    mode : {"live", "replay"}
        Where the readings come from.
    title : str
        Name of the site, safe to show.
    bob, fall : callable, optional
        East and north [m] of a hanging bob and of a dropped body, by depth [m].
    differences : tuple of str
        For a replay: the settings that are not as recorded, each as a line; "what if" is on the screen then.
    units : Units
        What lengths are shown in.
    """

    assumptions: "Assumptions"
    mode: Mode
    title: str
    bob: Curve | None = None
    fall: Curve | None = None
    differences: tuple[str, ...] = ()
    units: Units = METRIC


def curves_of(curve: "ExpectedCurve | None") -> tuple[Curve | None, Curve | None]:
    """Return the bob's and the dropped body's curve as functions of depth."""
    if curve is None:
        return None, None
    return (lambda depth: _pair(curve, curve.bob, depth)), (lambda depth: _pair(curve, curve.body, depth))


def _pair(curve: "ExpectedCurve", table: Floats, depth: Floats) -> tuple[Floats, Floats]:
    east, north = curve.look_up(table, np.atleast_1d(np.asarray(depth, dtype=float)))
    return east, north


def replay_session(replay: "Replay", *, units: Units = METRIC) -> Session:
    """Return what is known of a recorded run before its first reading."""
    from eastfall.tui.whatif import told  # noqa: PLC0415 (the reducing of records only where there is one)

    bob, fall = curves_of(replay.pipeline.survey.curve)
    return Session(
        assumptions=replay.site.assumptions,
        mode="replay",
        title=safe(replay.site.assumptions.site.name),
        bob=bob,
        fall=fall,
        differences=told(replay.differences),
        units=units,
    )
