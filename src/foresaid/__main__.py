"""``python -m foresaid``."""

from foresaid.cli.main import main

main()
