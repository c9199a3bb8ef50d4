"""The verb `check`."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import click

from tagstream.cli.options import Duration, json_option, set_option, settings_argument
from tagstream.errors import SettingsError
from tagstream.settings import load_settings, rules
from tagstream.settings.doors import doors, doors_of_feed
from tagstream.settings.load import LoadedSettings
from tagstream.units import PS_PER_S, format_bytes, format_time


@click.command()
@settings_argument
@set_option
@click.option(
    "--listen",
    type=Duration(),
    help="Open the feed for so long, such as 5 s, and tell what arrives; nothing is written.",
)
@json_option
def command(settings: Path, overrides: tuple[str, ...], listen: int | None, as_json: bool) -> None:
    """Tell every error of SETTINGS at once, or print them with all defaults.

    Starts nothing. Exit code 2 when something is wrong. With --listen, what really arrives:
    inputs, rates, disorder, coverage, and lines for the settings.
    """
    try:
        loaded = load_settings(settings, overrides)
    except SettingsError as error:
        if as_json:
            click.echo(json.dumps({"errors": error.problems, "warnings": []}, indent=2))
            raise SystemExit(error.exit_code) from None
        raise
    if listen is not None:
        _listen(loaded, listen / PS_PER_S, as_json)
    elif as_json:
        click.echo(json.dumps(_report(loaded), indent=2))
    else:
        _print(loaded)


def _report(loaded: LoadedSettings) -> dict[str, Any]:
    return {
        "errors": [],
        "warnings": loaded.warnings,
        "memory_bytes": _memory(loaded),
        "addresses": doors(loaded.settings),
        "settings": loaded.to_toml(),
    }


def _print(loaded: LoadedSettings) -> None:
    every = loaded.settings.results.every_ps
    click.echo(f"# effective settings of {loaded.file}; tallies and spans take")
    click.echo(f"# about {format_bytes(_memory(loaded))} of memory; latest.h5 is replaced every")
    click.echo("# 1 s, less often when it is large" if every is None else f"# {format_time(every)}")
    click.echo(loaded.to_toml(), nl=False)
    for text in loaded.warnings:
        click.echo(f"warning: {text}", err=True)
    for text in doors(loaded.settings):
        click.echo(f"address: {text}", err=True)
    click.echo(f"{loaded.file}: no errors", err=True)


def _memory(loaded: LoadedSettings) -> int:
    return rules.memory_bytes(loaded.settings.tallies, loaded.settings.rolling)


def _listen(loaded: LoadedSettings, seconds: float, as_json: bool) -> None:
    from tagstream.cli import heard
    from tagstream.feeds.listening import heard_from_feed
    from tagstream.service import StopRequest

    stop = StopRequest()
    stop.install()
    for text in doors_of_feed(loaded.settings):
        click.echo(f"address: {text}", err=True)
    found = heard_from_feed(loaded.settings, lambda so_far: so_far >= seconds or stop.requested)
    if as_json:
        click.echo(json.dumps(heard.as_json(found, loaded.settings), indent=2))
    else:
        for line in heard.lines(found, loaded.settings):
            click.echo(line)
    if stop.requested:
        raise SystemExit(stop.exit_code)
