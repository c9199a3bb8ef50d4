"""Whether and where a run goes on after its process has ended."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any

from tagstream.errors import SettingsError
from tagstream.feeds import ResumePoint
from tagstream.outputs.folder import RunFolder, newest_run
from tagstream.outputs.recovery import mend
from tagstream.outputs.resume import ResumeState, read_resume
from tagstream.settings.load import LoadedSettings

COUNTED_TOGETHER = {
    "channels": "[channels]",
    "conditioning": "[conditioning]",
    "rolling": "[rolling]",
    "tally": "[[tally]]",
}


class Resumption:
    """The newest run of a name, held and mended, and how far it had come.

    Raises SettingsError that names the sections which differ from those of the run, RunBusyError
    while another process writes it, ResultsError where it cannot be read.
    """

    def __init__(self, folder: RunFolder, state: ResumeState, done: list[str]) -> None:
        self.folder, self.state, self.done = folder, state, done

    @property
    def point(self) -> ResumePoint:
        """For the feed."""
        about, going_on = self.state.about, self.state.going_on
        ticks = about.get("origin_ticks")
        return ResumePoint(
            going_on.next_slice * int(about["slice_ps"]),
            None if ticks is None else int(ticks),
            about.get("origin_utc"),
            going_on.position,
            str(about["updated_utc"]),
        )


def resumption(loaded: LoadedSettings, name: str | None) -> Resumption | None:
    """What is to be resumed; None where there is no run of that name, or it counted nothing."""
    results = loaded.settings.results
    newest = newest_run(results.folder, name or results.name)
    if newest is None:
        return None
    require_equal(loaded, newest)
    folder = RunFolder.hold(newest)
    try:
        done = mend(newest)
        state = read_resume(newest)
    except BaseException:
        folder.close()
        raise
    if state is None:
        folder.close()
        return None
    return Resumption(folder, state, done)


def require_equal(loaded: LoadedSettings, run: Path) -> None:
    """Raise SettingsError unless what is counted together is described alike."""
    try:
        stored = tomllib.loads((run / "settings.toml").read_text())
    except (OSError, tomllib.TOMLDecodeError) as error:
        raise SettingsError(
            [f"{run}/settings.toml: cannot be read: {error}; right would be a new run"]
        ) from None
    now: dict[str, Any] = tomllib.loads(loaded.to_toml())
    problems = [
        f"{table}: differs from that of {run}; right would be the same, or a new run without"
        " --resume"
        for key, table in COUNTED_TOGETHER.items()
        if now.get(key) != stored.get(key)
    ]
    if problems:
        raise SettingsError(problems)
