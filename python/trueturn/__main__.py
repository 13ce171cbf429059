"""``python -m trueturn`` is the command line."""

from trueturn.cli import main

main()
