"""Rows gathered into bins of a fixed time grid, the same to the last bit however the rows arrive in blocks.

What the bins are good for (a speed, a rest point) is the business of `moving` and `swing`.
"""

from typing import NamedTuple

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]
Index = npt.NDArray[np.intp]

_FIRST_ROW = 0.37
"""Where the first row lies in its cell [widths]: for 1 to 200 rows a second, none falls on a border later."""


class Bins(NamedTuple):
    """Closed bins, oldest first.

    Parameters
    ----------
    number : array, shape (n,)
        Place on the time grid [widths from the origin], rising.
    rows : array, shape (n,)
        Rows in each bin.
    time : array, shape (n,)
        Mean time from the origin [s].
    spread : array, shape (n,)
        Variance of the row times about that mean [s²].
    means : array, shape (channels, n)
        Mean of every channel.
    """

    number: Array
    rows: Array
    time: Array
    spread: Array
    means: Array


class TimeBins:
    """Streaming sums over rows whose time falls into the same cell of a grid.

    A bin closes when the first row of a later cell arrives. Only cells with rows make a bin. The sums run on
    from row to row for as long as the stream does and a bin is the difference of two of them, so the order of
    additions, and with it every bit, is that of the rows alone.

    Parameters
    ----------
    width : float
        Of a cell [s].
    channels : int
        Values in a row beside its time.
    """

    def __init__(self, width: float, channels: int) -> None:
        self.width = width
        self.origin: float | None = None
        self._running = np.zeros(2 + channels)
        self._edge = np.zeros(2 + channels)
        self._rows = 0
        self._edge_row = 0
        self._cell = 0.0
        self._none = _averaged(np.empty(0), np.empty(0), np.empty((2 + channels, 0)), width)

    def add(self, time: Array, values: Array) -> tuple[Index, Bins]:
        """Take rows in order of time.

        Parameters
        ----------
        time : array, shape (n,)
            Not falling, finite [s]; n may not be 0.
        values : array, shape (channels, n)
            Finite.

        Returns
        -------
        index : array of int, shape (n,)
            How many of the returned bins had closed when each row arrived.
        closed : Bins
            What this block closed.
        """
        if self.origin is None:
            # Equally spaced rows must not fall on the cells' borders, where rounding would sort them.
            self.origin = float(time[0]) - _FIRST_ROW * self.width
        since = time - self.origin
        cell = np.floor(since / self.width)
        since -= cell * self.width
        rows = np.empty((self._running.size, time.size + 1))
        rows[:, 0] = self._running
        rows[0, 1:] = since
        np.multiply(since, since, out=rows[1, 1:])
        rows[2:, 1:] = values
        sums = np.cumsum(rows, axis=1)
        index, closed = self._close(cell, sums)
        self._running = sums[:, -1].copy()
        self._rows += time.size
        self._cell = float(cell[-1])
        return index, closed

    def _close(self, cell: Array, sums: Array) -> tuple[Index, Bins]:
        """Bins that end before a row in another cell; `sums` are the running ones before each row."""
        opens = np.empty(cell.size, dtype=bool)
        opens[0] = cell[0] != self._cell
        np.not_equal(cell[1:], cell[:-1], out=opens[1:])
        starts = opens.nonzero()[0]
        if not starts.size:
            return np.zeros(cell.size, dtype=np.intp), self._none
        numbers = cell[starts - 1]
        if starts[0] == 0:
            numbers[0] = self._cell
        rows = self._rows + starts
        edges = np.concatenate([self._edge[:, None], sums[:, starts]], axis=1)
        counts = rows.astype(np.float64)
        counts[1:] -= rows[:-1]
        counts[0] -= self._edge_row
        self._edge = edges[:, -1].copy()
        self._edge_row = int(rows[-1])
        return np.cumsum(opens), _averaged(numbers, counts, edges[:, 1:] - edges[:, :-1], self.width)

    def open_bin(self) -> Bins:
        """Return what the bin holds that has not closed; one bin, or none before the first row."""
        if self.origin is None:
            return self._none
        count = np.array([float(self._rows - self._edge_row)])
        return _averaged(np.array([self._cell]), count, (self._running - self._edge)[:, None], self.width)


def _averaged(numbers: Array, counts: Array, sums: Array, width: float) -> Bins:
    means = sums / counts
    return Bins(
        number=numbers,
        rows=counts,
        time=numbers * width + means[0],
        # Rounding may leave a spread of a few ulp below zero where all rows share one time.
        spread=np.maximum(means[1] - means[0] * means[0], 0.0),
        means=means[2:],
    )
