"""What holds for every test, in this process or another: nobody's settings, and a terminal and a locale of Unicode."""

import os
import tempfile

os.environ["EASTFALL_CONFIG"] = os.path.join(tempfile.mkdtemp(prefix="eastfall-tests-"), "settings.toml")  # noqa: PTH118
os.environ |= {"LC_ALL": "C.UTF-8", "TERM": "xterm-256color"}
