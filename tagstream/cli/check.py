"""The verb `check`."""

from __future__ import annotations

import json
from pathlib import Path

import click

from tagstream.cli.options import json_option, set_option, settings_argument
from tagstream.errors import SettingsError
from tagstream.settings import load_settings, rules
from tagstream.units import format_bytes


@click.command()
@settings_argument
@set_option
@json_option
def command(settings: Path, overrides: tuple[str, ...], as_json: bool) -> None:
    """Tell every error of SETTINGS at once, or print them with all defaults.

    Starts nothing. Exit code 2 when something is wrong.
    """
    try:
        loaded = load_settings(settings, overrides)
    except SettingsError as error:
        if as_json:
            click.echo(json.dumps({"errors": error.problems, "warnings": []}, indent=2))
            raise SystemExit(error.exit_code) from None
        raise
    memory = rules.memory_bytes(loaded.settings.tallies, loaded.settings.rolling)
    if as_json:
        report = {
            "errors": [],
            "warnings": loaded.warnings,
            "memory_bytes": memory,
            "settings": loaded.to_toml(),
        }
        click.echo(json.dumps(report, indent=2))
        return
    click.echo(f"# effective settings of {settings}; tallies and spans take")
    click.echo(f"# about {format_bytes(memory)} of memory")
    click.echo(loaded.to_toml(), nl=False)
    for text in loaded.warnings:
        click.echo(f"warning: {text}", err=True)
    click.echo(f"{settings}: no errors", err=True)
