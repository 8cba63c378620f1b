"""What the screens know of a run before its first reading, and what they may ask of its source."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Protocol

import numpy as np

from eastfall.tui.raster import Floats
from eastfall.tui.store import Mark, Mode

if TYPE_CHECKING:
    from eastfall.physics.expected import ExpectedCurve
    from eastfall.physics.settings import Assumptions

Curve = Callable[[Floats], tuple[Floats, Floats]]


class Controls(Protocol):
    """What a source can be asked for; a live run and a replay each answer to a part of it."""

    def close(self) -> None: ...  # noqa: D102


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
    marks : tuple of Mark
        Moments of a record to jump to.
    time_of_depth : callable, optional
        For a replay: when the record first reached a depth [s].
    """

    assumptions: "Assumptions"
    mode: Mode
    title: str
    bob: Curve | None = None
    fall: Curve | None = None
    marks: tuple[Mark, ...] = ()
    time_of_depth: Callable[[float], float | None] | None = None


def curves_of(curve: "ExpectedCurve | None") -> tuple[Curve | None, Curve | None]:
    """Return the bob's and the dropped body's curve as functions of depth."""
    if curve is None:
        return None, None
    return (lambda depth: _pair(curve, curve.bob, depth)), (lambda depth: _pair(curve, curve.body, depth))


def _pair(curve: "ExpectedCurve", table: Floats, depth: Floats) -> tuple[Floats, Floats]:
    east, north = curve.look_up(table, np.atleast_1d(np.asarray(depth, dtype=float)))
    return east, north
