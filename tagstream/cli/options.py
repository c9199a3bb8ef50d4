"""Options that several verbs share."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar

import click

F = TypeVar("F", bound=Callable[..., Any])


def settings_argument(function: F) -> F:
    """SETTINGS, the path of a settings file."""
    return click.argument("settings", type=click.Path(path_type=Path))(function)


def run_argument(function: F) -> F:
    """RUN, a run folder or the link to the newest one."""
    return click.argument("run", type=click.Path(path_type=Path))(function)


def set_option(function: F) -> F:
    """--set key=value, repeatable."""
    return click.option(
        "--set",
        "overrides",
        metavar="KEY=VALUE",
        multiple=True,
        help='A value in place of one in the settings, as in --set rolling.slice="2 s".',
    )(function)


def json_option(function: F) -> F:
    """--json."""
    return click.option(
        "--json/--no-json", "as_json", default=False, help="Print JSON, for scripts."
    )(function)


def pace_option(function: F) -> F:
    """--pace."""
    return click.option(
        "--pace",
        type=click.FloatRange(min=0, min_open=True),
        help="Stream seconds per second of wall time; absent: as fast as it can.",
    )(function)


def name_option(function: F) -> F:
    """--name."""
    return click.option("--name", help="Name of the run, in place of [results] name.")(function)
