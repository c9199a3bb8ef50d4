"""Binary records: markers, gaps, epochs that overflow, files."""

from __future__ import annotations

import re
from fractions import Fraction
from math import floor
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from tagstream.feeds import records as records_module
from tagstream.feeds.records import RecordDecoder
from tagstream.feeds.ticks import SATURATED
from tagstream.settings.feeds import RecordLayout
from tagstream.units import BEYOND_LIMIT_PS
from tests.feeds.opened import opened, tags_of

LAYOUT: dict[str, Any] = {
    "record_bytes": 4,
    "tick": "1 ns",
    "time_bits": [0, 16],
    "channel_bits": [16, 4],
    "marker": [
        {"where": [[31, 1], [30, 1]], "equals": [1, 1], "means": "gap"},
        {"where": [31, 1], "equals": 1, "means": "rollover", "count": [0, 16]},
        {"where": [30, 1], "equals": 1, "means": "rollover", "step": 1000},
        {"where": [29, 1], "equals": 1, "means": "skip"},
    ],
}
FEED = LAYOUT | {"kind": "records"}
GAP, ROLLOVER, STEP, SKIP = 3 << 30, 1 << 31, 1 << 30, 1 << 29


def tag(time: int, channel: int = 1) -> int:
    return channel << 16 | time


def data(*numbers: int) -> bytes:
    return np.array(numbers, "<u4").tobytes()


def write(folder: Path, *numbers: int) -> Path:
    path = folder / "a.bin"
    path.write_bytes(data(*numbers))
    return path


def decoder(**changes: Any) -> RecordDecoder:
    return RecordDecoder(RecordLayout.model_validate(LAYOUT | changes))


def test_the_first_marker_that_matches_wins() -> None:
    (first, second) = decoder().feed(data(tag(5), GAP, tag(7)))
    assert (first.ticks.tolist(), first.gap_before) == ([5], False)
    assert (second.ticks.tolist(), second.gap_before) == ([7], True)


def test_rollovers_add_up_by_count_and_by_step() -> None:
    (piece,) = decoder().feed(
        data(tag(1), ROLLOVER | 2, tag(1), STEP, tag(1), ROLLOVER | 0, tag(1), SKIP, tag(2))
    )
    assert piece.ticks.tolist() == [1, 2**17 + 1, 2**17 + 1001, 2**17 + 1001, 2**17 + 1002]


def test_without_markers_a_time_far_below_the_last_means_that_the_clock_began_again() -> None:
    """Late tags of before the wrap, and garbage, put the time off for themselves alone."""
    implicit = decoder(wrap="implicit", marker=[])
    times = [65_000, 10, 65_530, 12, 30_000, 62_000, 5]
    (piece,) = implicit.feed(data(*map(tag, times)))
    turn = 2**16
    expected = [65_000, turn + 10, 65_530, *(turn + t for t in times[3:6]), 2 * turn + 5]
    assert piece.ticks.tolist() == expected


@pytest.mark.parametrize(("sign", "fine_ticks"), [("+", 6), ("-", -6)])
def test_a_fine_time_is_added_or_taken_off_exactly(
    tmp_path: Path, sign: str, fine_ticks: int
) -> None:
    """Coarse ticks of 2.5 ps and fine ones of 1/3 ps have 1/6 ps in common."""
    fine = {"bits": [20, 4], "tick": "1/3 ps", "sign": sign}
    path = write(tmp_path, tag(1000), tag(1001) | 3 << 20)
    feed = opened(FEED | {"tick": "2.5 ps", "fine": fine}, path)
    (piece,) = feed.pieces()
    assert feed.time_base.tick == Fraction(1, 6)
    exact = Fraction(15 * 1001 + fine_ticks, 6)
    assert piece.times_ps.tolist() == [2500, floor(exact + Fraction(1, 2))]


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"wrap": "implicit"}, "not both"),
        ({"wrap": "implicit", "marker": [], "record_bytes": 8, "time_bits": [0, 63]}, "62 bits"),
        ({"fine": {"bits": [30, 4], "tick": "1 ps"}}, "fine bits"),
        ({"fine": {"bits": [0, 40], "tick": "1 s"}, "record_bytes": 8}, "at most 2**62"),
        ({"fine": {"bits": [0, 4], "tick": "1/999999999999989 s"}}, "below 2**61"),
        ({"fine": {"bits": [0, 4], "tick": "1 ps", "sign": "x"}}, "sign"),
    ],
)
def test_a_layout_whose_clock_cannot_be_is_refused(changes: dict[str, Any], words: str) -> None:
    with pytest.raises(ValueError, match=re.escape(words)):
        RecordLayout.model_validate(LAYOUT | changes)


def test_a_record_may_come_byte_by_byte() -> None:
    stream = data(ROLLOVER | 1, tag(9, 3), GAP, tag(2))
    whole = decoder()
    pieces = [piece for byte in stream for piece in whole.feed(bytes([byte]))]
    assert [p.ticks.tolist() for p in pieces] == [[2**16 + 9], [2**16 + 2]]
    assert [p.gap_before for p in pieces] == [False, True]
    assert whole.held == 0
    whole.feed(b"abc")
    assert whole.held == 3


def test_inputs_are_as_wide_as_their_field() -> None:
    assert decoder().feed(data(tag(1)))[0].inputs.dtype == np.uint8
    wide = decoder(channel_bits=[16, 12])
    assert wide.feed(data(tag(1)))[0].inputs.dtype == np.uint16


def test_unaligned_memory_is_read_as_any_other() -> None:
    layout = {"record_bytes": 8, "tick": "1 ps", "time_bits": [0, 48], "channel_bits": [48, 8]}
    records = np.arange(4, dtype=np.int64) + (5 << 48)
    moved = memoryview(b"x" + records.tobytes())[1:]
    (piece,) = RecordDecoder(RecordLayout.model_validate(layout)).feed(bytes(moved))
    (again,) = RecordDecoder(RecordLayout.model_validate(layout)).feed(moved)
    assert piece.ticks.tolist() == again.ticks.tolist() == [0, 1, 2, 3]
    assert again.inputs.tolist() == [5, 5, 5, 5]


def test_an_epoch_past_int64_stays_past_the_limit(tmp_path: Path) -> None:
    steps = [{"where": [30, 1], "equals": 1, "means": "rollover", "step": 2**62}]
    path = write(tmp_path, tag(7), STEP, STEP, tag(7), STEP, STEP, tag(8))
    assert [p.ticks.tolist() for p in decoder(marker=steps).feed(path.read_bytes())] == [
        [7, SATURATED, SATURATED]
    ]
    (piece,) = opened(FEED | {"marker": steps, "tick": "1 ps"}, path).pieces()
    assert piece.times_ps.tolist() == [7, BEYOND_LIMIT_PS, BEYOND_LIMIT_PS]


def test_a_count_past_int64_is_beyond_the_limit_even_from_a_late_origin(tmp_path: Path) -> None:
    """With the origin at 2**62 ps, 2**63 - 1 ps would be a good time; it stands for more."""
    steps = [{"where": [30, 1], "equals": 1, "means": "rollover", "step": 2**62}]
    path = write(tmp_path, STEP, tag(7), STEP, tag(7))
    (piece,) = opened(FEED | {"marker": steps, "tick": "1 ps"}, path).pieces()
    assert piece.times_ps[1] == BEYOND_LIMIT_PS


def test_a_file_begins_after_its_header_and_in_its_first_slice(tmp_path: Path) -> None:
    path = tmp_path / "a.bin"
    path.write_bytes(b"header" + data(ROLLOVER | 20_000, tag(5, 2), tag(6)))
    feed = opened(FEED | {"skip_bytes": 6}, path)
    assert tags_of(list(feed.pieces())) == [(310_720_005_000, 2), (310_720_006_000, 1)]
    # 20 000 * 65 536 ns = 1.310 72 s: one slice of 1 s is taken off
    assert feed.time_base.origin_ticks == 10**9
    assert feed.time_base.tick == 1000
    assert feed.progress == 1.0
    assert feed.truth == {}


def test_a_long_file_comes_in_pieces_that_join_to_the_same(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    rng = np.random.default_rng(5)
    path = tmp_path / "a.bin"
    path.write_bytes(rng.bytes(4 * 5000))
    plain = list(opened(FEED, path).pieces())
    monkeypatch.setattr(records_module, "PIECE_TAGS", 7)
    small = list(opened(FEED, path).pieces())
    assert max(p.times_ps.size for p in small) <= 7 < len(small)
    assert tags_of(small) == tags_of(plain)
    gaps = [
        [sum(q.times_ps.size for q in pieces[:i]) for i, p in enumerate(pieces) if p.gap_before]
        for pieces in (plain, small)
    ]
    assert gaps[0] == gaps[1] != []


def test_a_gap_at_the_end_of_a_vouched_file_is_told(tmp_path: Path) -> None:
    path = write(tmp_path, tag(5), GAP)
    feed = opened(FEED | {"begin": "0 ps", "end": "65 us"}, path)
    told = [(p.times_ps.tolist(), p.gap_before, p.complete) for p in feed.pieces()]
    assert told == [([5000], False, False), ([], True, False), ([], False, True)]
