"""Tags to measure with: Poisson light on several channels, a laser clock, disorder."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from tagstream.recording.writer import RecordingWriter

PIECE = 1 << 20
SECOND = 10**12
CLOCK_PS = 12_500  # 80 MHz

Tags = tuple[NDArray[np.int64], NDArray[np.uint8]]


def poisson(rates_hz: list[float], tags: int, seed: int = 1) -> Tags:
    """`tags` tags in order, channel i at rates_hz[i]."""
    rng = np.random.default_rng(seed)
    total = sum(rates_hz)
    times = np.cumsum(rng.exponential(SECOND / total, tags)).astype(np.int64)
    shares = np.array(rates_hz) / total
    return times, rng.choice(len(rates_hz), tags, p=shares).astype(np.uint8)


def laser(begin_ps: int, end_ps: int, rng: np.random.Generator) -> Tags:
    """An 80 MHz clock on channel 0 and 10 M tags/s on each of channels 1 and 2."""
    clock = np.arange(-(-begin_ps // CLOCK_PS) * CLOCK_PS, end_ps, CLOCK_PS, dtype=np.int64)
    arms = rng.integers(begin_ps, end_ps, int(2e7 * (end_ps - begin_ps) / SECOND))
    times = np.concatenate((clock, arms))
    channels = np.zeros(times.size, np.uint8)
    channels[clock.size :] = rng.integers(1, 3, arms.size)
    order = np.argsort(times, kind="stable")
    return times[order], channels[order]


def disordered(tags: Tags, by_ps: int, rng: np.random.Generator) -> Tags:
    """The same tags arriving up to `by_ps` late."""
    order = np.argsort(tags[0] + rng.integers(0, by_ps, tags[0].size), kind="stable")
    return tags[0][order], tags[1][order]


def record(path: Path, pieces: Iterator[tuple[Tags, int, int]]) -> int:
    """Write a recording of vouched pieces (tags, begin, end); return the number of tags."""
    with RecordingWriter(path, tick=Fraction(1)) as writer:
        for (times, channels), begin_ps, end_ps in pieces:
            writer.add(times, channels, begin_ps, end_ps)
        return writer.count


def pair_pieces(tags: int, disorder_ps: int = 0) -> Iterator[tuple[Tags, int, int]]:
    """Two channels (1 and 2) of one million tags a second each, in bounded memory."""
    rng = np.random.default_rng(2)
    last = 0
    for first in range(0, tags, PIECE):
        times, channels = poisson(
            [0.0, 1e6, 1e6], min(PIECE, tags - first), int(rng.integers(1 << 30))
        )
        found = times + last, channels
        end = int(found[0][-1]) + 1
        yield (disordered(found, disorder_ps, rng) if disorder_ps else found), last, end
        last = end


def laser_pieces(duration_ps: int, disorder_ps: int = 0) -> Iterator[tuple[Tags, int, int]]:
    """The laser and its two arms, in pieces of 10 ms."""
    rng = np.random.default_rng(3)
    step = SECOND // 100
    for begin in range(0, duration_ps, step):
        end = min(begin + step, duration_ps)
        found = laser(begin, end, rng)
        yield (disordered(found, disorder_ps, rng) if disorder_ps else found), begin, end


def steady_pieces(
    rate_hz: int, seconds: int, piece_ms: int = 50
) -> Iterator[tuple[Tags, int, int]]:
    """Two channels (1 and 2) of half the rate each, in pieces of equal length."""
    rng = np.random.default_rng(4)
    length_ps = piece_ms * 10**9
    for begin in range(0, seconds * SECOND, length_ps):
        count = rng.poisson(rate_hz * piece_ms / 1000)
        times = np.sort(rng.integers(begin, begin + length_ps, count))
        yield (times, rng.integers(1, 3, count).astype(np.uint8)), begin, begin + length_ps
