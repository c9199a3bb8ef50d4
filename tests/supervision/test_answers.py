"""What a run does when it is asked for something."""

from __future__ import annotations

from threading import Thread
from typing import Any

import pytest

from tagstream.control import MarkRequest, PlainRequest
from tagstream.errors import ControlError
from tagstream.feeds.marking import MarkEntry
from tagstream.recording.layout import Mark
from tagstream.service import Requests, StopRequest
from tagstream.supervision import answers as module
from tagstream.supervision.answers import Answers


class Loop:
    """What of a run loop is asked."""

    def __init__(self) -> None:
        self.pipeline = self
        self.health = {"state": "running", "received": 5}
        self.done: list[str] = []

    def new_run(self) -> None:
        self.done.append("new-run")

    def restart_spans(self) -> None:
        self.done.append("restart-spans")


def make() -> tuple[Answers, Loop, Requests, StopRequest, MarkEntry]:
    loop, requests, stop, marks = Loop(), Requests(), StopRequest(), MarkEntry(10)
    asked: Any = loop
    return Answers(asked, requests, stop, marks, lambda: "runs/x"), loop, requests, stop, marks


def plain(name: Any) -> PlainRequest:
    return PlainRequest(request=name)


def test_status_stop_and_marks_wait_for_nobody() -> None:
    answers, loop, _, stop, marks = make()
    told = answers(plain("status"))
    assert told == {"run": "runs/x", "state": "running", "health": loop.health}
    answers(MarkRequest(request="mark", key="power", value=2.0, at_ps=70))
    marks.reached_ps = 50
    assert marks.marks() == (Mark(70, "power", 2.0),)
    answers(plain("stop"))
    assert stop.requested


@pytest.mark.parametrize("name", ["new-run", "restart-spans"])
def test_what_changes_tallies_is_done_between_two_steps(name: str) -> None:
    answers, loop, requests, _, _ = make()
    replies: list[Any] = []
    asking = Thread(target=lambda: replies.append(answers(plain(name))))
    asking.start()
    while not replies:
        requests.answer()
    asking.join()
    assert loop.done == [name]


def test_a_busy_run_says_so(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(module, "PATIENCE_S", 0.01)
    answers, _, _, _, _ = make()
    with pytest.raises(ControlError, match="busy"):
        answers(plain("new-run"))
