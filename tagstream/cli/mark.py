"""The verb `mark`."""

from __future__ import annotations

from pathlib import Path

import click

from tagstream.cli.options import asked_run_argument, keys_option


@click.command()
@asked_run_argument
@click.argument("marks", metavar="KEY=VALUE...", nargs=-1, required=True)
@click.option(
    "--at",
    "at_ps",
    type=click.IntRange(min=0),
    metavar="PS",
    help="Stream time in ps from which it holds; absent: from now on.",
)
@keys_option
def command(run: str, marks: tuple[str, ...], at_ps: int | None, keys: Path | None) -> None:
    """Tell RUN that from now on KEY has VALUE: a stage position, a polarisation, a power.

    A value is a number where it reads as one, else a text. Marks are kept in results and
    recording, and tallies may be split by them. RUN is a run folder, the link to the newest one,
    or the address of its [control].
    """
    from tagstream.control.client import ask_run
    from tagstream.control.marking import mark_requests

    for request in mark_requests(marks, at_ps):
        ask_run(run, request, keys)
        click.echo(f"{run}: {request.key} = {request.value}")
