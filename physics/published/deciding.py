"""Check values of what follows from a reading: combination, guard band, expanded uncertainty."""

from functools import partial

from eastfall.physics.budget import COVERAGE_FACTOR, combined
from eastfall.physics.published.check import PublishedCheck
from eastfall.physics.verdict import horizontal, verdict

_GUM_H1 = "JCGM 100:2008 (GUM), H.1: calibration of an end gauge, uncertainties 25, 9.7, 2.9, 16.6 nm"


def _edge_of_acceptance(nominal: float, tolerance: float, expanded: float, side: float) -> float:
    """Find where "within" ends on one side of a tolerance by halving: the guard band as the program applies it."""
    inside, outside = 0.0, 2.0 * tolerance
    for _ in range(60):
        middle = 0.5 * (inside + outside)
        if verdict(middle, expanded / COVERAGE_FACTOR, tolerance) == "within":
            inside = middle
        else:
            outside = middle
    return nominal + side * inside


def _length_uncertainty() -> float:
    return float(horizontal(30.0, 40.0, 4.0, 3.0)[1])


CHECKS = (
    PublishedCheck(
        name="acceptance begins, tolerance 10 ± 1, U 0.2, guard band U",
        source="reckoned from the rule of ILAC-G8:09/2019, 4.2 (acceptance limit = tolerance limit - U)",
        mark="calculation",
        unit="",
        expected=9.2,
        tolerance=1e-9,
        compute=partial(_edge_of_acceptance, 10.0, 1.0, 0.2, -1.0),
    ),
    PublishedCheck(
        name="acceptance ends, tolerance 10 ± 1, U 0.2, guard band U",
        source="reckoned from the rule of ILAC-G8:09/2019, 4.2 (acceptance limit = tolerance limit - U)",
        mark="calculation",
        unit="",
        expected=10.8,
        tolerance=1e-9,
        compute=partial(_edge_of_acceptance, 10.0, 1.0, 0.2, 1.0),
    ),
    PublishedCheck(
        name="combined standard uncertainty of the end gauge example",
        source=f"{_GUM_H1}; combined 32 nm (from memory, unconfirmed)",
        mark="memory",
        unit="nm",
        expected=32.0,
        tolerance=0.5,
        compute=lambda: float(combined([25.0, 9.7, 2.9, 16.6])),
    ),
    PublishedCheck(
        name="uncertainty of the length of (30 ± 4, 40 ± 3)",
        source="law of propagation, JCGM 100:2008 (GUM), eq. 10: √((30·4)² + (40·3)²)/50",
        mark="calculation",
        unit="mm",
        expected=3.394112549695428,
        tolerance=1e-12,
        compute=_length_uncertainty,
    ),
)
