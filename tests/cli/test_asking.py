"""The verbs that ask a live run: what they send, print and exit with."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

import pytest

from tagstream.control import Request
from tagstream.control.announced import announce
from tagstream.errors import ResultsError
from tagstream.outputs.folder import RunFolder
from tests.control.asked import answering
from tests.flow.conftest import Caller

VERBS = ["status", "mark", "stop", "restart-spans", "new-run"]


class LiveRun:
    """A run folder whose process notes what it is asked."""

    def __init__(self, folder: RunFolder) -> None:
        self.folder, self.path, self.asked = folder, folder.path, list[dict[str, Any]]()

    def handle(self, request: Request) -> Mapping[str, Any]:
        self.asked.append(request.model_dump(exclude_none=True))
        if request.request == "status":
            return {"state": "running", "uptime_s": 12.5, "health": {"gaps": 0, "odd": None}}
        if request.request == "stop":
            raise ResultsError("it is stopping already")
        return {"folder": "/runs/x-0002"} if request.request == "new-run" else {}


@pytest.fixture
def run(tmp_path: Path) -> Iterator[LiveRun]:
    folder = RunFolder.create(tmp_path / "runs", "x")
    (folder.path / "latest.h5").touch()
    live = LiveRun(folder)
    with answering(f"ipc://{tmp_path}/c", live.handle) as server:
        announce(folder.path, server.address)
        yield live
    folder.close()


@pytest.mark.parametrize("verb", VERBS)
def test_each_verb_explains_itself(verb: str, tagstream: Caller) -> None:
    done = tagstream(verb, "--help")
    assert done.code == 0
    assert done.out.startswith(f"Usage: tagstream {verb} ")
    assert f"\n  {verb} " in tagstream("--help").out


def test_marks_are_numbers_where_they_read_as_one(run: LiveRun, tagstream: Caller) -> None:
    done = tagstream("mark", run.path, "power_mw=1.5", "base=HV", "formula=a=b", "off=nan")
    assert (done.code, done.err) == (0, "")
    assert [(mark["key"], mark["value"]) for mark in run.asked] == [
        ("power_mw", 1.5),
        ("base", "HV"),
        ("formula", "a=b"),
        ("off", "nan"),
    ]
    assert "power_mw = 1.5" in done.out
    assert not any("at_ps" in mark for mark in run.asked)


def test_a_mark_at_a_time(run: LiveRun, tagstream: Caller) -> None:
    assert tagstream("mark", run.path, "a=1", "--at", "5000").code == 0
    assert run.asked == [{"request": "mark", "key": "a", "value": 1.0, "at_ps": 5000}]


def test_of_several_marks_none_is_set_when_one_is_wrong(run: LiveRun, tagstream: Caller) -> None:
    done = tagstream("mark", run.path, "a=1", "b", "c/d=1", "e=" + "x" * 65)
    assert done.code == 2
    lines = done.err.splitlines()
    assert len(lines) == 3
    assert lines[0] == "error: b: right would be KEY=VALUE, such as power_mw=1.5"
    assert run.asked == []


def test_status_for_people_and_for_scripts(run: LiveRun, tagstream: Caller) -> None:
    lines = tagstream("status", run.path).out.splitlines()
    assert lines == [
        "state     running",
        "uptime_s  12.5",
        "health",
        "  gaps  0",
        "  odd   -",
    ]
    told = json.loads(tagstream("status", run.path, "--json").out)
    assert told == {"state": "running", "uptime_s": 12.5, "health": {"gaps": 0, "odd": None}}


def test_new_run_and_restart_spans(run: LiveRun, tagstream: Caller) -> None:
    assert "; folder /runs/x-0002" in tagstream("new-run", run.path).out
    assert tagstream("restart-spans", run.path).code == 0
    assert [asked["request"] for asked in run.asked] == ["new-run", "restart-spans"]


def test_a_refusal_is_an_error(run: LiveRun, tagstream: Caller) -> None:
    done = tagstream("stop", run.path)
    assert (done.code, done.out) == (1, "")
    assert done.err == f"error: {run.path}: it is stopping already\n"


@pytest.mark.parametrize("verb", VERBS)
def test_where_nobody_answers_the_exit_code_is_1(
    verb: str, tmp_path: Path, tagstream: Caller
) -> None:
    (tmp_path / "latest.h5").touch()
    done = tagstream(verb, tmp_path, *(["a=1"] if verb == "mark" else []))
    assert (done.code, done.out) == (1, "")
    assert "no process writes this run any more" in done.err
