"""How `check` shows what a feed let it hear."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import asdict
from math import isfinite
from typing import Any

from tagstream.feeds.listening import Heard, HeardInput, right_disorder_ps
from tagstream.settings import Settings
from tagstream.units import PS_PER_S, format_time

MOST_LINES = 32  # more inputs than this are a wrong layout, not a laboratory
MANY_WAITING = 1_000  # tags that wait to be put in order at a time


def as_json(heard: Heard, settings: Settings) -> dict[str, Any]:
    """All of it as plain values; rates without stream time are null."""
    names = _names(settings)
    plain = asdict(heard)
    for row in plain["inputs"]:
        row["channel"] = names.get(row["input"])
        row["rate_hz"] = row["rate_hz"] if isfinite(row["rate_hz"]) else None
    plain["silent_channels"] = list(_silent(heard, settings))
    plain["suggested_max_disorder"] = format_time(right_disorder_ps(heard.largest_disorder_ps))
    return plain


def lines(heard: Heard, settings: Settings) -> Iterator[str]:
    """The same for people, with lines for the settings at the end."""
    yield f"listened {heard.listened_s:.3g} s to the feed ({settings.feed.kind})"
    yield from _coverage(heard)
    yield from _of_inputs(heard, _names(settings))
    for name, number in _silent(heard, settings).items():
        yield f"channel {name} (input {number}): nothing arrived"
    yield from _numbered("dropped by the feed, ", heard.dropped)
    yield from _numbered("", heard.link)
    yield from _suggested(heard, settings)


def _names(settings: Settings) -> dict[int, str]:
    return {channel.input: name for name, channel in settings.channels.items()}


def _silent(heard: Heard, settings: Settings) -> dict[str, int]:
    """Channels that did not appear, and their inputs."""
    seen = {found.input for found in heard.inputs}
    named = {name: channel.input for name, channel in settings.channels.items()}
    return {name: number for name, number in named.items() if number not in seen}


def _coverage(heard: Heard) -> Iterator[str]:
    source = "vouched for by the source" if heard.vouched else "assumed from the tags"
    yield (
        f"stream time: {heard.stream_s:.6g} s, {source}; {heard.gaps} gaps,"
        f" {heard.lossy} intervals in which tags were lost"
    )
    if heard.far:
        yield f"{heard.far} tags lie further than max_jump from the others: garbage, or a restart"


def _of_inputs(heard: Heard, names: Mapping[int, str]) -> Iterator[str]:
    if not heard.inputs:
        yield "no tags arrived"
        return
    yield f"{'input':>5}  {'channel':<16}{'tags':>12}{'per second':>14}  largest disorder"
    for found in _busiest(heard):
        yield (
            f"{found.input:>5}  {names.get(found.input, '(not listed)'):<16}{found.tags:>12}"
            f"{found.rate_hz:>14.6g}  {format_time(found.largest_disorder_ps)}"
        )
    if (more := len(heard.inputs) - MOST_LINES) > 0:
        yield f"and {more} more inputs; so many tell of another layout of the records"


def _busiest(heard: Heard) -> list[HeardInput]:
    """At most as many as can be read, by number."""
    chosen = sorted(heard.inputs, key=lambda found: -found.tags)[:MOST_LINES]
    return sorted(chosen, key=lambda found: found.input)


def _numbered(prefix: str, counts: Mapping[str, int | float | str]) -> Iterator[str]:
    yield from (f"{prefix}{name.replace('_', ' ')}: {value}" for name, value in counts.items())


def _suggested(heard: Heard, settings: Settings) -> Iterator[str]:
    if not heard.inputs:
        return
    names = _names(settings)
    yield ""
    yield "# for the settings, as heard; names are yours to choose"
    for found in _busiest(heard):
        yield f"[channels.{names.get(found.input, f'input_{found.input}')}]"
        yield f"input = {found.input}"
    yield "[conditioning]"
    right = right_disorder_ps(heard.largest_disorder_ps)
    yield f'max_disorder = "{format_time(right)}"  # at least twice the largest disorder'
    yield from _waiting(heard, settings, right)


def _waiting(heard: Heard, settings: Settings, right_ps: int) -> Iterator[str]:
    delays = [channel.delay_ps for channel in settings.channels.values()]
    reach_ps = settings.conditioning.max_disorder_ps + max(delays) - min(delays)
    waiting = heard.rate_hz * reach_ps / PS_PER_S
    if waiting > MANY_WAITING and right_ps < settings.conditioning.max_disorder_ps:
        yield (
            f"# now {format_time(settings.conditioning.max_disorder_ps)}, in which about"
            f" {waiting:.2g} tags wait to be put in order; less is faster"
        )
