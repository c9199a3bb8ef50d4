"""Where the results of a run go: its folder first, then all who asked for them."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

from tagstream.outputs import RunHeader, Sink
from tagstream.outputs.alert_commands import AlertCommands
from tagstream.outputs.alerting import Alerting
from tagstream.outputs.alerts import Alerts
from tagstream.outputs.fanout import Fanout
from tagstream.outputs.folder import RunFolder
from tagstream.outputs.metrics import Metrics
from tagstream.outputs.patient import Patient
from tagstream.outputs.publish import Publisher, Sender
from tagstream.outputs.run_writer import RunWriter
from tagstream.settings import Settings
from tagstream.settings.sections import Alert
from tagstream.threads import OneThread, SinkInThread

OpenFolder = Callable[[], RunFolder]
Numbers = Mapping[str, int | float | str]


class ResultsOnly:
    """The sinks of a replay: its folder, and alerts, which nobody is told of.

    open_folder: makes or takes the folder. files: the thread that does all HDF5. before: what
    the folder tells of an earlier process of the same run, for the first one that is opened.
    """

    def __init__(
        self,
        settings: Settings,
        open_folder: OpenFolder,
        files: OneThread,
        before: Mapping[str, Any] | None = None,
    ) -> None:
        self.settings, self._open_folder, self._files = settings, open_folder, files
        self._before = before
        self.writer: RunWriter | None = None
        self.alerting: Alerting | None = None

    @property
    def folder(self) -> Path:
        """Of the newest run."""
        assert self.writer is not None
        return self.writer.folder.path

    def open(self, header: RunHeader) -> Sink:
        """The sink of the next run."""
        written = SinkInThread(self._open_writer, header, self._files)
        self.alerting = Alerting(written, self._alerts(header, self.settings.alerts))
        return self.alerting

    def restore(self, alerts: str) -> None:
        """Go on with the alerts that an earlier process had raised, as its health said."""
        assert self.alerting is not None
        self.alerting.restore(alerts)

    def look(self) -> None:
        """What is due now and then, in the thread that supervises."""

    def numbers(self) -> Numbers:
        """For the health."""
        return {} if self.writer is None else self.writer.numbers()

    def close(self) -> None:
        """After the last run."""

    def _open_writer(self, header: RunHeader) -> Sink:
        before, self._before = self._before, None
        self.writer = RunWriter(self._open_folder(), header, before=before)
        return self.writer

    def _alerts(self, header: RunHeader, alerts: list[Alert]) -> Alerts:
        return Alerts(alerts, header.spans, header.slice_ps)


class Announcing(ResultsOnly):
    """The sinks of a run that others listen to: publish, metrics, programs of alerts too.

    ask: has a call made in the thread that counts.
    """

    def __init__(
        self,
        settings: Settings,
        open_folder: OpenFolder,
        files: OneThread,
        before: Mapping[str, Any] | None,
        ask: Callable[[Callable[[], None]], Any],
    ) -> None:
        super().__init__(settings, open_folder, files, before)
        self._ask = ask
        self._commands: AlertCommands | None = None
        self._fanout: Fanout | None = None

    def open(self, header: RunHeader) -> Sink:
        """The sink of the next run. Raises what the addresses raise that it binds."""
        self.close()
        written = SinkInThread(self._open_writer, header, self._files)
        try:
            self._fanout = Fanout(written, self._others(header))
        except BaseException:
            self._files.submit(self._give_up).result()
            raise
        alerts = self.settings.alerts
        fanout = self._fanout

        def event(name: str, stream_ps: int | None = None, **fields: Any) -> None:
            self._ask(lambda: fanout.event(name, stream_ps, **fields))

        self._commands = AlertCommands(alerts, str(self.folder), event)
        self.alerting = Alerting(fanout, self._alerts(header, alerts), self._commands.tell)
        return self.alerting

    def reload(self, settings: Settings, header: RunHeader) -> None:
        """Take over other alerts."""
        self.settings = settings
        if self.alerting is not None and self._commands is not None:
            self._commands.replace_alerts(settings.alerts)
            self.alerting.replace_alerts(self._alerts(header, settings.alerts))

    def look(self) -> None:
        """Start and watch the programs of alerts."""
        if self._commands is not None:
            self._commands.look()

    def numbers(self) -> Numbers:
        """For the health."""
        told = {} if self._fanout is None else self._fanout.numbers
        return {**super().numbers(), **told}

    def close(self) -> None:
        """Let programs of alerts end."""
        if self._commands is not None:
            self._commands.close()
            self._commands = None

    def _others(self, header: RunHeader) -> dict[str, Sink]:
        settings, others = self.settings, dict[str, Sink]()
        assert self.writer is not None
        if settings.publish is not None:
            sender = Sender(self.folder.name, self.writer.run_uuid)
            address = settings.publish.address
            others["publish"] = Publisher(address, sender, header, settings.security)
        if settings.metrics is not None:
            others["metrics"] = Metrics(settings.metrics.listen, header)
        return others

    def _give_up(self) -> None:
        if self.writer is not None:
            self.writer.folder.close()


class Enduring(Announcing):
    """The same for a live run: where results cannot be written they pause, and tags are counted."""

    def __init__(self, *arguments: Any) -> None:
        super().__init__(*arguments)
        self._patient: Patient | None = None

    def _open_writer(self, header: RunHeader) -> Sink:
        super()._open_writer(header)
        assert self.writer is not None
        self._patient = Patient(self.writer, self.settings.results.min_free)
        return self._patient

    def numbers(self) -> Numbers:
        """For the health."""
        patient = {} if self._patient is None else self._patient.numbers()
        return {**super().numbers(), **patient}
