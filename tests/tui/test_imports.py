"""The heavy libraries are loaded only where they are used: a verb starts no slower than it must."""

import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2] / "replay_logs"
LOG = next(ROOT.glob("sandrigg-east*.jsonl"))
LOADED = """
import contextlib, io, sys
from eastfall.tui.main import cli
with contextlib.suppress(SystemExit), contextlib.redirect_stdout(io.StringIO()):
    cli.main(standalone_mode=False)
print(*{name.partition(".")[0] for name in sys.modules})
"""


@pytest.mark.regression
@pytest.mark.parametrize(
    ("words", "needed"),
    [
        (["--help"], set()),
        (["reduce", str(LOG)], {"numpy", "msgspec"}),
        (["verify", str(LOG)], {"numpy", "msgspec"}),
        (["expect", str(ROOT / "guided.toml")], {"numpy", "msgspec"}),
        (["expect", str(ROOT / "hung.toml")], {"numpy", "msgspec"}),
        (["expect", str(ROOT / "drop.toml")], {"numpy", "msgspec"}),
        (["runs", str(ROOT)], {"numpy", "msgspec"}),
    ],
)
def test_a_verb_loads_no_library_that_it_does_not_need(words: list[str], needed: set[str]) -> None:
    """Of those that take a tenth of a second or more with all they load."""
    done = subprocess.run(
        [sys.executable, "-c", LOADED, *words], capture_output=True, text=True, check=True, timeout=60
    )
    heavy = {"numpy", "scipy", "msgspec", "textual", "rich", "jinja2", "matplotlib", "pyproj", "distributed"}
    assert set(done.stdout.split()) & heavy == needed
