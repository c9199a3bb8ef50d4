"""Slow, obvious twins of the kernels: what the fast ones must equal, integer by integer."""

from __future__ import annotations


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


def histogram(
    starts: list[int], stops: list[int], bin_ps: int, bins_each_side: int
) -> list[int]:
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


def selected(times: list[int], channels: list[int], channel: int) -> list[int]:
    """The times of one channel."""
    return [t for t, c in zip(times, channels, strict=True) if c == channel]


def channel_counts(channels: list[int], how_many: int) -> list[int]:
    """Tags of each channel."""
    return [channels.count(channel) for channel in range(how_many)]


def periods(times: list[int]) -> tuple[int, int, int]:
    """(sum of intervals, their number, how many exceed 1.5 times the one before)."""
    intervals = [b - a for a, b in zip(times, times[1:], strict=False)]
    pairs = zip(intervals, intervals[1:], strict=False)
    return sum(intervals), len(intervals), sum(2 * b > 3 * a for a, b in pairs)


def pair_time(lag_ps: int, stretch: tuple[int, int], piece: tuple[int, int]) -> int:
    """Instants t of `piece` whose t - |lag| is still in `stretch`, counted one by one."""
    return sum(t - abs(lag_ps) >= stretch[0] for t in range(*piece))
