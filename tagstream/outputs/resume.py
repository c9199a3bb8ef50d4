"""What a run needs to go on after its process has ended: written beside its results, read back.

All integers of the whole run are in latest.h5 anyway; here is the rest: the sums of the singles,
the counters, where the feed had come to. Short spans begin empty.
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import h5py
import numpy as np

from tagstream.errors import ResultsError
from tagstream.marks import Value
from tagstream.outputs import Arrays, GoingOn
from tagstream.outputs.nodes import make_group, put
from tagstream.outputs.reader import open_run
from tagstream.recording.layout import Mark

GROUP, STATE = "resume", "state"
LAYOUT = 1


@dataclass(frozen=True, slots=True)
class ResumeState:
    """A run as its results tell it.

    going_on: as in the last snapshot. sums: arrays by tally. splits: by tally and value. alerts:
    those that were raised, as in the health. about: scalars of the entry (run_uuid, start_time,
    settings ...).
    """

    going_on: GoingOn
    sums: Mapping[str, Arrays]
    splits: Mapping[str, Mapping[Value, Arrays]]
    marks: tuple[Mark, ...]
    alerts: str
    about: Mapping[str, Any]


def write_going_on(entry: h5py.Group, state: GoingOn) -> None:
    """Write the group `resume`."""
    group = make_group(entry, GROUP, "NXcollection")
    told = {
        "layout": LAYOUT,
        "first_slice": state.first_slice,
        "next_slice": state.next_slice,
        "counters": dict(state.counters),
        "position": dict(state.position),
    }
    put(group, STATE, json.dumps(told))
    for name, values in state.singles.items():
        put(group, name, values)


def read_resume(folder: Path) -> ResumeState | None:
    """How far the run in `folder` had come; None when no slice had ended.

    Raises ResultsError when its latest.h5 cannot be read, or is of another version.
    """
    run = open_run(folder)
    try:
        with h5py.File(folder / "latest.h5", "r", locking=False) as file:
            group = file["run"].get(GROUP)
            if group is None:
                return None
            told = json.loads(group[STATE].asstr()[()])
            singles = {name: node[()] for name, node in group.items() if name != STATE}
    except (OSError, KeyError, ValueError) as error:
        raise _unreadable(folder, str(error)) from error
    if told.get("layout") != LAYOUT:
        raise _unreadable(folder, f"layout {told.get('layout')}; this version knows {LAYOUT}")
    return ResumeState(
        GoingOn(
            {name: np.asarray(values) for name, values in singles.items()},
            told["first_slice"],
            told["next_slice"],
            told["counters"],
            told["position"],
        ),
        {name: spans["run"] for name, spans in run.tallies.items()},
        {name: run.split(name) for name in run.split_keys},
        tuple(run.marks),
        str(run.health.get("alerts", "")),
        run.about,
    )


def _unreadable(folder: Path, why: str) -> ResultsError:
    return ResultsError(
        f"{folder}/latest.h5: the run cannot be resumed: {why}; right would be a new run, without"
        " --resume"
    )
