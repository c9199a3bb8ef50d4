"""A sink that looks after the alerts of a run and hands everything on to another one."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterable
from dataclasses import replace
from typing import Any

from tagstream.outputs import Row, RunHeader, Sink, Snapshot
from tagstream.outputs.alerts import AlertChange, Alerts, Health


class Alerting:
    """Raises and clears alerts as rows and snapshots pass; each change is an event of the sink.

    Snapshots get two more numbers of health: alerts_raised, how many there are now, and alerts,
    which ones, separated by "; ". tell: called with each change, must not wait.
    """

    def __init__(
        self,
        sink: Sink,
        alerts: Alerts,
        tell: Callable[[AlertChange], None] = lambda change: None,
        clock: Callable[[], float] = time.monotonic,
    ) -> None:
        self._sink, self._alerts, self._tell, self._clock = sink, alerts, tell, clock

    def add_row(self, row: Row) -> None:
        """Hand on a slice, then what it raised or cleared."""
        self._sink.add_row(row)
        self._say(self._alerts.update(row))

    def snapshot_due(self) -> bool:
        """As the other sink has it."""
        return self._sink.snapshot_due()

    def replace_snapshot(self, snapshot: Snapshot) -> None:
        """Hand on what the health raised or cleared, then the snapshot."""
        self._say(self._alerts.update_health(snapshot.health, self._clock()))
        self._sink.replace_snapshot(self._with_alerts(snapshot))

    def renew(self, header: RunHeader) -> None:
        """Hand on."""
        self._sink.renew(header)

    def event(self, name: str, stream_ps: int | None = None, **fields: Any) -> None:
        """Hand on."""
        self._sink.event(name, stream_ps, **fields)

    def close(self, snapshot: Snapshot) -> None:
        """Hand on the last snapshot; alerts stay as they are."""
        self._sink.close(self._with_alerts(snapshot))

    def restore(self, alerts: str) -> None:
        """Go on with what the health of an earlier process said."""
        self._alerts.restore(alerts.split("; "))

    def replace_alerts(self, alerts: Alerts) -> None:
        """Other alerts from now on; those that are the same keep their state."""
        self._say(alerts.follow(self._alerts))
        self._alerts = alerts

    def _with_alerts(self, snapshot: Snapshot) -> Snapshot:
        raised = self._alerts.raised
        told: Health = {"alerts_raised": len(raised), "alerts": "; ".join(raised)}
        return replace(snapshot, health={**snapshot.health, **told})

    def _say(self, changes: Iterable[AlertChange]) -> None:
        for change in changes:
            self._sink.event(change.event, change.stream_ps, **change.fields)
            self._tell(change)
