"""The command line: reads, calls one library function, writes."""

from harvest.cli.commands import main

__all__ = ["main"]
