"""Make what the tests share, which stands beside them, importable."""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent))
