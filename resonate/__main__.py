"""``python -m resonate``."""

from resonate.cli import main

main()
