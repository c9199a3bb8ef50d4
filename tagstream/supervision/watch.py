"""What the main thread does while others work: it answers, reloads, and tells that all is well."""

from __future__ import annotations

from types import TracebackType
from typing import TYPE_CHECKING

from tagstream.control.announced import announce, withdraw
from tagstream.control.server import ControlServer
from tagstream.errors import TagstreamError
from tagstream.security import control_address
from tagstream.service import StopRequest
from tagstream.supervision.answers import Answers
from tagstream.supervision.reloading import reload
from tagstream.supervision.service_manager import ServiceManager

if TYPE_CHECKING:
    from tagstream.launch import Plan, Started


class Watch:
    """Looks after a run, one short `look` after the other. A context manager.

    Raises what the address of [control] raises when it cannot be bound.
    """

    def __init__(
        self, plan: Plan, run: Started, stop: StopRequest, manager: ServiceManager
    ) -> None:
        self._plan, self._run, self._stop, self._manager = plan, run, stop, manager
        self._server: ControlServer | None = None
        self._announced = run.sinks.folder
        self._told = ""

    def __enter__(self) -> Watch:
        settings = self._plan.loaded.settings
        if self._plan.serves and settings.control is not None:
            self._serve(settings.control.address)
        self._manager.ready()
        return self

    def look(self) -> None:
        """Answer requests, start programs of alerts, reload, tell the service manager."""
        if self._server is not None:
            self._server.poll(0.0)
            self._follow_the_run()
        self._run.sinks.look()
        if self._stop.take_reload() and self._plan.serves:
            reload(self._plan, self._run)
        self._tell()

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, _: TracebackType | None
    ) -> None:
        if self._server is not None:
            withdraw(self._announced)
            self._server.close()

    def _serve(self, address: str) -> None:
        settings, run = self._plan.loaded.settings, self._run
        found, note = control_address(address, settings.results.name)
        if found is None:
            run.requests.ask(lambda: run.loop.pipeline.sink.event("warning", text=note))
            return
        answers = Answers(
            run.loop, run.requests, self._stop, run.receiving.marks, lambda: str(run.sinks.folder)
        )
        self._server = ControlServer(found, answers, settings.security)
        self._announce()

    def _announce(self) -> None:
        security = self._plan.loaded.settings.security
        assert self._server is not None
        self._announced = self._run.sinks.folder
        try:
            announce(self._announced, self._server.address, security.own_keys if security else None)
        except TagstreamError:  # a full disk must not end a run; the address is in the settings
            return

    def _follow_the_run(self) -> None:
        """After a new run was begun, its folder says where to ask."""
        if self._run.sinks.folder != self._announced:
            withdraw(self._announced)
            self._announce()

    def _tell(self) -> None:
        self._manager.alive(self._run.loop.progress)
        state = str(self._run.loop.pipeline.health.get("state", ""))
        if self._stop.requested and self._told != "stopping":
            self._told = "stopping"
            self._manager.stopping()
        elif state != self._told and not self._stop.requested:
            self._told = state
            self._manager.status(f"{state}; results in {self._run.sinks.folder}")
