"""The verb `watch`."""

from __future__ import annotations

import time
from pathlib import Path

import click

from tagstream.cli.options import run_argument

ENDED = ("finished", "stopped", "input_broken", "failed", "interrupted")


@click.command()
@run_argument
@click.option(
    "--every",
    type=click.FloatRange(min=0.1),
    default=1.0,
    show_default=True,
    help="Seconds between looks.",
)
def command(run: Path, every: float) -> None:
    """The numbers of RUN live in the terminal, until it ends or Ctrl-C.

    Only reads; the run goes on whether it is watched or not.
    """
    from tagstream.outputs.reader import open_run
    from tagstream.table import format_run

    while True:
        opened = open_run(run).still()
        click.clear()
        click.echo(format_run(opened))
        if opened.health["state"] in ENDED:
            return
        time.sleep(every)
