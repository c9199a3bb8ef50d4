"""The verb `replay`."""

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
@click.argument(
    "recordings", metavar="RECORDING...", nargs=-1, required=True, type=click.Path(path_type=Path)
)
@set_option
@name_option
@pace_option
@json_option
def command(
    settings: Path,
    recordings: tuple[Path, ...],
    overrides: tuple[str, ...],
    name: str | None,
    pace: float | None,
    as_json: bool,
) -> None:
    """Take recordings to results under SETTINGS, in place of their [feed].

    Several recordings are segments of one run. The same tags and settings give the same
    integers, whenever and however fast.
    """
    from tagstream import launch
    from tagstream.cli import session
    from tagstream.settings import load_settings

    loaded = load_settings(settings, overrides).for_replay()
    feed = launch.feed_of_recordings(recordings, loaded.settings)
    session.conduct(launch.Plan(loaded, feed, name, pace), as_json)
