"""The root of eastfall's own errors, and the one for a parameter outside its domain.

EastfallError
├── ParameterError (also ValueError)      a number that the physics cannot accept
└── io.errors.InputError and children     files, links, logs: see there
"""


class EastfallError(Exception):
    """Anything that eastfall itself refuses, with a message fit for the person at the collar."""


class ParameterError(EastfallError, ValueError):
    """A parameter outside its domain.

    Parameters
    ----------
    name : str
        The parameter, as it is called where the user set it.
    value : object
        What was given.
    unit : str
        The unit of `value`; empty for a pure number or a word.
    expected : str
        The accepted range or set, in words.
    """

    def __init__(self, name: str, value: object, unit: str, expected: str) -> None:
        self.name = name
        self.value = value
        self.unit = unit
        self.expected = expected
        shown = f"{value} {unit}".strip()
        super().__init__(f"{name} is {shown}; expected {expected}")
