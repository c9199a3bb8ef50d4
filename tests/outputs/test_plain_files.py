"""Files are put in place by a thread of their own; a slow disk keeps nobody waiting."""

from __future__ import annotations

from pathlib import Path
from threading import Event

import pytest

from tagstream.errors import ResultsError
from tagstream.outputs.folder import RunFolder
from tagstream.outputs.plain_files import PlainFiles
from tagstream.outputs.run_writer import RunWriter, snapshot_period_s
from tests.fakes_outputs import FakeClock, make_header, make_snapshot

NAME = Path("latest.h5")


def test_while_a_slow_disk_writes_no_other_snapshot_is_due(tmp_path: Path) -> None:
    slow, clock = Event(), FakeClock()
    slow.set()

    def put(path: Path, content: bytes) -> None:
        assert slow.wait(30)
        path.write_bytes(content)

    writer = RunWriter(RunFolder.create(tmp_path, "run"), make_header(), clock, put=put)
    clock.now += 1
    assert writer.snapshot_due()
    slow.clear()
    writer.replace_snapshot(make_snapshot(1))
    clock.now += 100
    assert not writer.snapshot_due()
    slow.set()
    writer.settle()
    assert writer.snapshot_due()
    writer.close(make_snapshot(2))


def test_latency_runs_from_the_arrival_to_the_disk() -> None:
    clock = FakeClock(0.0)

    def put(path: Path, content: bytes) -> None:
        clock.now += 0.25

    files = PlainFiles(put, clock)
    assert files.numbers() == {"write_s": 0.0}
    for _ in range(10):
        files.put(NAME, b"", clock.now - 0.5)
        files.settle()
    files.put(NAME, b"")  # shows nothing new
    files.close()
    assert files.numbers() == {
        "write_s": 0.25,
        "latency_s": 0.75,
        "latency_median_s": 0.75,
        "latency_p99_s": 0.75,
    }


def test_what_went_wrong_comes_out_at_the_next_call() -> None:
    def put(path: Path, content: bytes) -> None:
        raise ResultsError("full")

    files = PlainFiles(put)
    files.put(NAME, b"")
    with pytest.raises(ResultsError, match="full"):
        files.put(NAME, b"")
    files.settle()
    files.close()


def test_a_large_image_is_replaced_less_often() -> None:
    assert snapshot_period_s(500_000) == pytest.approx(0.45)
    assert snapshot_period_s(10_000_000) == pytest.approx(9.0)
