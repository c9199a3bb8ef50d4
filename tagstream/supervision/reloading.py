"""SIGHUP: the settings are read again, and what may change while a run goes on is taken over."""

from __future__ import annotations

from typing import TYPE_CHECKING

from tagstream.errors import SettingsError
from tagstream.settings import Settings
from tagstream.settings.load import LoadedSettings, load_settings
from tagstream.supervision.sinks import Announcing

if TYPE_CHECKING:
    from tagstream.launch import Plan, Started

CHANGEABLE = ("estimates", "alerts", "title")
FIXED = {
    "feed": "[feed]",
    "channels": "[channels]",
    "conditioning": "[conditioning]",
    "rolling": "[rolling]",
    "tallies": "[[tally]]",
    "results": "[results]",
    "recording": "[recording]",
    "publish": "[publish]",
    "control": "[control]",
    "metrics": "[metrics]",
    "security": "[security]",
}


def reload(plan: Plan, run: Started) -> None:
    """Take over changed estimates and alerts, or say in the log why not; all or nothing."""
    try:
        loaded = load_settings(plan.loaded.file, plan.loaded.overrides)
        refuse_fixed(plan.loaded.settings, loaded.settings)
    except SettingsError as error:
        _say(run, error)
        return
    run.requests.ask(lambda: _take_over(run, loaded))


def refuse_fixed(now: Settings, wanted: Settings) -> None:
    """Raise SettingsError that names every section that differs and cannot change."""
    problems = [
        f"{table}: changed, and cannot change while a run goes on; right would be a new start"
        for key, table in FIXED.items()
        if getattr(now, key) != getattr(wanted, key)
    ]
    if problems:
        raise SettingsError(problems)


def _take_over(run: Started, loaded: LoadedSettings) -> None:
    try:
        run.loop.pipeline.reload(loaded.settings, loaded.to_toml())
        if isinstance(run.sinks, Announcing):
            run.sinks.reload(loaded.settings, run.loop.pipeline.header)
    except SettingsError as error:
        _refused(run, error)


def _say(run: Started, error: SettingsError) -> None:
    run.requests.ask(lambda: _refused(run, error))


def _refused(run: Started, error: SettingsError) -> None:
    for problem in error.problems:
        run.loop.pipeline.sink.event("reload_refused", text=problem)
