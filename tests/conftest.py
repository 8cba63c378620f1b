"""What holds for every test, in this process or another: nobody's settings, a Unicode terminal and locale, no haste."""

import os
import tempfile

from hypothesis import settings

os.environ["EASTFALL_CONFIG"] = os.path.join(tempfile.mkdtemp(prefix="eastfall-tests-"), "settings.toml")  # noqa: PTH118
os.environ |= {"LC_ALL": "C.UTF-8", "TERM": "xterm-256color"}

# A busy machine takes its time over an example, and that says nothing of the fact under test.
settings.register_profile("eastfall", deadline=None)
settings.load_profile("eastfall")
