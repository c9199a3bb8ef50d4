"""Messages of tags for tests."""

from __future__ import annotations

import random
from collections.abc import Sequence
from dataclasses import replace
from fractions import Fraction
from typing import Any

import numpy as np

from tagstream.feeds.messages import Frame, TagsHeader, TagsMessage

HEADER = TagsHeader("lab", "first start", 0, 0, Fraction(1), 0, 0)


def message(
    sequence: int, begin: int, end: int, tags: Sequence[tuple[int, int]] = (), **more: Any
) -> TagsMessage:
    """A message of (tick, input) tags. more: other fields of its header."""
    header = replace(HEADER, sequence=sequence, count=len(tags), begin=begin, end=end)
    ticks = np.array([tick for tick, _ in tags], np.int64)
    inputs = np.array([number for _, number in tags], np.uint16)
    return TagsMessage(replace(header, **more), ticks, inputs)


GOOD = message(7, -5, 100, [(3, 1), (1, 65535)], lost=2, zero_utc="2026-12-01T12:00:00Z")
PIECES = (b"{", b"}", b"[", b'"', b"-", b"9" * 30, b"NaN", b"\xff", b"1e9", b":", b"\\ud800", b"")


def mutated(good: list[bytes], chance: random.Random) -> list[Frame]:
    """Frames with one to three places changed: bytes, whole pieces, lengths, frames."""
    frames: list[Frame] = list(good)
    for _ in range(chance.randrange(1, 4)):
        number = chance.choice((0, 0, 0, 1, 2))
        frame = bytearray(good[number])
        start = chance.randrange(len(frame))
        kind = chance.randrange(4)
        if kind == 0:
            frame[start] = chance.randrange(256)
        elif kind == 1:
            frame[start : start + chance.randrange(4)] = chance.choice(PIECES)
        elif kind == 2:
            del frame[start : start + chance.randrange(1, 9)]
        elif chance.random() < 0.1:
            frames.append(b"")
        else:
            frame[start] ^= 1 << chance.randrange(8)
        frames[number] = bytes(frame)
    return frames
