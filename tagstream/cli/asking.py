"""The verbs that ask a live run for something."""

from __future__ import annotations

from pathlib import Path
from typing import Literal

import click

from tagstream.cli.options import asked_run_argument, keys_option


def asking_verb(
    request: Literal["new-run", "restart-spans", "stop"], done: str, text: str
) -> click.Command:
    """A verb that sends a request which needs nothing but its name.

    done: what is printed when the run has done it. text: the help.
    """

    @click.command(help=text)
    @asked_run_argument
    @keys_option
    def command(run: str, keys: Path | None) -> None:
        from tagstream.control.client import ask_run
        from tagstream.control.requests import PlainRequest

        reply = ask_run(run, PlainRequest(request=request), keys)
        click.echo(f"{run}: {done}{_more(reply)}")

    return command


def _more(reply: dict[str, object]) -> str:
    """What the run said besides that it is done."""
    return "".join(f"; {key} {value}" for key, value in reply.items())
