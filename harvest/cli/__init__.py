"""The command line: reads, calls one library function, writes."""

from harvest.cli import commands, study_commands, sweep_command
from harvest.cli.program import cli, main

__all__ = ["cli", "commands", "main", "study_commands", "sweep_command"]
