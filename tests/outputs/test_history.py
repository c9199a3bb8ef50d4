"""The history: one row a slice, readable while it grows, whole after a failure."""

from __future__ import annotations

import errno
import os
import time
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any, NoReturn

import h5py
import numpy as np
import pytest

from tagstream.errors import ResultsError
from tagstream.outputs import history as module
from tagstream.outputs.history import BATCH_ROWS, CHUNK_VALUES, FLUSH_S, SYNC_S, History
from tests.fakes_outputs import FakeClock, make_estimate, make_header, make_row

INTEGERS = ["slice", "begin_ps", "end_ps", "live_time_ps", "counts:arm_a", "counts:arm_b"]
NUMBERS = ["utc"] + [
    f"{estimate}:{span}:{column}"
    for estimate in ("g2_zero", "rate_a")
    for span in ("run", "10s")
    for column in ("value", "lower", "upper")
]


@pytest.fixture
def clock() -> FakeClock:
    return FakeClock()


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "history-0001.h5"


@pytest.fixture
def history(path: Path, clock: FakeClock) -> Iterator[History]:
    opened = History(path, make_header(), clock)
    yield opened
    opened.close()


def tables(path: Path) -> tuple[np.ndarray[Any, Any], np.ndarray[Any, Any]]:
    """Both tables as a reader beside a living writer sees them."""
    with h5py.File(path, "r", swmr=True, locking=False) as file:
        return file["run/integers"][()], file["run/numbers"][()]


def rows_in(path: Path) -> int:
    integers, numbers = tables(path)
    assert integers.shape[0] == numbers.shape[0]
    return int(integers.shape[0])


def test_layout(path: Path, history: History) -> None:
    with h5py.File(path, "r", swmr=True, locking=False) as file:
        assert dict(file.attrs) == {"NX_class": "NXroot", "default": "run"}
        assert dict(file["run"].attrs) == {"NX_class": "NXentry"}
        assert sorted(file["run"]) == ["integers", "numbers"]
        for name, columns, dtype in (("integers", INTEGERS, "<i8"), ("numbers", NUMBERS, "<f8")):
            table = file["run"][name]
            assert [text.decode() for text in table.attrs["columns"]] == columns
            assert table.dtype.str == dtype
            assert table.shape == (0, len(columns))
            assert table.maxshape == (None, len(columns))
            assert table.compression is None
            assert table.chunks == (CHUNK_VALUES // len(columns), len(columns))
            assert 8 * np.prod(table.chunks) <= 32 * 1024


def test_a_wide_table_keeps_at_least_four_rows_a_chunk(tmp_path: Path, clock: FakeClock) -> None:
    header = make_header(estimates={f"e{i}": "1" for i in range(400)})
    history = History(tmp_path / "wide.h5", header, clock)
    history.close()
    with h5py.File(tmp_path / "wide.h5", "r") as file:
        assert file["run/numbers"].chunks == (4, 1 + 400 * 2 * 3)


def test_rows_come_back_bit_for_bit(path: Path, history: History, clock: FakeClock) -> None:
    rows = [make_row(index) for index in range(200)]
    for row in rows:
        history.add(row)
        clock.now += FLUSH_S / 10
    history.close()
    integers, numbers = tables(path)
    for row, whole, real in zip(rows, integers, numbers, strict=True):
        head = [row.slice_index, row.begin_ps, row.end_ps, row.live_time_ps]
        assert whole.tolist() == head + row.counts.tolist()
        found = [e for name in ("g2_zero", "rate_a") for e in row.estimates[name]]
        expected = [number for e in found for number in (e.value, e.lower, e.upper)]
        assert np.array_equal(real[1:], expected, equal_nan=True)


def test_a_row_of_a_live_run_is_in_the_file_at_once(
    path: Path, history: History, clock: FakeClock
) -> None:
    for index in range(5):
        clock.now += 0.1  # a slice of 100 ms
        history.add(make_row(index))
        assert rows_in(path) == index + 1


def test_rows_of_a_replay_are_written_by_the_batch(
    path: Path, history: History, clock: FakeClock
) -> None:
    for index in range(BATCH_ROWS - 1):
        history.add(make_row(index))
    assert rows_in(path) == 0
    history.add(make_row(BATCH_ROWS - 1))
    assert rows_in(path) == BATCH_ROWS
    history.add(make_row(BATCH_ROWS))
    assert rows_in(path) == BATCH_ROWS
    clock.now += 2 * FLUSH_S
    history.add(make_row(BATCH_ROWS + 1))
    assert rows_in(path) == BATCH_ROWS + 2
    history.add(make_row(BATCH_ROWS + 2))
    history.flush()
    assert rows_in(path) == BATCH_ROWS + 3
    history.add(make_row(BATCH_ROWS + 3))
    history.close()
    assert tables(path)[0][:, 0].tolist() == list(range(BATCH_ROWS + 4))


def test_a_closed_history_is_an_ordinary_file(path: Path, history: History) -> None:
    history.add(make_row(0))
    history.close()
    with h5py.File(path, "r") as file:
        assert file["run/integers"].shape == (1, len(INTEGERS))
    history.close()  # a second time is no error


def test_utc_is_the_time_of_writing(
    path: Path, history: History, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(time, "time", lambda: 1_800_000_000.125)
    history.add(make_row(0))
    history.close()
    assert tables(path)[1][0, 0] == 1_800_000_000.125


def test_it_reaches_the_disk_now_and_then(
    history: History, clock: FakeClock, monkeypatch: pytest.MonkeyPatch
) -> None:
    synced: list[int] = []
    monkeypatch.setattr(os, "fsync", synced.append)
    for index in range(30):
        clock.now += 1
        history.add(make_row(index))
    assert len(synced) == 30 // SYNC_S


def test_it_has_its_name_only_when_readers_can_open_it(
    path: Path, clock: FakeClock, monkeypatch: pytest.MonkeyPatch
) -> None:
    def look(source: Path, target: Path) -> None:
        assert not path.exists()
        with h5py.File(source, "r", swmr=True, locking=False) as file:
            assert file["run/integers"].shape[0] == 0
        os.replace(source, target)

    monkeypatch.setattr(os, "rename", look)
    History(path, make_header(), clock).close()
    assert [p.name for p in path.parent.iterdir()] == [path.name]


def test_an_existing_history_is_never_written_over(path: Path, clock: FakeClock) -> None:
    path.write_bytes(b"an older one")
    with pytest.raises(ResultsError, match=r"history-0001\.h5: exists already"):
        History(path, make_header(), clock)
    assert path.read_bytes() == b"an older one"


def test_a_folder_that_is_not_there(tmp_path: Path, clock: FakeClock) -> None:
    with pytest.raises(ResultsError, match="No such file or directory"):
        History(tmp_path / "absent/history-0001.h5", make_header(), clock)


def failing(number: int) -> Any:
    def fail(*_: object, **__: object) -> NoReturn:
        raise OSError(number, os.strerror(number))

    return fail


def test_a_skeleton_that_cannot_be_made_leaves_nothing(
    path: Path, clock: FakeClock, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(module, "_table", failing(errno.ENOSPC))
    with pytest.raises(ResultsError, match=r"history-0001\.h5.*make room on that disk"):
        History(path, make_header(), clock)
    assert list(path.parent.iterdir()) == []


@pytest.mark.parametrize(
    "error",
    [
        OSError(errno.ENOSPC, "No space left on device"),
        RuntimeError("Unable to flush dataset (file write failed: errno = 28, buf = 0x55)"),
    ],
)
def test_after_a_failed_write_what_was_flushed_stays_and_the_rest_is_let_go(
    path: Path,
    history: History,
    clock: FakeClock,
    monkeypatch: pytest.MonkeyPatch,
    error: Exception,
) -> None:
    clock.now += 1
    history.add(make_row(0))

    def fail(*_: object) -> NoReturn:
        raise error

    monkeypatch.setattr(module, "_append", fail)
    clock.now += 1
    with pytest.raises(ResultsError, match=r"history-0001\.h5.*make room on that disk"):
        history.add(make_row(1))
    monkeypatch.undo()
    history.add(make_row(2))  # while the run closes
    history.flush()
    history.close()
    assert tables(path)[0][:, 0].tolist() == [0]


def test_an_estimate_may_be_infinite_or_none(path: Path, history: History) -> None:
    wild = make_estimate(value=np.inf, lower=-np.inf, upper=np.nan)
    estimates = {"g2_zero": (wild, wild), "rate_a": (wild, wild)}
    history.add(replace(make_row(0), estimates=estimates))
    history.close()
    assert np.array_equal(tables(path)[1][0, 1:4], [np.inf, -np.inf, np.nan], equal_nan=True)
