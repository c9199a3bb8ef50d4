"""Options that several verbs share."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar

import click

from tagstream.units import parse_time

F = TypeVar("F", bound=Callable[..., Any])


class Duration(click.ParamType[int]):
    """A time with a unit, such as "20 s", in ps."""

    name = "time"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> int:
        if isinstance(value, int):
            return value
        try:
            ps = int(parse_time(value))
        except ValueError as error:
            self.fail(f'"{value}"; right would be {error}', param, ctx)
        if ps <= 0:
            self.fail(f'"{value}"; right would be a time longer than zero', param, ctx)
        return ps


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


def asked_run_argument(function: F) -> F:
    """RUN, a run folder, the link to the newest one, or the address of its control socket."""
    return click.argument("run")(function)


def keys_option(function: F) -> F:
    """--keys, for requests over the network."""
    return click.option(
        "--keys",
        type=click.Path(path_type=Path),
        help="Folder with the keys of this side; absent: the one that RUN names, if it needs any.",
    )(function)
