"""Tags to records: what the decoder makes of them is what went in."""

from __future__ import annotations

from fractions import Fraction
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream.errors import SettingsError
from tagstream.feeds.records import RecordDecoder
from tagstream.sending.encoding import RecordEncoder
from tagstream.settings.feeds import RecordLayout
from tests.strategies import int64

BASE: dict[str, Any] = {
    "record_bytes": 6,
    "tick": "4 ps",
    "time_bits": [3, 12],
    "channel_bits": [16, 5],
}
COUNTED = {"where": [[47, 1], [46, 1]], "equals": [1, 0], "means": "rollover", "count": [0, 3]}
ROLLOVER = {"where": [[47, 1], [46, 1]], "equals": [1, 0], "means": "rollover"}
GAP = {"where": [[47, 1], [46, 1]], "equals": [1, 1], "means": "gap"}
FINE = {"bits": [24, 9], "tick": "1/3 ps"}
LAYOUTS: dict[str, dict[str, Any]] = {
    "counted rollovers": {"marker": [GAP, COUNTED]},
    "single rollovers": {"marker": [GAP, ROLLOVER]},
    "shorter steps": {"marker": [ROLLOVER | {"step": 1000}]},
    "big endian": {"marker": [COUNTED, GAP], "byte_order": "big"},
    "implicit": {"wrap": "implicit"},
    "fine added": {"marker": [COUNTED], "fine": FINE},
    "fine taken off": {"marker": [COUNTED], "fine": FINE | {"sign": "-"}},
    "16 bytes": {
        "record_bytes": 16,
        "time_bits": [58, 12],
        "channel_bits": [100, 16],
        "marker": [{"where": [127, 1], "equals": 0, "means": "rollover", "count": [64, 8]}],
    },
}


def layout(**changes: Any) -> RecordLayout:
    return RecordLayout.model_validate(BASE | changes)


def round_trip(described: RecordLayout, parts: list[list[tuple[int, int]]]) -> list[Any]:
    encoder, decoder = RecordEncoder(described), RecordDecoder(described)
    found = []
    for part in parts:
        times, inputs = int64([t for t, _ in part]), np.array([i for _, i in part], np.uint16)
        for piece in decoder.feed(encoder.encode(times, inputs)):
            found += list(zip(piece.ticks.tolist(), piece.inputs.tolist(), strict=True))
    return found


@pytest.mark.parametrize("changes", LAYOUTS.values(), ids=LAYOUTS.keys())
@given(st.lists(st.tuples(st.integers(0, 1500), st.integers(0, 31)), max_size=30), st.data())
def test_what_is_encoded_decodes_to_the_same(
    changes: dict[str, Any], steps: list[tuple[int, int]], more: st.DataObject
) -> None:
    described = layout(**changes)
    tick = described.native_tick_ps
    count = more.draw(st.integers(0, 100))
    tags = []
    for step, number in steps:
        count += step * (1 if described.fine is None else 9)
        tags.append((count, number))
    # whole picoseconds, from which the nearest tick is the count again
    times = [(int(n * tick) if tick >= 1 else n, i) for n, i in tags]
    cut = more.draw(st.integers(0, len(tags)))
    found = round_trip(described, [times[:cut], times[cut:]])
    exact = [Fraction(time) / tick for time, _ in times]
    shift = exact[0] - found[0][0] if found else 0
    assert [n + shift for n, _ in found] == exact
    assert [i for _, i in found] == [i for _, i in tags]


def test_a_time_between_ticks_becomes_the_nearest() -> None:
    described = layout(wrap="implicit")
    found = round_trip(described, [[(1, 0), (2, 0), (5, 0), (6, 0), (7, 0)]])
    assert [n for n, _ in found] == [0, 1, 1, 2, 2]


def test_a_gap_is_told_where_the_layout_can() -> None:
    encoder = RecordEncoder(layout(marker=[COUNTED, GAP]))
    decoder = RecordDecoder(layout(marker=[COUNTED, GAP]))
    assert decoder.feed(encoder.gap()) == []
    assert decoder.gap_pending
    assert RecordEncoder(layout()).gap() == b""


CANNOT: list[tuple[dict[str, Any], list[tuple[int, int]], str]] = [
    ({}, [(0, 0), (4 * 4096, 0)], "are full"),
    ({"wrap": "implicit"}, [(0, 0), (4 * 2049, 0)], "longer pause"),
    ({}, [(0, 32)], "cannot hold input 32"),
    ({"marker": [{"where": [3, 1], "equals": 1, "means": "skip"}]}, [(4, 0)], "as this marker"),
    ({"marker": [ROLLOVER | {"step": 5000}]}, [], "more than time_bits"),
    ({"marker": [COUNTED], "fine": {"bits": [24, 2], "tick": "1/3 ps"}}, [], "fine reaches"),
    (
        {"marker": [{"where": [46, 1], "equals": 0, "means": "skip"}, COUNTED]},
        [(0, 0), (4 * 5000, 0)],
        "as another marker",
    ),
    ({"tick": "1/4096 ps", "wrap": "implicit"}, [(2**51, 0)], "64 bits"),
]


@pytest.mark.parametrize(("changes", "tags", "words"), CANNOT)
def test_what_a_layout_cannot_hold_is_told(
    changes: dict[str, Any], tags: list[tuple[int, int]], words: str
) -> None:
    with pytest.raises(SettingsError, match=words):
        round_trip(layout(**changes), [tags])
