"""The terminal dashboard and the command line."""

import os

# The screen library reads this once, at its first import: a key then waits at most 8 ms for its picture, not 17.
os.environ.setdefault("TEXTUAL_FPS", "120")
