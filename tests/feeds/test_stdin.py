"""Records on standard input."""

from __future__ import annotations

import os
import pty
from pathlib import Path

import pytest

from tagstream.errors import SettingsError
from tagstream.feeds import IDLE, build_live_feed
from tagstream.feeds import stdin as stdin_module
from tagstream.feeds.stdin import StdinFeed
from tagstream.settings.feeds import StdinFeed as StdinSettings
from tests.feeds.opened import tags_of
from tests.feeds.records_at_hand import GAP, LAYOUT, SLICE_PS, data, fill, tag, tags_until


def opened(monkeypatch: pytest.MonkeyPatch, descriptor: int) -> StdinFeed:
    monkeypatch.setattr(stdin_module, "STANDARD_INPUT", descriptor)
    settings = StdinSettings.model_validate(LAYOUT | {"kind": "stdin"})
    feed = build_live_feed(settings, SLICE_PS)
    assert isinstance(feed, StdinFeed)
    return feed


def test_a_pipe_is_read_to_its_end(monkeypatch: pytest.MonkeyPatch) -> None:
    out, into = os.pipe()
    feed = opened(monkeypatch, out)
    pieces = feed.pieces()
    assert next(pieces) is IDLE
    os.write(into, data(tag(5), tag(6))[:7])
    found = tags_until(pieces, 1)
    fill(into, data(tag(6))[3:], data(GAP, tag(9)), b"cut")
    found += [piece for piece in pieces if piece is not IDLE]
    assert tags_of(found) == [(5_000, 1), (6_000, 1), (9_000, 1)]
    assert [piece.gap_before for piece in found] == [False, False, True]
    assert feed.link == {"bytes_received": 19, "records_cut": 1}
    os.close(out)


def test_a_file_is_read_to_its_end(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    path = tmp_path / "a.bin"
    path.write_bytes(data(*(tag(t) for t in range(3000))))
    with path.open("rb") as file:
        feed = opened(monkeypatch, file.fileno())
        found = [piece for piece in feed.pieces() if piece is not IDLE]
    assert [time for time, _ in tags_of(found)] == [1000 * t for t in range(3000)]
    assert feed.progress is None
    assert feed.truth == {}
    assert feed.time_base.tick == 1000


def test_a_terminal_is_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    one, other = pty.openpty()
    with pytest.raises(SettingsError, match="a pipe or a file"):
        opened(monkeypatch, other)
    os.close(one)
    os.close(other)
