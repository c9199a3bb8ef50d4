"""Decoding kernels against their slow twins, through the classes that prepare their tables."""

from __future__ import annotations

import csv
import io
from itertools import pairwise
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream.feeds.kernels import (
    BROKEN,
    LINES,
    POSITION,
    RESULT_SIZE,
    fill_decoded,
    fill_rows,
    fill_words,
)
from tagstream.feeds.records import RecordDecoder
from tagstream.settings.feeds import RecordLayout
from tests import naive


@st.composite
def layouts(draw: st.DrawFn) -> RecordLayout:
    """Any layout: sizes, byte orders, fields that straddle and overlap, up to three markers."""
    size = draw(st.integers(2, 16))

    def field(most: int = 63) -> list[int]:
        first = draw(st.integers(0, 8 * size - 1))
        return [first, draw(st.integers(1, min(most, 8 * size - first)))]

    def marker() -> dict[str, Any]:
        where = [field(3) for _ in range(draw(st.integers(1, 2)))]
        if len(where) == 2 and max(a for a, _ in where) < min(a + n for a, n in where):
            where.pop()  # overlapping conditions might contradict
        equals = [draw(st.integers(0, 2**n - 1)) for _, n in where]
        means = draw(st.sampled_from(["rollover", "gap", "skip"]))
        table: dict[str, Any] = {"where": where, "equals": equals, "means": means}
        if means == "rollover":
            table |= draw(st.sampled_from([{}, {"count": field()}]))
            table |= draw(st.sampled_from([{}, {"step": draw(st.integers(1, 2**64))}]))
        return table

    markers = [marker() for _ in range(draw(st.integers(0, 3)))]
    clocks: list[dict[str, Any]] = [{}]
    if all(table["means"] != "rollover" for table in markers):
        clocks.append({"wrap": "implicit", "time_bits": field(62)})
    sign, tick = draw(st.sampled_from("+-")), draw(st.sampled_from(["7/3 ps", "1 ns", "4/5 ps"]))
    fine = {"bits": field(20), "tick": "4/5 ps", "sign": sign}
    clocks += [clock | {"tick": tick, "time_bits": field(40), "fine": fine} for clock in clocks]
    layout = {
        "record_bytes": size,
        "byte_order": draw(st.sampled_from(["little", "big"])),
        "tick": "1 ps",
        "time_bits": field(),
        "channel_bits": field(16),
        "marker": markers,
    }
    return RecordLayout.model_validate(layout | draw(st.sampled_from(clocks)))


def decode(layout: RecordLayout, parts: list[bytes]) -> tuple[list[tuple[int, int, bool]], bool]:
    """What the decoder makes of a stream in parts, in the form of the slow twin."""
    decoder = RecordDecoder(layout)
    tags = []
    for part in parts:
        for piece in decoder.feed(part):
            assert piece.ticks.size > 0
            gaps = [piece.gap_before] + [False] * (piece.ticks.size - 1)
            tags += list(zip(piece.ticks.tolist(), piece.inputs.tolist(), gaps, strict=True))
    return tags, decoder.gap_pending


@given(layouts(), st.data())
def test_any_layout_in_any_parts_decodes_as_the_slow_twin(
    layout: RecordLayout, data: st.DataObject
) -> None:
    stream = data.draw(st.binary(max_size=12 * layout.record_bytes))
    cuts = sorted(data.draw(st.lists(st.integers(0, len(stream)), max_size=5)))
    bounds = [0, *cuts, len(stream)]
    parts = [stream[a:b] for a, b in pairwise(bounds)]
    assert decode(layout, parts) == naive.decoded(stream, layout)


@given(st.integers(1, 16), st.booleans(), st.binary(max_size=100))
def test_words_are_the_records_as_integers(size: int, big: bool, data: bytes) -> None:
    n = len(data) // size
    low, high = np.empty(n, np.int64), np.empty(n, np.int64)
    fill_words(np.frombuffer(data, np.uint8), size, big, low, high)
    order = "big" if big else "little"
    for i in range(n):
        record = int.from_bytes(data[i * size : (i + 1) * size], order)  # type: ignore[arg-type]
        assert int(low[i]) % 2**64 + (int(high[i]) % 2**64 << 64) == record


def test_decoding_stops_at_a_gap_that_has_tags_before_it() -> None:
    """Bit 7 of a record of one number means a gap; the gap itself is used by the next call."""
    low = np.array([1, 2, 128, 3, 128], np.int64)
    fields = np.zeros((3, 7), np.int64)
    fields[0, [1, 5]] = 127, 1
    marker = np.array([[1, 128, 128, 0, 0, 0, 0, 0, 0, 0, 0, 0]], np.int64)
    state = np.array([0, 0, 0, -1], np.int64)
    ticks, inputs = np.empty(5, np.int64), np.empty(5, np.uint8)
    nothing = np.empty(0, np.int64)
    used = fill_decoded(low, nothing, fields, marker, state, ticks, inputs)
    assert (used, ticks[: state[1]].tolist(), state.tolist()) == (2, [1, 2], [0, 2, 0, -1])
    used = fill_decoded(low[2:], nothing, fields, marker, state, ticks, inputs)
    assert (used, ticks[: state[1]].tolist(), state.tolist()) == (2, [3], [0, 1, 1, -1])


# CSV --------------------------------------------------------------------------------------

numbers = st.integers(-(2**63) + 1, 2**63 - 1)
spaced = st.tuples(st.sampled_from(["", " ", "\t "]), st.sampled_from(["", " "]))


@st.composite
def texts(draw: st.DrawFn) -> tuple[str, list[str]]:
    """(lines of three columns in some order, their names): quotes, signs, spaces, empty lines."""
    names = draw(st.permutations(["tick", "channel", "note"]))
    lines = []
    for _ in range(draw(st.integers(0, 6))):
        number = draw(numbers)
        quote = draw(st.sampled_from(["", '"']))
        before, after = draw(spaced)
        plus = draw(st.sampled_from(["", "+"])) if number >= 0 else ""
        cells = {
            "tick": f"{before * (quote == '')}{quote}{plus}{number}{quote}{after * (quote == '')}",
            "channel": str(draw(st.integers(0, 65535))),
            "note": draw(st.sampled_from(["", "x", '"a,b"', "0"])),
        }
        lines.append(",".join(cells[name] for name in names))
        lines += [""] * draw(st.integers(0, 1))
    ending = draw(st.sampled_from(["\n", "\r\n"]))
    return "".join(line + ending for line in lines), names


def rows_of(
    text: str, names: list[str], room: int = 100
) -> tuple[list[tuple[int, int]], list[int]]:
    """What the kernel reads, call by call if there is little room; and its last result."""
    raw = np.frombuffer(text.encode(), np.uint8)
    shape = np.array([ord(","), len(names), names.index("tick"), names.index("channel")])
    ticks, inputs = np.empty(room, np.int64), np.empty(room, np.uint16)
    result = np.zeros(RESULT_SIZE, np.int64)
    rows: list[tuple[int, int]] = []
    while raw.size:
        n = fill_rows(raw, shape, ticks, inputs, result)
        rows += list(zip(ticks[:n].tolist(), inputs[:n].tolist(), strict=True))
        raw = raw[result[POSITION] :]
        if result[BROKEN]:
            break
    return rows, result.tolist()


@given(texts(), st.integers(1, 4))
def test_rows_are_those_of_the_standard_library(made: tuple[str, list[str]], room: int) -> None:
    text, names = made
    header = io.StringIO(newline="")
    csv.writer(header).writerow(names)
    want = naive.csv_rows(header.getvalue() + text, "tick", "channel")
    assert rows_of(text, names, room)[0] == want


@pytest.mark.parametrize(
    "field",
    ["", " ", "-", "+", "--1", "1 2", "1.0", "1e3", "0x1", "9223372036854775808", '"', "1_0", "a"],
)
def test_a_field_that_is_no_integer_breaks_its_line(field: str) -> None:
    rows, result = rows_of(f"1,1\n\n{field},1\n2,2\n", ["tick", "channel"])
    assert rows == [(1, 1)]
    assert (result[BROKEN], result[LINES], result[POSITION]) == (1, 2, 5)


@pytest.mark.parametrize("number", [2**63 - 1, -(2**63) + 1, 0])
def test_the_largest_counts_are_read(number: int) -> None:
    assert rows_of(f"{number},65535\n", ["tick", "channel"])[0] == [(number, 65535)]
