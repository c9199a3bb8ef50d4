"""Alerts: bounds that estimates or the health of a run may not pass for long.

What is compared is the end of the interval, not the value: `above = x` looks at the lower end,
`below = x` at the upper one, so that counting noise alone seldom raises an alert. Of a number of
the health, the number itself is compared.

An alert is raised when the compared end has been beyond the bound (strictly above, or strictly
below) for `hold`, and cleared as soon as that end is no longer beyond `clear`, which is the bound
itself unless the settings say otherwise. In between it stays as it is.

- Of an estimate, `hold` is counted in stream time: the lengths of the slices, one after another,
  at whose ends the bound was passed, the first included. So a replay raises the same alerts.
  A slice for which there is no number counts neither way.
- Of the health, `hold` is counted in wall time since the bound was first seen passed.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from math import isfinite, isnan, nan
from typing import Any

from tagstream.outputs import Row
from tagstream.settings.sections import Alert
from tagstream.units import PS_PER_S, format_time

RAISED, CLEARED = "alert_raised", "alert_cleared"  # names of the events
Health = Mapping[str, int | float | str]


@dataclass(frozen=True, slots=True)
class AlertChange:
    """An alert that was raised or cleared.

    number: of the [[alert]] section, from 1. what: the alert as the settings have it. stream_ps:
    end of the slice that decided, None for the health. value: of the estimate or number, nan
    where there is none; compared: the end of its interval that was compared with `bound`.
    """

    number: int
    what: str
    raised: bool
    stream_ps: int | None
    value: float
    compared: float
    bound: float

    @property
    def event(self) -> str:
        """What this is called in the log and in messages."""
        return RAISED if self.raised else CLEARED

    @property
    def text(self) -> str:
        """The change for people."""
        verb = "raised" if self.raised else "cleared"
        if isnan(self.value):
            return f"alert {verb}: {self.what}"
        found = f"{self.value:.6g}"
        if self.compared != self.value:
            found += f" (compared is {self.compared:.6g})"
        return f"alert {verb}: {self.what}; it is {found}"

    @property
    def fields(self) -> dict[str, Any]:
        """All of it for the log and for messages."""
        keys = ("number", "what", "value", "compared", "bound")
        return {**{key: _plain(getattr(self, key)) for key in keys}, "text": self.text}


class Alerts:
    """All alerts of a run. No clocks, no threads: `update` and `update_health` say what changed.

    spans: as in the header of the run, in the order in which rows have their estimates.
    """

    def __init__(self, alerts: Iterable[Alert], spans: Sequence[str], slice_ps: int) -> None:
        self._slice_ps = slice_ps
        watches = [_Watch(number, alert) for number, alert in enumerate(alerts, 1)]
        self._of_health = [watch for watch in watches if watch.alert.health is not None]
        self._of_estimates = [
            (watch, spans.index(watch.alert.span))
            for watch in watches
            if watch.alert.span is not None
        ]
        self._all = watches

    def update(self, row: Row) -> list[AlertChange]:
        """What a slice raised or cleared."""
        found = []
        for watch, span in self._of_estimates:
            estimates = row.estimates.get(str(watch.alert.estimate))
            if estimates is not None:
                estimate = estimates[span]
                seen = _Seen(estimate.value, watch.end_of(estimate), row.end_ps)
                found += watch.look(seen, watch.held_ps + self._slice_ps)
        return found

    def update_health(self, health: Health, now_s: float) -> list[AlertChange]:
        """What the health raised or cleared. now_s: of a clock that only goes forward."""
        found = []
        for watch in self._of_health:
            number = health.get(str(watch.alert.health))
            if isinstance(number, int | float):
                found += watch.look(_Seen(number, number, None), watch.waited_ps(now_s))
        return found

    @property
    def raised(self) -> list[str]:
        """What is raised now; also all that `restore` needs."""
        return [watch.what for watch in self._all if watch.raised]

    def restore(self, raised: Iterable[str]) -> None:
        """Go on where an earlier process stopped. What is no alert here any more is left out."""
        texts = set(raised)
        for watch in self._all:
            watch.raised = watch.what in texts

    def follow(self, before: Alerts) -> list[AlertChange]:
        """Take the place of other alerts, each with its state; those that are gone are cleared."""
        old = {watch.what: watch for watch in before._all}
        for watch in self._all:
            if watch.what in old:
                watch.take_over(old.pop(watch.what))
        return [
            watch.change(_Seen(nan, nan, None), False) for watch in old.values() if watch.raised
        ]


@dataclass(frozen=True, slots=True)
class _Seen:
    value: float
    compared: float
    stream_ps: int | None


class _Watch:
    """One alert: whether it is raised, and for how long its bound has been passed."""

    def __init__(self, number: int, alert: Alert) -> None:
        self.number, self.alert, self.what = number, alert, _what(alert)
        self.raised = False
        self.held_ps = 0
        self._since_s: float | None = None
        self._sign = 1.0 if alert.above is not None else -1.0
        self._bound = float(alert.above if alert.above is not None else alert.below or 0.0)
        self._clear = self._bound if alert.clear is None else alert.clear

    def end_of(self, estimate: Any) -> float:
        """The end of an interval that this alert compares."""
        return float(estimate.lower if self._sign > 0 else estimate.upper)

    def waited_ps(self, now_s: float) -> int:
        """Wall time since the bound was first seen passed; `look` is to follow."""
        if self._since_s is None:
            self._since_s = now_s
        return round((now_s - self._since_s) * PS_PER_S)

    def look(self, seen: _Seen, held_ps: int) -> list[AlertChange]:
        """What a number changes. held_ps: how long the bound has been passed, if it is."""
        if isnan(seen.value) or isnan(seen.compared):
            return []
        if self.raised:
            return [] if self._beyond(seen, self._clear) else [self._turn(seen, False)]
        if not self._beyond(seen, self._bound):
            self.held_ps, self._since_s = 0, None
            return []
        self.held_ps = held_ps
        return [self._turn(seen, True)] if held_ps >= self.alert.hold_ps else []

    def change(self, seen: _Seen, raised: bool) -> AlertChange:
        """The record of a change."""
        return AlertChange(
            self.number, self.what, raised, seen.stream_ps, seen.value, seen.compared, self._bound
        )

    def take_over(self, other: _Watch) -> None:
        """The state of the same alert in other settings."""
        self.raised, self.held_ps, self._since_s = other.raised, other.held_ps, other._since_s

    def _beyond(self, seen: _Seen, bound: float) -> bool:
        return self._sign * seen.compared > self._sign * bound

    def _turn(self, seen: _Seen, raised: bool) -> AlertChange:
        self.raised, self.held_ps, self._since_s = raised, 0, None
        return self.change(seen, raised)


def _what(alert: Alert) -> str:
    """An alert in words; two that behave alike have the same."""
    side, bound = ("above", alert.above) if alert.above is not None else ("below", alert.below)
    of = alert.health if alert.estimate is None else f"{alert.estimate} over {alert.span}"
    hold = f" for {format_time(alert.hold_ps)}" if alert.hold_ps else ""
    until = f" until {alert.clear!r}" if alert.clear is not None else ""
    return f"{of} {side} {bound!r}{hold}{until}"


def _plain(value: Any) -> Any:
    """What is no finite number is told as null."""
    return None if isinstance(value, float) and not isfinite(value) else value
