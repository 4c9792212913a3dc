"""The command line: reads, calls one library function, writes."""

from harvest.cli import commands, duty_command, memo_command, study_commands, sweep_command
from harvest.cli.program import cli, main

__all__ = ["cli", "commands", "duty_command", "main", "memo_command", "study_commands", "sweep_command"]
