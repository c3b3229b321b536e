"""``python -m realize``."""

from realize.cli import main

main()
