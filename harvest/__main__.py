"""`python -m harvest` runs the command line."""

from harvest.cli import main

main()
