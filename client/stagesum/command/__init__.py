"""The command ``stagesum``: one file a sub-command."""

from __future__ import annotations

import io
import sys

import click

from stagesum import __version__
from stagesum.command.budget import budget
from stagesum.command.serve import serve


@click.group(context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, prog_name="stagesum")
def main() -> None:
    """Error budgets of measuring chains: limits, yield, contributions and a verdict."""
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):  # a terminal that lacks a character shows an escape, no traceback
            stream.reconfigure(errors="backslashreplace")


main.add_command(budget)
main.add_command(serve)
