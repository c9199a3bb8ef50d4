"""Recordings as described records, over TCP and pipes, and what a feed makes of them."""

from __future__ import annotations

import os
import socket
import threading
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from tagstream.errors import SettingsError, TagstreamError
from tagstream.feeds import IDLE, build_live_feed
from tagstream.feeds.tcp import TcpFeed
from tagstream.sending import Portion
from tagstream.sending.encoding import RecordEncoder
from tagstream.sending.opening import Target, open_player
from tagstream.sending.play import Conductor
from tagstream.sending.records_line import RecordsLine, StandardOutput, TcpOutlet
from tagstream.settings.feeds import RecordLayout
from tagstream.settings.feeds import TcpFeed as TcpSettings
from tagstream.units import PS_PER_S
from tests.feeds.opened import tags_of
from tests.feeds.records_at_hand import LAYOUT, SLICE_PS, tags_until
from tests.recording.made import piece, write
from tests.strategies import int64

FAST = Conductor(None, lambda seconds: False)
SETTINGS = """
[feed]
kind = "tcp"
listen = "127.0.0.1:1"
record_bytes = 4
tick = "1 ns"
time_bits = [0, 16]
channel_bits = [16, 4]
[[feed.marker]]
where = [[31, 1], [30, 1]]
equals = [1, 1]
means = "gap"
[[feed.marker]]
where = [31, 1]
equals = 1
means = "rollover"
count = [0, 16]
[channels.a]
input = 0
[results]
folder = "runs"
name = "a"
"""


def never() -> bool:
    return False


@pytest.fixture
def settings(tmp_path: Path) -> Path:
    path = tmp_path / "a.toml"
    path.write_text(SETTINGS)
    return path


@pytest.fixture
def tags(tmp_path: Path) -> list[tuple[int, int]]:
    rng = np.random.default_rng(5)
    times = np.sort(rng.integers(0, PS_PER_S // 1000, 5000)) * 1000
    return [(int(t), int(n)) for t, n in zip(times, rng.integers(0, 16, 5000), strict=True)]


@pytest.fixture
def recorded(tmp_path: Path, tags: list[tuple[int, int]]) -> Path:
    return write(tmp_path / "a.h5", [piece(tags, (0, PS_PER_S))])


@pytest.mark.parametrize("feed_listens", [True, False])
def test_a_tcp_feed_gets_the_tags_of_the_recording(
    feed_listens: bool, settings: Path, recorded: Path, tags: list[tuple[int, int]]
) -> None:
    table: dict[str, Any] = LAYOUT | {"kind": "tcp"}
    if feed_listens:
        feed = build_live_feed(
            TcpSettings.model_validate(table | {"listen": "127.0.0.1:0"}), SLICE_PS
        )
        pieces = feed.pieces()
        assert next(pieces) is IDLE
        assert isinstance(feed, TcpFeed)
        assert feed.address is not None
        target = Target("{}:{}".format(*feed.address), records=settings)
        player = open_player([recorded], target, FAST, never)
        playing = threading.Thread(target=player.play, args=(1,))
        playing.start()
        found = tags_until(pieces, len(tags))
        playing.join()
        assert player.sent.counts == {"tags": 5000, "left_out": 0, "gaps_untold": 0}
    else:
        outlet = TcpOutlet("127.0.0.1:0", True, never)
        line = RecordsLine(outlet, RecordEncoder(RecordLayout.model_validate(LAYOUT)))
        feed = build_live_feed(
            TcpSettings.model_validate(table | {"connect": outlet.address}), SLICE_PS
        )
        pieces = feed.pieces()
        times, inputs = int64([t for t, _ in tags]), np.array([i for _, i in tags], np.uint8)

        def send_all() -> None:
            line.send(Portion(0, PS_PER_S, times, inputs))
            line.close()

        playing = threading.Thread(target=send_all)
        playing.start()
        found = tags_until(pieces, len(tags))
        playing.join()
    pieces.close()
    got = tags_of(found)
    shift = tags[0][0] - got[0][0]
    assert [(t + shift, i) for t, i in got] == tags
    assert not any(p.gap_before for p in found)


def sent_through_a_pipe(*portions: Portion, **changes: Any) -> tuple[bytes, dict[str, int]]:
    layout = RecordLayout.model_validate(LAYOUT | changes)
    out, into = os.pipe()
    line = RecordsLine(StandardOutput(never, into), RecordEncoder(layout))
    for portion in portions:
        assert line.send(portion)
    assert line.heartbeat(0)
    line.close()
    os.close(into)
    with os.fdopen(out, "rb") as pipe:
        return pipe.read(), dict(line.counts)


def portion(begin: int, end: int, *times_ns: int, **fields: bool) -> Portion:
    times = int64([1000 * t for t in times_ns])
    return Portion(1000 * begin, 1000 * end, times, np.zeros(times.size, np.uint8), **fields)


def test_gaps_are_told_and_what_records_cannot_tell_is_left_out() -> None:
    portions = [
        portion(0, 10, 5, 3, 12),  # 12 lies outside
        portion(10, 20, 11, gap_before=True),
        portion(20, 30, 21, 22, lossy=True),
        portion(30, 40),
        portion(40, 50, 41),
        portion(60, 70, 61),
    ]
    data, counts = sent_through_a_pipe(*portions)
    gap = 3 << 30
    assert np.frombuffer(data, "<u4").tolist() == [3, 5, gap, 11, gap, 41, gap, 61]
    assert counts == {"tags": 5, "left_out": 3, "gaps_untold": 0}
    data, counts = sent_through_a_pipe(*portions, marker=[])
    assert np.frombuffer(data, "<u4").tolist() == [3, 5, 11, 41, 61]
    assert counts == {"tags": 5, "left_out": 3, "gaps_untold": 3}


def test_a_peer_that_goes_away_is_told() -> None:
    outlet = TcpOutlet("127.0.0.1:0", True, never)
    host, _, port = outlet.address.rpartition(":")
    peer = socket.create_connection((host, int(port)))
    assert outlet.write(b"x")
    peer.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, np.array([1, 0], np.int32).tobytes())
    peer.close()
    with pytest.raises(TagstreamError, match="the peer is gone"):
        all(outlet.write(b"x" * 4096) for _ in range(10_000))
    outlet.close()


def test_a_stop_ends_the_waiting_for_a_peer() -> None:
    asked = iter([False, True])
    outlet = TcpOutlet("127.0.0.1:0", True, lambda: next(asked))
    assert not outlet.write(b"x")
    outlet.close()


def test_settings_without_records_are_refused(tmp_path: Path, settings: Path) -> None:
    scenario = '[feed]\nkind = "simulation"\nscenario = "a.toml"\n'
    rest = SETTINGS[SETTINGS.index("[channels.a]") :]
    settings.write_text(scenario + rest)
    path = write(tmp_path / "a.h5", [piece([(1, 0)])])
    with pytest.raises(SettingsError, match="describes"):
        open_player([path], Target("-", records=settings), FAST, never)
