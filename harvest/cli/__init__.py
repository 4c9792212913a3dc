"""The command line: reads, calls one library function, writes."""

from harvest.cli import commands, memo_command, study_commands
from harvest.cli.program import cli, main

__all__ = ["cli", "commands", "main", "memo_command", "study_commands"]
