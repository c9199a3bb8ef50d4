"""log.jsonl: one object a line, at once; gaps that come in crowds are folded, none is lost."""

from __future__ import annotations

import errno
import json
import re
from collections.abc import Iterator
from datetime import UTC, datetime
from io import FileIO
from pathlib import Path
from typing import Any, NoReturn

import pytest

from tagstream.errors import ResultsError
from tagstream.outputs import log as module
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


def test_how_bad_it_is(tmp_path: Path, log: EventLog) -> None:
    log.event("results_paused", None, {"why": "full"})
    log.event("end", None, {"state": "finished"})
    log.event("end", None, {"state": "failed", "error": "full"})
    levels = [line["level"] for line in lines(tmp_path / "log.jsonl")]
    assert levels == ["error", "info", "error"]


def test_every_event_of_the_program_is_described() -> None:
    """Names that are written as they are; those of alerts are in `alerts`."""
    package = Path(module.__file__).parents[1]
    text = "".join(path.read_text() for path in package.rglob("*.py"))
    told = set(re.findall(r"event\(\s*\"([a-z_]+)\"", text))
    assert len(told) > 15
    described = set(re.findall("[a-z_]+", module.__doc__ or ""))
    assert told <= described


def test_a_large_log_goes_on_in_a_new_file(
    tmp_path: Path, log: EventLog, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(module, "MOST_BYTES", 1000)
    for number in range(40):
        log.event("warning", number, {})
    files = [*sorted(tmp_path.glob("log-*.jsonl")), tmp_path / "log.jsonl"]
    assert [path.name for path in files[:2]] == ["log-0001.jsonl", "log-0002.jsonl"]
    assert [line["stream_ps"] for path in files for line in lines(path)] == list(range(40))
    assert all(path.stat().st_size < 1200 for path in files)


def test_a_log_that_cannot_go_on_in_a_new_file_goes_on_in_the_old_one(
    tmp_path: Path, log: EventLog, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(module, "MOST_BYTES", 1)

    def fail(*_: object) -> NoReturn:
        raise OSError(errno.ENOSPC, "No space left on device")

    with monkeypatch.context() as full:
        full.setattr(module, "FileIO", fail)
        for number in range(2):
            with pytest.raises(ResultsError):
                log.event("warning", number, {})
            log.begin_again()
    log.event("warning", 2, {})
    log.event("warning", 3, {})
    files = sorted(tmp_path.glob("log-*.jsonl"))
    assert [line["stream_ps"] for path in files for line in lines(path)] == [0, 1, 2, 3]


def test_a_line_that_a_power_cut_left_torn_spoils_no_other(
    tmp_path: Path, clock: FakeClock
) -> None:
    path = tmp_path / "log.jsonl"
    path.write_text('{"event": "sta')
    for _ in range(2):
        log = EventLog(path, clock)
        log.event("resume", None, {})
        log.close()
    torn, *whole = path.read_text().splitlines()
    assert torn == '{"event": "sta'
    assert [json.loads(line)["event"] for line in whole] == ["resume", "resume"]


def test_half_a_line_is_taken_back(tmp_path: Path, log: EventLog) -> None:
    """A disk that fills up takes the beginning of a line."""
    log.event("start", None, {})

    class Filling(FileIO):
        def write(self, line: Any) -> int:
            return super().write(bytes(line)[:9])

    whole, log._file = log._file, Filling(tmp_path / "log.jsonl", "a")
    with pytest.raises(ResultsError, match="make room"):
        log.event("warning", None, {})
    log._file.close()
    log._file = whole
    log.begin_again()
    log.event("end", None, {})
    assert [line["event"] for line in lines(tmp_path / "log.jsonl")] == ["start", "end"]


class FullDisk:
    """A file on a disk without room."""

    closed = False

    def seek(self, *_: int) -> int:
        return 0

    def write(self, _: bytes) -> int:
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
