"""``python -m hdetermine``."""

from hdetermine.cli import main

main()
