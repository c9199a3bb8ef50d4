"""Frames of a message: what is right comes through, anything else is one exception."""

from __future__ import annotations

import json
import random
from collections import Counter
from fractions import Fraction
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream.feeds.messages import (
    HEADER_BYTES,
    MOST_TAGS,
    Frame,
    MessageError,
    TagsHeader,
    TagsMessage,
    header_bytes,
    message_frames,
    parse_header,
    parse_message,
)
from tests.feeds.messages_at_hand import GOOD, HEADER, mutated

MUTATED_MESSAGES = 100_000
TICKS = [Fraction(1), Fraction(3, 2), Fraction(10**12, 8192), Fraction(12_500)]

names = st.text(st.characters(min_codepoint=33, max_codepoint=0x2FF), min_size=1, max_size=30)
wholes = st.integers(-(2**62), 2**62)


def header_with(**changed: Any) -> bytes:
    table = json.loads(header_bytes(GOOD.header)) | changed
    return json.dumps({key: value for key, value in table.items() if value != "absent"}).encode()


@given(
    stream=names.filter(str.isprintable),
    session=names.filter(str.isprintable),
    sequence=st.integers(0, 2**62),
    tick=st.sampled_from(TICKS),
    ends=st.tuples(wholes, wholes),
    tags=st.lists(st.tuples(st.integers(-(2**63), 2**63 - 1), st.integers(0, 65535)), max_size=5),
    lost=st.integers(0, 2**62),
    zero=st.none() | st.datetimes().map(lambda moment: moment.isoformat() + "Z"),
)
def test_what_is_sent_is_what_arrives(
    stream: str,
    session: str,
    sequence: int,
    tick: Fraction,
    ends: tuple[int, int],
    tags: list[tuple[int, int]],
    lost: int,
    zero: str | None,
) -> None:
    begin, end = sorted(ends)
    header = TagsHeader(stream, session, sequence, len(tags), tick, begin, end, lost, zero)
    ticks = np.array([tick for tick, _ in tags], np.int64)
    inputs = np.array([number for _, number in tags], np.uint16)
    got = parse_message(message_frames(TagsMessage(header, ticks, inputs)))
    assert got.header == header
    assert got.ticks.tolist() == ticks.tolist()
    assert got.inputs.tolist() == inputs.tolist()


def test_the_bytes_are_those_of_the_description() -> None:
    header = json.dumps(
        {"format": "tagstream-tags", "version": 1, "stream": "a", "session": "x", "sequence": 0}
        | {"count": 2, "tick": "1 ps", "begin": 0, "end": 513, "lost": 0, "of_others": [1, None]}
    ).encode()
    times = bytes([1, 0, 0, 0, 0, 0, 0, 0, 0, 2, 0, 0, 0, 0, 0, 0])
    got = parse_message([header, times, bytes([1, 0, 0, 1])])
    assert (got.ticks.tolist(), got.inputs.tolist()) == ([1, 512], [1, 256])
    assert got.header == TagsHeader("a", "x", 0, 2, Fraction(1), 0, 513)


def test_arrays_share_the_memory_of_frames_unless_they_lie_oddly() -> None:
    frames = message_frames(GOOD)
    even = parse_message(frames)
    assert np.shares_memory(even.ticks, np.frombuffer(frames[1], np.uint8))
    odd = memoryview(bytearray(17))[1:]
    odd[:] = frames[1]
    moved = parse_message([frames[0], odd, frames[2]])
    assert moved.ticks.flags.aligned
    assert moved.ticks.tolist() == GOOD.ticks.tolist()


@pytest.mark.parametrize(
    ("changed", "says"),
    [
        ({"format": "other"}, "format is other"),
        ({"format": "absent"}, "format is null"),
        ({"version": 2}, "version is 2; this program reads 1"),
        ({"version": True}, "version is true"),
        ({"version": "1"}, "version is 1;"),
        ({"stream": ""}, "stream"),
        ({"stream": 5}, "stream is 5"),
        ({"stream": "a\nb"}, "stream"),
        ({"stream": "\ud800"}, "stream is"),
        ({"session": "absent"}, "session is missing"),
        ({"session": "x" * 201}, "session is xxx"),
        ({"sequence": -1}, "sequence is -1"),
        ({"sequence": 0.0}, "sequence is 0.0"),
        ({"sequence": 10**30}, "sequence is 1000"),
        ({"count": MOST_TAGS + 1}, "count is 4194305"),
        ({"count": False}, "count is false"),
        ({"count": None}, "count is null"),
        ({"tick": "1"}, "tick is 1; right would be a number with a unit"),
        ({"tick": "0 ps"}, "at least 1 ps"),
        ({"tick": "-1 ps"}, "at least 1 ps"),
        ({"tick": "0.5 ps"}, "at least 1 ps"),
        ({"tick": "1e999999999 s"}, "shorter number"),
        ({"tick": "1/0 s"}, "divisor"),
        ({"tick": 1}, "tick is 1"),
        ({"tick": "1" * 60 + " ps"}, "short text"),
        ({"begin": 101}, "begin 101 lies after end 100"),
        ({"begin": -(2**62) - 1}, "begin"),
        ({"end": [1]}, "end is"),
        ({"lost": "absent"}, "lost is missing"),
        ({"lost": -1}, "lost is -1"),
        ({"zero_utc": "2026-12-01T12:00:00"}, "with its offset"),
        ({"zero_utc": "noon"}, "zero_utc is noon"),
        ({"zero_utc": "0001-01-01T00:00:00+10:00"}, "zero_utc"),
        ({"zero_utc": 7}, "zero_utc is 7"),
    ],
)
def test_a_wrong_header_is_refused_with_the_reason(changed: dict[str, Any], says: str) -> None:
    with pytest.raises(MessageError) as caught:
        parse_header(header_with(**changed))
    assert says in str(caught.value)
    assert len(str(caught.value)) < 200
    assert str(caught.value).isprintable()


@pytest.mark.parametrize(
    "frame",
    [
        b"",
        b"\xff\xfe",
        b"{",
        b"[]",
        b"null",
        b"[" * 60_000,
        b'{"a":' * 12_000,
        b'{"format": "tagstream-tags", "format": "tagstream-tags"}',
        b'{"begin": NaN}',
        b'{"begin": -Infinity}',
        b'{"begin": ' + b"9" * 5000 + b"}",
        b" " * (HEADER_BYTES + 1),
        b"\xef\xbb\xbf{}",
    ],
    ids=lambda frame: repr(frame[:12]),
)
def test_what_is_no_json_object_is_refused(frame: bytes) -> None:
    with pytest.raises(MessageError, match="header"):
        parse_header(frame)


@pytest.mark.parametrize(
    ("frames", "says"),
    [
        ([], "0 frames"),
        (message_frames(GOOD)[:2], "2 frames"),
        ([*message_frames(GOOD), b""], "4 frames"),
        ([header_bytes(GOOD.header), b"x" * 15, b"x" * 4], "15 bytes of times"),
        ([header_bytes(GOOD.header), b"x" * 16, b"x" * 2], "2 bytes of inputs"),
        ([header_bytes(HEADER), b"x", b""], "1 bytes of times"),
    ],
)
def test_frames_that_do_not_fit_are_refused(frames: list[Frame], says: str) -> None:
    with pytest.raises(MessageError, match=says):
        parse_message(frames)


def test_mutated_messages_are_messages_or_refused_and_nothing_else() -> None:
    outcomes = outcomes_of_mutated(MUTATED_MESSAGES, seed=4)
    assert outcomes["unprintable"] == 0
    assert outcomes["refused"] > MUTATED_MESSAGES // 2
    assert outcomes["read"] > MUTATED_MESSAGES // 100


def outcomes_of_mutated(count: int, seed: int) -> Counter[str]:
    """How many of `count` mutated messages were read and how many refused."""
    chance = random.Random(seed)
    good = [bytes(frame) for frame in message_frames(GOOD)]
    outcomes: Counter[str] = Counter()
    for _ in range(count):
        try:
            parsed = parse_message(mutated(good, chance))
        except MessageError as error:
            outcomes["refused" if str(error).isprintable() else "unprintable"] += 1
        else:
            assert parsed.ticks.size == parsed.inputs.size == parsed.header.count
            assert parsed.header.begin <= parsed.header.end
            outcomes["read"] += 1
    return outcomes
