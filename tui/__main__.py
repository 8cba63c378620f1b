"""`python -m eastfall.tui` is the command `eastfall`."""

from eastfall.tui.main import main

main()
