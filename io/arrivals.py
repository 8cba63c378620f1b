"""What reaches the pipeline: blocks of raw lines and run events, live or from a log; nothing is interpreted here."""

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from eastfall.io.framing import count_lines
from eastfall.physics.errors import ParameterError

TOLD = "alarm"
"""The event of an alarm that changed its state: told by the engine, so it tells the engine nothing."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LineBlock:
    r"""Whole lines of one link, as they came.

    Parameters
    ----------
    data : bytes
        The lines, each ending in one line feed; carriage returns are gone, everything else is untouched.
    times : ndarray, shape (n,)
        When each line reached this machine [s] since the start of the run, rounded to 1 µs when it was taken.
    first_line : int
        Number of the first line within its link, from 1.
    link : int
        Index of the link in the site file.
    """

    data: bytes
    times: NDArray[np.float64]
    first_line: int
    link: int = 0

    def __post_init__(self) -> None:
        if self.data and not self.data.endswith(b"\n"):
            raise ParameterError("data", self.data[-20:], "", "whole lines, the last ending in a line feed")
        count = count_lines(self.data)
        if self.times.shape != (count,):
            raise ParameterError("times", self.times.shape, "", f"one time for each of the {count} lines")

    def __len__(self) -> int:
        return self.times.size

    def lines(self) -> list[bytes]:
        """Return the lines without their line feeds."""
        return self.data.split(b"\n")[:-1]


@dataclass(frozen=True, slots=True, kw_only=True)
class RunEvent:
    """Something that is not an instrument line: what a person did, what the edge noticed, where the run begins or ends.

    Parameters
    ----------
    time : float
        Host time [s] since the start of the run.
    name : str
        "acknowledge", "shelve", "condition", "mark", "armed" and "end" change the engine's state, so their place among
        the lines matters; any other leaves it as it is: "note", "link", "alarm", "summary".
    fields : dict
        What belongs to the name; JSON values.
    """

    time: float
    name: str
    fields: dict[str, object] = field(default_factory=dict)


Arrival = LineBlock | RunEvent
