"""Entry point of `python -m doe`."""

from doe.cli import main

main()
