"""The verb `status`."""

from __future__ import annotations

import json
from pathlib import Path

import click

from tagstream.cli.options import asked_run_argument, json_option, keys_option


@click.command()
@asked_run_argument
@keys_option
@json_option
def command(run: str, keys: Path | None, as_json: bool) -> None:
    """Ask the process that writes RUN how it is: state and health at this moment.

    RUN is a run folder, the link to the newest one, or the address of its [control]. Exit code 1
    when nobody answers. `tagstream show` reads the files instead.
    """
    from tagstream.control.client import ask_run
    from tagstream.control.requests import PlainRequest
    from tagstream.control.shown import lines

    reply = ask_run(run, PlainRequest(request="status"), keys)
    if as_json:
        click.echo(json.dumps(reply, indent=2))
    else:
        for line in lines(reply):
            click.echo(line)
