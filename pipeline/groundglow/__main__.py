"""Run as ``python -m groundglow``."""

from groundglow.cli import main

main()
