"""Named check values, each with its source and what the program computes for it now.

The values stand in the modules of this package, one per field; comparing them is left to whoever runs them.
"""

from eastfall.physics.published import deciding, earth_and_fall, line_and_tilt
from eastfall.physics.published.check import PublishedCheck

__all__ = ["PublishedCheck", "published_checks"]


def published_checks() -> tuple[PublishedCheck, ...]:
    """Every check of this package, in the order in which they are shown.

    Returns
    -------
    tuple of PublishedCheck
    """
    return (*earth_and_fall.CHECKS, *line_and_tilt.CHECKS, *deciding.CHECKS)
