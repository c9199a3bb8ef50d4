"""The verb `show`."""

from __future__ import annotations

import json
from pathlib import Path

import click

from tagstream.cli.options import json_option, run_argument


@click.command()
@run_argument
@json_option
@click.option(
    "--health/--no-health",
    default=False,
    help="Show the health alone; exit code 1 unless the run is going on or ended well.",
)
def command(run: Path, as_json: bool, health: bool) -> None:
    """The estimates of RUN, live or finished: value, interval, method.

    RUN is a run folder, or the link to the newest one.
    """
    from tagstream import table
    from tagstream.control.shown import lines
    from tagstream.outputs.reader import open_run

    opened = open_run(run).still()
    if not health:
        told = table.as_json(opened)
        click.echo(json.dumps(told, indent=2) if as_json else table.format_run(opened))
        return
    numbers, well = table.health_as_json(opened), table.is_well(opened)
    click.echo(json.dumps(numbers, indent=2) if as_json else "\n".join(lines(numbers)))
    if not well:
        raise SystemExit(1)
