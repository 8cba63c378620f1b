"""What a cell of the screen stands for, as one list; which colour a role wears is the stylesheet's business."""

from enum import IntEnum


class Role(IntEnum):
    """The part that a glyph or a ground plays; the number is the style index in a raster."""

    TEXT = 0
    DIM = 1
    STRONG = 2
    MEASURED = 3
    PAST = 4
    EXPECTED = 5
    BAND = 6
    WARNING = 7
    ACTION = 8
    OK = 9
    WALL = 10
    BOB = 11
    FALL = 12
    CURSOR = 13
    GROUND_OK = 14
    GROUND_WARNING = 15
    GROUND_ACTION = 16
    GROUND_BAND = 17
    ON_GROUND = 18


CLASS_OF = {role: f"role--{role.name.lower().replace('_', '-')}" for role in Role}
COMPONENT_CLASSES = frozenset(CLASS_OF.values())
