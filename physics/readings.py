"""Readings: what the instruments said, as one block of float64 columns on one clock; nothing is interpreted here."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Self

import numpy as np
from numpy.typing import ArrayLike, NDArray

from eastfall.physics.errors import ParameterError

CHANNELS = (
    "time",  # the survey's clock [s]: the instrument's own where it has one, else the host's
    "host_time",  # when the line reached this machine, from the start of the run [s]
    "depth",  # [m], positive down from the collar
    "tilt_a",  # [rad], positive: the lower end leans toward +A
    "tilt_b",  # [rad], B is 90° clockwise from A seen from above
    "east",  # direct offset [m]
    "north",  # direct offset [m]
    "azimuth",  # of the A axis, clockwise from north as the site states it [rad]
    "temperature",  # of the probe [K]
    "supply",  # [V]
    "face",  # 0 or pi [rad]
)
_ROW = {name: row for row, name in enumerate(CHANNELS)}

Column = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Readings:
    """A block of readings.

    Parameters
    ----------
    data : ndarray, shape (len(CHANNELS), n)
        One row a channel, in the order of `CHANNELS`; NaN where a channel did not speak.
    """

    data: NDArray[np.float64]

    def __post_init__(self) -> None:
        if self.data.ndim != 2 or self.data.shape[0] != len(CHANNELS):
            raise ParameterError("data", self.data.shape, "", f"shape ({len(CHANNELS)}, n)")

    @classmethod
    def of(cls, **columns: ArrayLike) -> Self:
        """Build a block from named columns of one length; a missing `host_time` is `time`, the rest NaN."""
        unknown = set(columns) - set(CHANNELS)
        if unknown:
            raise ParameterError("columns", sorted(unknown), "", f"names from {CHANNELS}")
        arrays = {name: np.atleast_1d(np.asarray(one, dtype=float)) for name, one in columns.items()}
        length = max((one.shape[0] for one in arrays.values()), default=0)
        data = np.full((len(CHANNELS), length), np.nan)
        for name, one in arrays.items():
            data[_ROW[name]] = one
        if "host_time" not in arrays:
            data[_ROW["host_time"]] = data[_ROW["time"]]
        return cls(data)

    @classmethod
    def none(cls) -> Self:
        """Return an empty block."""
        return cls(np.empty((len(CHANNELS), 0)))

    @classmethod
    def joined(cls, blocks: Sequence["Readings"]) -> Self:
        """Put blocks one after the other."""
        return cls(np.concatenate([one.data for one in blocks], axis=1)) if blocks else cls.none()

    def __len__(self) -> int:
        return self.data.shape[1]

    def __getitem__(self, part: slice | NDArray[np.bool_] | NDArray[np.intp]) -> "Readings":
        return Readings(self.data[:, part])

    def column(self, name: str) -> Column:
        """Return one channel, shape (n,), in the unit that `CHANNELS` states."""
        return self.data[_ROW[name]]

    @property
    def time(self) -> Column:
        """The survey's clock [s]."""
        return self.data[0]

    @property
    def host_time(self) -> Column:
        """Arrival at this machine [s]."""
        return self.data[1]

    @property
    def depth(self) -> Column:
        """Depth [m], positive down."""
        return self.data[2]
