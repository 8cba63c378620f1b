"""What holds for every test: no settings of whoever runs them are read or written, in this process or another."""

import os
import tempfile

os.environ["EASTFALL_CONFIG"] = os.path.join(tempfile.mkdtemp(prefix="eastfall-tests-"), "settings.toml")  # noqa: PTH118
