"""Where the A axis points at each reading; turning its tilts into offsets is `tilt`."""

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.readings import Readings
from eastfall.physics.settings import Instrument


def azimuth_of_a(readings: Readings, instrument: Instrument) -> NDArray[np.float64]:
    """Return the azimuth of the A axis, clockwise from true north, shape (n,) [rad].

    A probe that is turned about its own axis by its face carries its A axis with it; one that reads its own azimuth
    says so itself.
    """
    azimuth, face = readings.column("azimuth"), readings.column("face")
    turned = np.where(np.isnan(azimuth), np.nan_to_num(face), azimuth - instrument.a_azimuth)
    return instrument.a_azimuth + instrument.north_offset + turned
