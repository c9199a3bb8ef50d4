"""The verb `run`."""

from __future__ import annotations

from pathlib import Path

import click

from tagstream.cli.options import (
    json_option,
    name_option,
    pace_option,
    set_option,
    settings_argument,
)


@click.command()
@settings_argument
@set_option
@name_option
@pace_option
@json_option
def command(
    settings: Path, overrides: tuple[str, ...], name: str | None, pace: float | None, as_json: bool
) -> None:
    """Take the feed of SETTINGS to results until it ends or a stop is asked for.

    Makes a new run folder. Ctrl-C and SIGTERM end it cleanly, with everything written.
    """
    from tagstream import launch
    from tagstream.cli import session
    from tagstream.settings import load_settings

    loaded = load_settings(settings, overrides)
    feed = launch.feed_of(loaded.settings)
    session.conduct(launch.Plan(loaded, feed, name, pace), as_json)
