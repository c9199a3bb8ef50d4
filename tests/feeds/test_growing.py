"""A file of records that still grows."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from tagstream.errors import InputError
from tagstream.feeds import IDLE, Arrivals
from tagstream.feeds.growing import GrowingFeed
from tagstream.settings.feeds import RecordsFeed as RecordsSettings
from tests.feeds.opened import tags_of
from tests.feeds.records_at_hand import LAYOUT, SLICE_PS, data, tag, tags_until


def following(path: Path, wait: Callable[[float], None] = lambda s: None) -> GrowingFeed:
    table = LAYOUT | {"kind": "records", "path": str(path), "follow": True, "skip_bytes": 2}
    return GrowingFeed(RecordsSettings.model_validate(table), SLICE_PS, wait=wait)


def append(path: Path, more: bytes) -> None:
    with path.open("ab") as file:
        file.write(more)


def test_what_is_added_comes_too(tmp_path: Path) -> None:
    path = tmp_path / "a.bin"
    path.write_bytes(b"")
    waited: list[float] = []
    feed = following(path, waited.append)
    pieces = feed.pieces()
    assert next(pieces) is IDLE
    append(path, b"he" + data(tag(5), tag(6))[:7])
    found = tags_until(pieces, 1)
    append(path, data(tag(6))[3:])
    found += tags_until(pieces, 1)
    assert tags_of(found) == [(5_000, 1), (6_000, 1)]
    assert not any(piece.gap_before for piece in found)
    assert max(waited) <= 0.1
    assert feed.link["bytes_received"] == 8
    pieces.close()


def shorten(path: Path) -> None:
    path.write_bytes(b"hea")


def replace(path: Path) -> None:
    other = path.with_name("b.bin")
    other.write_bytes(path.read_bytes())
    other.replace(path)


@pytest.mark.parametrize(
    ("change", "words"),
    [(shorten, "may only grow"), (replace, "replaced"), (Path.unlink, "removed")],
)
def test_a_file_that_changes_otherwise_is_told_after_what_was_good(
    tmp_path: Path, change: Callable[[Path], None], words: str
) -> None:
    path = tmp_path / "a.bin"
    path.write_bytes(b"he" + data(tag(5)))
    pieces = following(path).pieces()
    tags_until(pieces, 1)
    append(path, data(tag(6)))
    change(path)
    found: list[Arrivals] = []
    with pytest.raises(InputError, match=words):
        found.extend(next(pieces) for _ in range(10))
    times = [time for time, _ in tags_of(found)]
    assert times == ([] if change is shorten else [6_000])


def test_a_file_that_is_not_there_is_told(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="must be there"):
        next(following(tmp_path / "a.bin").pieces())


def test_an_interval_is_refused_while_a_file_grows() -> None:
    table = LAYOUT | {"kind": "records", "path": "a", "begin": "0 s", "end": "1 s"}
    RecordsSettings.model_validate(table)
    with pytest.raises(ValueError, match="no longer grows"):
        RecordsSettings.model_validate(table | {"follow": True})
