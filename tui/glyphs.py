"""The characters of a terminal: how dots become letters."""

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from eastfall.tui.roles import Role

BLANK = ord(" ")
_BRAILLE_WEIGHTS = np.array([[1, 8], [2, 16], [4, 32], [64, 128]], dtype=np.uint8)
_HALF_WEIGHTS = np.array([[1], [2]], dtype=np.uint8)
_LONE_WEIGHTS = np.array([[1]], dtype=np.uint8)
_BRAILLE_TABLE = np.arange(0x2800, 0x2900, dtype=np.int32)
_BRAILLE_TABLE[0] = BLANK
_HALF_TABLE = np.array([ord(c) for c in " ▀▄█"], dtype=np.int32)
ASCII_OF_ROLE = {
    Role.MEASURED: "#",
    Role.PAST: "-",
    Role.EXPECTED: ":",
    Role.BAND: ".",
    Role.WARNING: "'",
    Role.ACTION: "|",
    Role.WALL: "%",
    Role.BOB: "b",
    Role.FALL: "d",
    Role.DIM: ".",
}


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Glyphs:
    """One way to show dots with characters."""

    name: Literal["braille", "half", "ascii"]
    across: int
    down: int
    weights: NDArray[np.uint8]
    table: NDArray[np.int32]
    measured: str
    expected: str
    here: str
    rule: str
    bar: str
    """Marks for single points, the depth in view, and the rules between parts."""
    samples: tuple[str, str, str, str, str]
    """What a solid, a dashed, a dotted, a broken and a heavy line look like, for legends."""


BRAILLE = Glyphs(
    name="braille",
    across=2,
    down=4,
    weights=_BRAILLE_WEIGHTS,
    table=_BRAILLE_TABLE,
    measured="●",
    expected="○",
    here="▶",
    rule="─",
    bar="│",
    samples=("─", "╌", "┈", "╎", "┃"),
)
HALF = Glyphs(
    name="half",
    across=1,
    down=2,
    weights=_HALF_WEIGHTS,
    table=_HALF_TABLE,
    measured="@",
    expected="o",
    here=">",
    rule="─",
    bar="│",
    samples=("─", "╌", "┈", "╎", "┃"),
)
ASCII = Glyphs(
    name="ascii",
    across=1,
    down=1,
    weights=_LONE_WEIGHTS,
    table=np.array([BLANK, ord("#")], dtype=np.int32),
    measured="@",
    expected="o",
    here=">",
    rule="-",
    bar="|",
    samples=("#", ":", ".", "'", "|"),
)
GLYPHS: dict[str, Glyphs] = {one.name: one for one in (BRAILLE, HALF, ASCII)}
