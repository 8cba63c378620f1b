"""The errors of files, links and logs; each message says what is wrong, where, what was expected and what next.

EastfallError (physics.errors)
└── InputError                      unusable input: the command line ends with exit status 2
    ├── SiteFileError (ValueError)  a key, type or range of the site file
    ├── LinkError (OSError)         an instrument link that cannot be opened or is gone
    ├── LogError (ValueError)       a run log that cannot be read
    ├── CaptureError (ValueError)   a plain-text capture that does not fit its line form
    └── OutputError (OSError)       a file that cannot be written, or stands already
"""

from eastfall.physics.errors import EastfallError


class InputError(EastfallError):
    """Something handed to the program cannot be used."""


class SiteFileError(InputError, ValueError):
    """The site file cannot be used.

    Parameters
    ----------
    message : str
        The one clear line.
    key : str
        The key that it speaks of, as "section.key" or "link[0].key"; empty for the file as a whole.
    """

    def __init__(self, message: str, *, key: str = "") -> None:
        super().__init__(message)
        self.key = key


class LinkError(InputError, OSError):
    """A link cannot be opened, or went away."""


class LogError(InputError, ValueError):
    """A run log cannot be read."""


class CaptureError(InputError, ValueError):
    """A plain-text capture cannot be read with this line form."""


class OutputError(InputError, OSError):
    """A file cannot be written."""
