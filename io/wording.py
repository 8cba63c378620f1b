"""From a reading in SI units to the line that an instrument would send; the way back is `io.forms`."""

from collections.abc import Callable, Mapping
from math import degrees

from eastfall.io.checksum import with_checksum
from eastfall.io.sitefile import LinkSettings

Reading = Mapping[str, float]
"""Channels by the names of `physics.readings.CHANNELS`, in SI units and radians."""

_WORDS: dict[str, Callable[[Reading], str]] = {
    "time_s": lambda one: f"{one['time']:.3f}",
    "depth_m": lambda one: f"{one['depth']:.3f}",
    "tilt_a_deg": lambda one: f"{degrees(one['tilt_a']):.5f}",
    "tilt_b_deg": lambda one: f"{degrees(one['tilt_b']):.5f}",
    "east_mm": lambda one: f"{1e3 * one['east']:.2f}",
    "north_mm": lambda one: f"{1e3 * one['north']:.2f}",
    "azimuth_deg": lambda one: f"{degrees(one['azimuth']) % 360.0:.2f}",
    "temperature_c": lambda one: f"{one['temperature'] - 273.15:.2f}",
    "supply_v": lambda one: f"{one['supply']:.2f}",
    "face_deg": lambda one: f"{degrees(one['face']):.1f}",
    "-": lambda _one: "OK",
}

_GROUPS: dict[str, Callable[[Reading], str]] = {
    "tilt_a_deg": lambda one: f"A,{degrees(one['tilt_a']):.5f},D,A",
    "tilt_b_deg": lambda one: f"A,{degrees(one['tilt_b']):.5f},D,B",
    "east_mm": lambda one: f"D,{one['east']:.5f},M,EAST",
    "north_mm": lambda one: f"D,{one['north']:.5f},M,NORTH",
    "azimuth_deg": lambda one: f"A,{degrees(one['azimuth']) % 360.0:.2f},D,AZ",
    "face_deg": lambda one: f"A,{degrees(one['face']):.1f},D,FACE",
    "temperature_c": lambda one: f"C,{one['temperature'] - 273.15:.2f},C,T",
    "supply_v": lambda one: f"U,{one['supply']:.2f},V,U",
}
_ROOM = 75
"""Characters of a sentence between the $ and the *; with both, the checksum and the line end, 82 at most."""


class LineWriter:
    """Words readings as lines of one link.

    Parameters
    ----------
    settings : LinkSettings
        The form of the line.
    """

    def __init__(self, settings: LinkSettings) -> None:
        self._settings = settings

    def bodies(self, reading: Reading) -> tuple[bytes, ...]:
        """Return the lines of one reading, without line ends."""
        if self._settings.form == "iec61162":
            return self._sentences(reading)
        words = [_WORDS[column](reading) for column in self._settings.columns]
        if self._settings.decimal == "comma":
            words = [one.replace(".", ",") for one in words]
        body = self._settings.delimiter.join(words).encode("ascii")
        return (with_checksum(self._settings.checksum, body),)

    def _sentences(self, reading: Reading) -> tuple[bytes, ...]:
        """Return a depth sentence and one with the rest, each where the link speaks of it."""
        columns = self._settings.columns
        depth = (_sentence(f"SDDPT,{reading['depth']:.3f},0.0,"),) if "depth_m" in columns else ()
        groups = [_GROUPS[column](reading) for column in columns if column in _GROUPS]
        rest = "WIXDR"
        for group in groups:
            # What does not fit into a sentence is left unsaid: needed quantities come first in any sensible link.
            if len(rest) + len(group) <= _ROOM:
                rest += "," + group
        return (*depth, _sentence(rest)) if groups else depth


def _sentence(text: str) -> bytes:
    return with_checksum("xor", b"$" + text.encode("ascii"))
