"""log.jsonl: one object a line, at once; gaps that come in crowds are folded, none is lost."""

from __future__ import annotations

import errno
import json
from collections.abc import Iterator
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pytest

from tagstream.errors import ResultsError
from tagstream.outputs.log import EventLog
from tests.fakes_outputs import FakeClock


def lines(path: Path) -> list[dict[str, Any]]:
    return [json.loads(line) for line in path.read_text().splitlines()]


@pytest.fixture
def clock() -> FakeClock:
    return FakeClock()


@pytest.fixture
def log(tmp_path: Path, clock: FakeClock) -> Iterator[EventLog]:
    opened = EventLog(tmp_path / "log.jsonl", clock)
    yield opened
    opened.close()


def test_each_line_has_the_fixed_fields_and_stands_at_once(tmp_path: Path, log: EventLog) -> None:
    log.event("start", None, {"version": "1"})
    log.event("warning", 5, {"text": "bins of 3 µs"})
    start, warning = lines(tmp_path / "log.jsonl")
    assert list(start)[:4] == ["utc", "level", "event", "stream_ps"]
    assert (start["level"], start["event"], start["stream_ps"]) == ("info", "start", None)
    assert start["version"] == "1"
    assert (warning["level"], warning["stream_ps"]) == ("warning", 5)
    assert warning["text"] == "bins of 3 µs"
    assert datetime.fromisoformat(start["utc"]).tzinfo == UTC


def test_gaps_within_a_second_are_folded_into_one_line(
    tmp_path: Path, log: EventLog, clock: FakeClock
) -> None:
    for number in range(1, 1001):
        log.event("gap", number, {"gaps": number})
        clock.now += 0.0005
    assert [line["gaps"] for line in lines(tmp_path / "log.jsonl")] == [1]
    clock.now += 1
    log.event("gap", 1001, {"gaps": 1001})
    first, folded, last = lines(tmp_path / "log.jsonl")
    assert "folded" not in first
    assert (folded["folded"], folded["gaps"], folded["stream_ps"]) == (999, 1000, 1000)
    assert last["gaps"] == 1001
    assert 1 + folded["folded"] + 1 == 1001  # no gap is missing


def test_another_event_finds_the_folded_line_before_it(tmp_path: Path, log: EventLog) -> None:
    log.event("gap", 1, {"gaps": 1})
    log.event("gap", 2, {"gaps": 2})
    log.event("end", None, {})
    assert [line["event"] for line in lines(tmp_path / "log.jsonl")] == ["gap", "gap", "end"]


def test_other_events_are_never_folded(tmp_path: Path, log: EventLog) -> None:
    for number in range(5):
        log.event("warning", number, {})
    assert [line["stream_ps"] for line in lines(tmp_path / "log.jsonl")] == [0, 1, 2, 3, 4]


def test_gaps_that_end_are_written_by_settle_and_by_close(
    tmp_path: Path, log: EventLog, clock: FakeClock
) -> None:
    path = tmp_path / "log.jsonl"
    log.event("gap", 1, {"gaps": 1})
    log.event("gap", 2, {"gaps": 2})
    log.settle()
    assert len(lines(path)) == 1  # others may follow
    clock.now += 1
    log.settle()
    assert lines(path)[-1]["folded"] == 1
    log.event("gap", 3, {"gaps": 3})
    log.event("gap", 4, {"gaps": 4})
    log.close()
    assert [line["gaps"] for line in lines(path)] == [1, 2, 3, 4]


def test_an_existing_log_is_continued(tmp_path: Path, log: EventLog, clock: FakeClock) -> None:
    log.event("start", None, {})
    log.close()
    again = EventLog(tmp_path / "log.jsonl", clock)
    again.event("start", None, {})
    again.close()
    assert len(lines(tmp_path / "log.jsonl")) == 2


def test_a_log_that_cannot_be_opened(tmp_path: Path, clock: FakeClock) -> None:
    (tmp_path / "log.jsonl").mkdir()
    with pytest.raises(ResultsError, match=r"log\.jsonl: results cannot be written"):
        EventLog(tmp_path / "log.jsonl", clock)


class FullDisk:
    """A file on a disk without room."""

    closed = False

    def write(self, _: str) -> int:
        raise OSError(errno.ENOSPC, "No space left on device")

    def close(self) -> None:
        self.closed = True
        raise OSError(errno.ENOSPC, "No space left on device")


def test_a_full_disk_is_told_once(log: EventLog) -> None:
    disk = FullDisk()
    log._file.close()
    log._file = disk  # type: ignore[assignment]
    with pytest.raises(ResultsError, match=r"log.jsonl.*make room on that disk"):
        log.event("start", None, {})
    log.event("end", None, {})  # the run is ending because of the first one
    log.close()
    assert disk.closed
