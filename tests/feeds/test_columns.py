"""Columns of CSV, arrays and HDF5: the same tags, whatever holds them."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
from numpy.typing import NDArray

from tagstream.feeds import Feed, columns, csv_columns
from tests.feeds.opened import opened, tags_of

TABLE: dict[str, Any] = {
    "kind": "columns",
    "time_column": "tick",
    "channel_column": "channel",
    "tick": "1 ps",
}
TICKS = np.array([500, 400, 900, 901], np.int64)
INPUTS = np.array([3, 0, 255, 3], np.uint8)
WANTED = list(zip(TICKS.tolist(), INPUTS.tolist(), strict=True))


def csv_file(folder: Path, text: str | bytes, name: str = "a.csv") -> Path:
    path = folder / name
    path.write_bytes(text.encode() if isinstance(text, str) else text)
    return path


def npy_pair(folder: Path, ticks: NDArray[Any], inputs: NDArray[Any]) -> Path:
    np.save(folder / "tick", ticks)
    np.save(folder / "channel", inputs)
    return folder


def npy_feed(folder: Path, ticks: NDArray[Any], inputs: NDArray[Any]) -> Feed:
    names = {"time_column": "tick.npy", "channel_column": "channel.npy"}
    return opened(TABLE | names, npy_pair(folder, ticks, inputs))


def hdf5_feed(
    folder: Path, ticks: NDArray[Any], inputs: NDArray[Any], name: str = "a.h5", **storage: Any
) -> Feed:
    with h5py.File(folder / name, "w") as file:
        file.create_dataset("raw/ticks", data=ticks, dtype=ticks.dtype, **storage)
        file.create_dataset("raw/inputs", data=inputs, dtype=inputs.dtype, **storage)
    names = {"time_column": "raw/ticks", "channel_column": "/raw/inputs"}
    return opened(TABLE | names, folder / name)


def test_real_detections_and_their_differences(real_events: Path) -> None:
    """Differences t(4) - t(2) in bins of one second; the counts are those of
    tests/data/README.md."""
    feed = opened(TABLE | {"tick": "1/8192 s"}, real_events)
    (piece,) = feed.pieces()
    assert piece.times_ps.size == 1000
    ticks = np.round((piece.times_ps / 1e12) * 8192).astype(np.int64)
    lags = ticks[piece.inputs == 4][:, None] - ticks[piece.inputs == 2][None, :]
    counts = [int((lags // 8192 == k).sum()) for k in range(-10, 10)]
    assert counts == [
        *[189, 208, 216, 227, 185, 219, 221, 200, 215, 209],
        *[203, 190, 192, 213, 177, 191, 226, 213, 195, 215],
    ]
    assert piece.times_ps[0] == -(-8614 * 10**12 // 8192) - 10**12  # 8614 ticks are 1.05 s
    assert feed.progress == 1.0


@pytest.mark.parametrize(
    "text",
    [
        "tick,channel\n500,3\n400,0\n900,255\n901,3\n",
        "tick,channel\r\n500,3\r\n400,0\r\n900,255\r\n901,3",
        "\ufefftick,channel\n500,3\n400,0\n900,255\n901,3\n\n",
        "channel;tick\n3;500\n0;400\n255;900\n3;901\n \n",
        '"tick"\t"note"\t"channel"\n500\ta,b\t3\n400\t"x\ty"\t0\n900\t\t"255"\n+901\t1\t 3 \n',
        " tick , channel\n\n500,3\n400,0\n\n900,255\n901,3\n",
        '"note, long";tick;channel\n1;500;3\n;400;0\n,;900;255\n";";901;3\n',
    ],
)
def test_spellings_of_csv(tmp_path: Path, text: str) -> None:
    assert tags_of(list(opened(TABLE, csv_file(tmp_path, text)).pieces())) == WANTED


@pytest.mark.parametrize("name", ["a.CSV", "a.txt", "a.tsv"])
def test_endings_of_csv(tmp_path: Path, name: str) -> None:
    path = csv_file(tmp_path, "tick,channel\n500,3\n", name)
    assert tags_of(list(opened(TABLE, path).pieces())) == [(500, 3)]


def test_a_csv_read_in_small_parts_gives_the_same(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    rng = np.random.default_rng(11)
    ticks, inputs = rng.integers(0, 10**9, 500), rng.integers(0, 300, 500)
    lines = "".join(f"{t},{i}\n" for t, i in zip(ticks, inputs, strict=True))
    path = csv_file(tmp_path, "tick,channel\n" + lines)
    monkeypatch.setattr(csv_columns, "PIECE_TAGS", 9)
    for size in (1, 7, 100):
        monkeypatch.setattr(csv_columns, "READ_BYTES", size)
        pieces = list(opened(TABLE, path).pieces())
        assert max(p.times_ps.size for p in pieces) <= 9
        assert tags_of(pieces) == list(zip(ticks.tolist(), inputs.tolist(), strict=True))


@pytest.mark.parametrize("dtype", ["<i8", ">i8", "<u8", "<i4", ">u2"])
def test_arrays_of_any_integers(tmp_path: Path, dtype: str) -> None:
    feed = npy_feed(tmp_path, TICKS.astype(dtype), INPUTS.astype(">i2"))
    (piece,) = feed.pieces()
    assert tags_of([piece]) == WANTED
    assert piece.inputs.dtype == np.uint16
    assert feed.progress == 1.0


def test_arrays_are_read_piece_by_piece(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(columns, "PIECE_TAGS", 3)
    pieces = list(npy_feed(tmp_path, TICKS, INPUTS).pieces())
    assert [p.times_ps.size for p in pieces] == [3, 1]
    assert tags_of(pieces) == WANTED
    assert pieces[0].inputs.dtype == np.uint8


@pytest.mark.parametrize(
    "storage", [{}, {"chunks": (2,)}, {"chunks": (3,), "compression": "gzip", "shuffle": True}]
)
@pytest.mark.parametrize("name", ["a.h5", "a.dat"])
def test_datasets_of_any_storage_and_files_of_any_name(
    tmp_path: Path, storage: dict[str, Any], name: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(columns, "PIECE_TAGS", 3)
    feed = hdf5_feed(tmp_path, TICKS.astype(">i8"), INPUTS, name, **storage)
    assert tags_of(list(feed.pieces())) == WANTED
