"""Run the command line with ``python -m leachkin``."""

from leachkin.cli.main import main

main()
