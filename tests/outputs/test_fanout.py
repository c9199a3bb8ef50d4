"""Several sinks as one."""

from __future__ import annotations

from typing import Any

import pytest

from tagstream.errors import ResultsError
from tagstream.outputs import Row, Snapshot
from tagstream.outputs.fanout import Fanout
from tests.fakes_outputs import make_header, make_row, make_snapshot
from tests.fakes_sink import MemorySink


class Broken(MemorySink):
    """Fails at everything, except when told to be well."""

    well = False

    def _fail(self) -> None:
        if not self.well:
            raise OSError("no way out")

    def add_row(self, row: Row) -> None:
        self._fail()
        super().add_row(row)

    def replace_snapshot(self, snapshot: Snapshot) -> None:
        self._fail()

    def event(self, name: str, stream_ps: int | None = None, **fields: Any) -> None:
        self._fail()

    def close(self, snapshot: Snapshot) -> None:
        self._fail()


def sink(kind: type[MemorySink] = MemorySink) -> Any:
    return kind(make_header())


def test_all_hear_everything() -> None:
    first, second = sink(), sink()
    fanout = Fanout(first, {"second": second})
    fanout.add_row(make_row(0))
    fanout.replace_snapshot(make_snapshot(1))
    fanout.event("gap", 5, gaps=2)
    fanout.renew(make_header(title="other"))
    fanout.close(make_snapshot(2))
    for one in (first, second):
        assert [row.slice_index for row in one.rows] == [0]
        assert [s.health["received"] for s in one.snapshots] == [21, 22]
        assert one.events == [("gap", {"gaps": 2})]
        assert one.header.title == "other"
    assert fanout.numbers == {"second_failures": 0}


def test_the_first_decides_when_a_snapshot_is_due(monkeypatch: pytest.MonkeyPatch) -> None:
    first, second = sink(), sink()
    fanout = Fanout(first, {"second": second})
    monkeypatch.setattr(second, "snapshot_due", lambda: True)
    assert not fanout.snapshot_due()
    monkeypatch.setattr(first, "snapshot_due", lambda: True)
    assert fanout.snapshot_due()


def test_another_that_fails_is_told_once_counted_and_tried_again() -> None:
    first, broken, third = sink(), sink(Broken), sink()
    fanout = Fanout(first, {"publish": broken, "metrics": third})
    for index in range(3):
        fanout.add_row(make_row(index))
    fanout.replace_snapshot(make_snapshot())
    broken.well = True
    fanout.add_row(make_row(3))
    assert first.events == [("output_failed", {"output": "publish", "error": "no way out"})]
    assert fanout.numbers == {"publish_failures": 4, "metrics_failures": 0}
    assert [row.slice_index for row in broken.rows] == [3]
    assert [row.slice_index for row in third.rows] == [0, 1, 2, 3]


def test_a_failure_at_the_end_is_still_told_and_the_first_is_closed() -> None:
    first, broken = sink(), sink(Broken)
    Fanout(first, {"publish": broken}).close(make_snapshot())
    assert [name for name, _ in first.events] == ["output_failed"]
    assert len(first.snapshots) == 1


def test_what_the_first_raises_is_raised(monkeypatch: pytest.MonkeyPatch) -> None:
    first, second = sink(), sink()

    def full(row: Row) -> None:
        raise ResultsError("disk full")

    monkeypatch.setattr(first, "add_row", full)
    with pytest.raises(ResultsError, match="disk full"):
        Fanout(first, {"second": second}).add_row(make_row(0))
