"""The record of one check value; the values themselves are in the modules beside it."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

Mark = Literal["published", "memory", "calculation"]


@dataclass(frozen=True, slots=True, kw_only=True)
class PublishedCheck:
    """A value from outside the program, and how the program arrives at it.

    Parameters
    ----------
    name : str
        What it is, in words.
    source : str
        Where the value stands.
    mark : str
        `published`: seen in print. `memory`: recalled from print, unconfirmed. `calculation`: reckoned independently,
        a check on arithmetic and not a source.
    unit : str
        Of `expected` and of what `compute` returns; empty for a pure number.
    expected : float
        As printed.
    tolerance : float
        Largest difference that the printed digits and the stated circumstances allow.
    compute : callable
        The program's own value, now.
    """

    name: str
    source: str
    mark: Mark
    unit: str
    expected: float
    tolerance: float
    compute: Callable[[], float]

    def difference(self) -> float:
        """Return the computed less the expected value, in the check's unit."""
        return self.compute() - self.expected
