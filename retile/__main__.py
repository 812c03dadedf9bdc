"""``python -m retile``."""

from .cli import main

main()
