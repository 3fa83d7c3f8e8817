"""``python -m schorl``."""

from schorl.cli import main

main()
