"""The command line: one module per verb, imported when the verb is used. No logic lives here."""

from __future__ import annotations

import os
import sys
from importlib import import_module

import click

from tagstream._version import __version__
from tagstream.errors import SettingsError, TagstreamError

# verb -> what it does; its command is `command` in tagstream.cli.<verb>, with _ for -
VERBS = {
    "run": "Feed to results until the feed ends or a stop is asked for.",
    "replay": "The same from recordings, as fast as it can.",
    "check": "Tell every error of the settings; start nothing.",
    "simulate": "Make a recording of simulated light with known truth.",
    "send": "Play recordings to an address, as a sender of tags would.",
    "show": "The numbers of a run, live or finished.",
    "watch": "The same numbers live in the terminal.",
    "recover": "Mend what a crashed process left in a run.",
    "plot": "Pictures of histograms and histories.",
    "status": "Ask a live run how it is.",
    "mark": "Tell a live run that from now on a key has a value.",
    "restart-spans": "Let the spans of a live run begin anew.",
    "new-run": "Let a live run end, and the next one begin.",
    "stop": "Let a live run end cleanly.",
    "keys": "Make keys for sockets that others can reach.",
}


class LazyGroup(click.Group):
    """Knows its verbs by name and help text alone, so that --help imports none of them."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(VERBS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        if cmd_name not in VERBS:
            return None
        module = cmd_name.replace("-", "_")
        command: click.Command = import_module(f"tagstream.cli.{module}").command
        return command

    def invoke(self, ctx: click.Context) -> object:
        try:
            return super().invoke(ctx)
        except BrokenPipeError:  # the reader of our output has seen enough
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
            return 0

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        with formatter.section("Verbs"):
            formatter.write_dl(list(VERBS.items()))


@click.group(cls=LazyGroup, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, prog_name="tagstream")
def tagstream() -> None:
    """Statistics of single-photon detector time tags, live and exact.

    Exit codes: 0 done; 1 the run failed; 2 settings or arguments are wrong; 3 an input was
    broken (what was good before it is kept); 4 another process writes the run; 130, 143
    stopped by a signal after a clean close.
    """


def main() -> None:
    """Entry point: errors as text, and an exit code that a supervisor can trust."""
    try:
        sys.exit(tagstream.main(standalone_mode=False, prog_name="tagstream"))
    except TagstreamError as error:
        _complain(error)
        sys.exit(error.exit_code)
    except click.ClickException as error:
        error.show()
        sys.exit(error.exit_code)
    except (click.Abort, KeyboardInterrupt):
        click.echo("stopped", err=True)
        sys.exit(130)


def _complain(error: TagstreamError) -> None:
    texts = error.problems if isinstance(error, SettingsError) else [str(error)]
    for text in texts:
        click.echo(f"error: {text}", err=True)
