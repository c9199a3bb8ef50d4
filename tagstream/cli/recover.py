"""The verb `recover`."""

from __future__ import annotations

from pathlib import Path

import click

from tagstream.cli.options import run_argument


@click.command()
@run_argument
def command(run: Path) -> None:
    """Make ordinary files of what a crashed process left in RUN.

    Histories and recordings that were not closed become files that any program opens, and
    latest.h5 says that the run was interrupted. Exit code 4 while a process writes the run.
    """
    from tagstream.outputs.recovery import recover

    done = recover(run)
    for text in done:
        click.echo(text)
    if not done:
        click.echo(f"{run}: nothing to mend")
