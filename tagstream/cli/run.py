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
@click.option(
    "--resume/--no-resume",
    default=False,
    help="Go on with the newest run of this name, if its channels and tallies are the same.",
)
@json_option
def command(
    settings: Path,
    overrides: tuple[str, ...],
    name: str | None,
    pace: float | None,
    resume: bool,
    as_json: bool,
) -> None:
    """Take the feed of SETTINGS to results until it ends or a stop is asked for.

    Makes a new run folder, or goes on with the newest one. Ctrl-C and SIGTERM end it cleanly,
    with everything written; SIGHUP takes over changed alerts and estimates.
    """
    from tagstream import launch
    from tagstream.cli import session
    from tagstream.settings import load_settings
    from tagstream.supervision.resuming import resumption

    loaded = load_settings(settings, overrides)
    resumed = resumption(loaded, name) if resume else None
    feed = launch.feed_of(loaded.settings, resumed)
    plan = launch.Plan(loaded, feed, name, pace, serves=True, resumed=resumed)
    session.conduct(plan, as_json)
