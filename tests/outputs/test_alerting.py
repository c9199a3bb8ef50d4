"""Alerts as they pass through a sink."""

from __future__ import annotations

from dataclasses import replace

from tagstream.outputs.alerting import Alerting
from tagstream.outputs.alerts import AlertChange, Alerts
from tests.fakes_outputs import SLICE_PS, SPANS, FakeClock, make_header, make_row, make_snapshot
from tests.fakes_sink import MemorySink
from tests.outputs.test_alerts import alert


def made(*sections: object, **keys: object) -> tuple[Alerting, MemorySink, list[AlertChange]]:
    sink, told = MemorySink(make_header()), list[AlertChange]()
    alerts = Alerts(sections, SPANS, SLICE_PS)  # type: ignore[arg-type]
    return Alerting(sink, alerts, told.append, FakeClock()), sink, told


def test_changes_are_events_and_are_told() -> None:
    alerting, sink, told = made(alert(span="run", above=0.3))
    for index in range(3):
        alerting.add_row(make_row(index))
    assert [row.slice_index for row in sink.rows] == [0, 1, 2]
    assert [name for name, _ in sink.events] == []  # the lower end stays below
    alerting, sink, told = made(alert(span="run", above=0.05))
    alerting.add_row(make_row(0))
    ((name, fields),) = sink.events
    assert name == "alert_raised"
    assert fields["what"] == "g2_zero over run above 0.05"
    assert [change.raised for change in told] == [True]


def test_snapshots_say_what_is_raised() -> None:
    alerting, sink, _ = made(alert(span="run", above=0.05), alert(health="gaps", above=0.5))
    alerting.replace_snapshot(make_snapshot())
    alerting.add_row(make_row(0))
    alerting.replace_snapshot(make_snapshot())
    alerting.close(make_snapshot())
    told = [(s.health["alerts_raised"], s.health["alerts"]) for s in sink.snapshots]
    both = "g2_zero over run above 0.05; gaps above 0.5"
    assert told == [(1, "gaps above 0.5"), (2, both), (2, both)]
    assert sink.snapshots[0].health["received"] == 20


def test_what_a_snapshot_says_is_enough_to_go_on() -> None:
    alerting, sink, _ = made(alert(span="run", above=0.05), alert(health="gaps", above=0.5))
    alerting.add_row(make_row(0))
    alerting.replace_snapshot(make_snapshot())
    again, later, told = made(alert(span="run", above=0.05), alert(health="gaps", above=0.5))
    again.restore(str(sink.snapshots[0].health["alerts"]))
    again.add_row(make_row(1))
    quiet = replace(make_snapshot(), health={"state": "running", "gaps": 0})
    again.replace_snapshot(quiet)
    assert [change.text for change in told] == ["alert cleared: gaps above 0.5; it is 0"]
    assert later.snapshots[0].health["alerts"] == "g2_zero over run above 0.05"


def test_nothing_raised_is_nothing_to_restore() -> None:
    alerting, sink, _ = made(alert())
    alerting.restore("")
    alerting.close(make_snapshot())
    assert sink.snapshots[0].health["alerts"] == ""


def test_other_alerts_take_over() -> None:
    alerting, sink, _ = made(alert(health="gaps", above=0.5))
    alerting.replace_snapshot(make_snapshot())
    alerting.replace_alerts(Alerts([alert(health="kept", above=1.0)], SPANS, SLICE_PS))
    alerting.replace_snapshot(make_snapshot())
    names = [(name, fields["what"]) for name, fields in sink.events]
    assert names == [
        ("alert_raised", "gaps above 0.5"),
        ("alert_cleared", "gaps above 0.5"),
        ("alert_raised", "kept above 1.0"),
    ]
