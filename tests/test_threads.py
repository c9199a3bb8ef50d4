"""Stages in threads: the same items in order, and nothing that is raised gets lost."""

from __future__ import annotations

import time
from collections.abc import Generator, Iterator

import pytest

from tagstream.errors import ResultsError
from tagstream.outputs import Row, Snapshot
from tagstream.threads import OneThread, SinkInThread, ahead
from tests.fakes_outputs import make_header, make_row, make_snapshot
from tests.fakes_sink import MemorySink


@pytest.fixture
def thread() -> Iterator[OneThread]:
    made = OneThread("test")
    yield made
    made.close()


@pytest.mark.parametrize("length", [0, 1, 4, 5, 50])
def test_ahead_gives_the_same_items(thread: OneThread, length: int) -> None:
    def source() -> Generator[int]:
        yield from range(1, length + 1)

    assert list(ahead(source(), thread)) == list(range(1, length + 1))


def test_what_a_source_raises_comes_after_its_items(thread: OneThread) -> None:
    closed: list[bool] = []

    def source() -> Generator[int]:
        try:
            yield from (1, 2, 3)
            raise ResultsError("broken")
        finally:
            closed.append(True)

    found: list[int] = []
    with pytest.raises(ResultsError, match="broken"):
        found.extend(ahead(source(), thread))
    assert found == [1, 2, 3]
    assert closed == [True]


def test_leaving_early_closes_the_source(thread: OneThread) -> None:
    closed: list[bool] = []

    def source() -> Generator[int]:
        try:
            while True:
                yield 1
        finally:
            closed.append(True)

    items = ahead(source(), thread)
    next(items)
    items.close()
    thread.close()
    assert closed == [True]


class Failing(MemorySink):
    """Rows fail, late; closing works."""

    def add_row(self, row: Row) -> None:
        time.sleep(0.02)
        raise ResultsError(f"row {row.slice_index}")

    def close(self, snapshot: Snapshot) -> None:
        super().close(snapshot)


def test_a_row_that_fails_late_is_raised_by_close_and_the_sink_is_closed(
    thread: OneThread,
) -> None:
    inner: list[Failing] = []

    def open_sink(header: object) -> Failing:
        inner.append(Failing(header))  # type: ignore[arg-type]
        return inner[0]

    sink = SinkInThread(open_sink, make_header(), thread)
    sink.add_row(make_row(0))
    sink.add_row(make_row(1))
    with pytest.raises(ResultsError, match="row 0"):
        sink.close(make_snapshot())
    assert len(inner[0].snapshots) == 1
