"""`python -m optics.cli`."""

from optics.cli import main

main()
