"""Slow, obvious twins of the kernels: what the fast ones must equal, integer by integer."""

from __future__ import annotations

import csv
import io
import itertools
from typing import Any


def judged(
    tags: list[tuple[int, int]],
    max_disorder_ps: int,
    max_jump_ps: int,
    limit_ps: int,
) -> tuple[list[tuple[int, int]], dict[str, int]]:
    """Good tags (time, input) of an unvouched stream that never goes back by a whole session.

    Tag by tag, as the rule is told: late, or ahead and not yet believed, or good.
    """
    kept: list[tuple[int, int]] = []
    dropped = {"late": 0, "jump": 0, "overflow": 0}
    latest: int | None = None
    held: list[tuple[int, int]] = []
    held_back = False
    for tag in tags:
        t = tag[0]
        if abs(t) > limit_ps:
            dropped["overflow"] += 1
            continue
        latest = t if latest is None else latest
        far = t - latest > max_jump_ps or latest - t > max_jump_ps
        if held:
            newest = max(time for time, _ in held)
            if far and newest - max_disorder_ps <= t <= newest + max_jump_ps:
                held.append(tag)
                if len(held) == 17:
                    kept += held
                    latest = max(time for time, _ in held)
                    held = []
                continue
            dropped["late" if held_back else "jump"] += len(held)
            held = []
        if far:
            held, held_back = [tag], t < latest
            continue
        latest = max(latest, t)
        if latest - t > max_disorder_ps:
            dropped["late"] += 1
        else:
            kept.append(tag)
    dropped["late" if held_back else "jump"] += len(held)
    return kept, dropped


def largest_disorder(times_ps: list[int], latest_ps: int) -> int:
    """How far a time lies before the latest so far, at most."""
    largest = 0
    for t in times_ps:
        latest_ps = max(latest_ps, t)
        largest = max(largest, latest_ps - t)
    return largest


def delayed(
    tags: list[tuple[int, int]], channel_of: dict[int, int], delays_ps: list[int], shift_ps: int
) -> list[tuple[int, int]]:
    """(time, channel) with the delay of the channel, of the inputs that have one."""
    return [
        (t + shift_ps + delays_ps[channel_of[number]], channel_of[number])
        for t, number in tags
        if number in channel_of
    ]


def ordered(tags: list[tuple[int, int]]) -> list[tuple[int, int]]:
    """By time; equal times keep their order (Python's sort is stable)."""
    return sorted(tags, key=lambda tag: tag[0])


def without_dead_time(
    tags: list[tuple[int, int]], dead_times_ps: list[int]
) -> list[tuple[int, int]]:
    """Drop each tag closer than the dead time to the last kept one of its channel."""
    last: dict[int, int] = {}
    kept = []
    for t, channel in tags:
        if channel not in last or t - last[channel] >= dead_times_ps[channel]:
            last[channel] = t
            kept.append((t, channel))
    return kept


def histogram(starts: list[int], stops: list[int], bin_ps: int, bins_each_side: int) -> list[int]:
    """Every pair, one by one: bin k holds floor((2 lag + bin) / (2 bin)) = k."""
    counts = [0] * (2 * bins_each_side + 1)
    for start in starts:
        for stop in stops:
            k = (2 * (stop - start) + bin_ps) // (2 * bin_ps)
            if abs(k) <= bins_each_side:
                counts[k + bins_each_side] += 1
    return counts


def histogram_of_one(times: list[int], bin_ps: int, bins_each_side: int) -> list[int]:
    """Ordered pairs of distinct tags of one channel."""
    counts = histogram(times, times, bin_ps, bins_each_side)
    counts[bins_each_side] -= len(times)
    return counts


def value_at(marks: list[tuple[int, Any]], time_ps: int) -> Any:
    """The value in force: that of the last mark, by time and then by arrival, at or before."""
    value: Any = "unmarked"
    for at_ps, marked in sorted(marks, key=lambda mark: mark[0]):
        value = marked if at_ps <= time_ps else value
    return value


def split_histograms(
    starts: list[int],
    stops: list[int],
    marks: list[tuple[int, Any]],
    bins: tuple[int, int],
) -> dict[Any, list[int]]:
    """For each value, the pairs whose later tag comes while it is in force. bins: width, K."""
    width, each_side = bins
    found: dict[Any, list[int]] = {}
    for start in starts:
        for stop in stops:
            counts = found.setdefault(value_at(marks, max(start, stop)), [0] * (2 * each_side + 1))
            k = (2 * (stop - start) + width) // (2 * width)
            if abs(k) <= each_side:
                counts[k + each_side] += 1
    return found


def selected(times: list[int], channels: list[int], channel: int) -> list[int]:
    """The times of one channel."""
    return [t for t, c in zip(times, channels, strict=True) if c == channel]


def channel_counts(channels: list[int], how_many: int) -> list[int]:
    """Tags of each channel."""
    return [channels.count(channel) for channel in range(how_many)]


def periods(times: list[int]) -> tuple[int, int, int]:
    """(sum of intervals, their number, how many exceed 1.5 times the one before)."""
    intervals = [b - a for a, b in itertools.pairwise(times)]
    pairs = itertools.pairwise(intervals)
    return sum(intervals), len(intervals), sum(2 * b > 3 * a for a, b in pairs)


def pair_time(lag_ps: int, stretch: tuple[int, int], piece: tuple[int, int]) -> int:
    """Instants t of `piece` whose t - |lag| is still in `stretch`, counted one by one."""
    return sum(t - abs(lag_ps) >= stretch[0] for t in range(*piece))


def groups(times: list[int], beyond_ps: int) -> list[tuple[int, list[int]]]:
    """(smallest time, offsets after it) of groups of consecutive times, each below 2**32 wide."""
    found: list[list[int]] = []
    for time in times:
        t = min(max(time, -beyond_ps), beyond_ps)
        if found and max(*found[-1], t) - min(*found[-1], t) < 2**32:
            found[-1].append(t)
        else:
            found.append([t])
    return [(min(group), [t - min(group) for t in group]) for group in found]


def times_of_groups(found: list[tuple[int, list[int]]], limit_ps: int) -> list[int]:
    """Zero plus offset; past the limit, or with an offset past it, one more than the limit."""
    times = [
        offset if abs(offset) > limit_ps else zero + offset
        for zero, offsets in found
        for offset in offsets
    ]
    return [min(max(t, -limit_ps - 1), limit_ps + 1) for t in times]


def bits(record: int, field: tuple[int, int]) -> int:
    """The value of a bit field (first bit, number of bits)."""
    return record >> field[0] & ((1 << field[1]) - 1)


def decoded(data: bytes, layout: Any) -> tuple[list[tuple[int, int, bool]], bool]:
    """((ticks, input, whether a gap came just before) of each tag, whether a gap came last)."""
    tags: list[tuple[int, int, bool]] = []
    epoch, gap, most = 0, False, 2**63 - 1
    last: int | None = None
    span = 2 ** layout.time_bits[1]
    for at in range(0, len(data) - layout.record_bytes + 1, layout.record_bytes):
        record = int.from_bytes(data[at : at + layout.record_bytes], layout.byte_order)
        matching = [
            marker
            for marker in layout.markers
            if all(bits(record, (first, n)) == value for first, n, value in marker.conditions)
        ]
        if not matching:
            time = bits(record, layout.time_bits)
            if layout.wrap == "implicit" and last is not None and abs(time - last) > span // 2:
                epoch = max(min(epoch + (span if time < last else -span), most), -most)
            last = time
            tick = fine_tick(min(epoch + time, most), record, layout)
            tags.append((tick, bits(record, layout.channel_bits), gap))
            gap = False
        elif matching[0].means == "rollover":
            count = 1 if matching[0].count is None else bits(record, matching[0].count)
            epoch = min(epoch + count * (matching[0].step or span), most)
        elif matching[0].means == "gap":
            gap = True
    return tags, gap


def fine_tick(count: int, record: int, layout: Any) -> int:
    """A count of the time field in native ticks, with the fine time of its record."""
    most = 2**63 - 1
    if layout.fine is None or count == most:
        return count
    sign = 1 if layout.fine.sign == "+" else -1
    time_ps = count * layout.tick_ps + sign * bits(record, layout.fine.bits) * layout.fine.tick_ps
    ticks = time_ps / layout.native_tick_ps
    assert ticks.denominator == 1
    return max(min(int(ticks), most), -most)


def csv_rows(text: str, time_column: str, channel_column: str) -> list[tuple[int, int]]:
    """Two columns of a CSV text, by the reader of the standard library."""
    rows = csv.DictReader(io.StringIO(text, newline=""))
    return [(int(row[time_column]), int(row[channel_column])) for row in rows]
