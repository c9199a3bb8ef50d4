"""What is done when somebody asks a run for something."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

from tagstream.control import MarkRequest, Request
from tagstream.errors import ControlError
from tagstream.feeds.marking import MarkEntry
from tagstream.service import Requests, RunLoop, StopRequest

PATIENCE_S = 20.0  # how long a run may take to answer; it answers between two steps

Numbers = Mapping[str, int | float | str]


class Answers:
    """Does what is asked of a run; called by the thread that supervises.

    health: the newest numbers, from any thread. folder: of the run that goes on, as text.
    """

    def __init__(
        self,
        loop: RunLoop,
        requests: Requests,
        stop: StopRequest,
        marks: MarkEntry,
        folder: Callable[[], str],
    ) -> None:
        self._loop, self._requests, self._stop = loop, requests, stop
        self._marks, self._folder = marks, folder

    def __call__(self, request: Request) -> Mapping[str, Any]:
        """What the reply says. Raises ControlError when it cannot be done."""
        if isinstance(request, MarkRequest):
            self._marks.ask(request.key, request.value, request.at_ps)
            return {"reached_ps": self._marks.reached_ps}
        if request.request == "status":
            return self._status()
        if request.request == "stop":
            self._stop.ask()
            return {}
        if request.request == "new-run":
            self._wait_for(self._loop.new_run)
            return {"run": self._folder()}
        self._wait_for(lambda: self._loop.pipeline.restart_spans())
        return {}

    def _status(self) -> Mapping[str, Any]:
        health = self._loop.pipeline.health
        return {"run": self._folder(), "state": health.get("state"), "health": health}

    def _wait_for(self, call: Callable[[], None]) -> None:
        future = self._requests.ask(call)
        try:
            future.result(PATIENCE_S)
        except TimeoutError:
            raise ControlError(
                f"not done within {PATIENCE_S:g} s: the run is busy; it will be done when its turn"
                " comes"
            ) from None
