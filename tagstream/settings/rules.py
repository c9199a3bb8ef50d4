"""What must hold between keys of different sections, and what deserves a warning."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction
from typing import Any

from tagstream.marks import key_problem
from tagstream.settings.addresses import address_problems
from tagstream.settings.doors import near
from tagstream.settings.health import health_names
from tagstream.settings.measures import CountRate, CrossCorrelation, G2Zero, G2ZeroPulsed
from tagstream.settings.sections import Rolling, Settings
from tagstream.settings.validation import nearest
from tagstream.units import format_bytes, format_time

RESERVED = (
    *("run", "settings", "estimates", "channels", "health", "truth", "marks", "mark_table"),
    *("title", "start_time", "end_time", "program_name", "definition"),
)
SUMS_BYTES = 3 * 8  # of one bin: counts, pair time, expected pairs
NAME_RULE = "a name has up to 31 small letters, digits and _, and starts with a letter"


def span_text(span_ps: int) -> str:
    """How a span is called: "10 s"."""
    return format_time(span_ps)


def span_suffix(span: str) -> str:
    """A span as part of a group name: "10 s" -> "10s"."""
    return span.replace(" ", "")


def problems(parts: dict[str, Any]) -> Iterator[str]:
    """Sentences for what does not fit together among the sections that are right in themselves."""
    rolling = parts["rolling"] or Rolling()
    spans = [span_text(span) for span in rolling.spans_ps]
    yield from _name_problems(parts, spans)
    yield from _channel_problems(parts["channels"])
    yield from address_problems(parts)
    names: dict[str, list[str]] = parts["names"]
    tallies = {tally.name: tally for tally in parts["tallies"]}
    for tally in parts["tallies"]:
        for key in ("start", "stop"):
            yield from _unknown(
                f"[[tally]] {tally.name} {key}", getattr(tally, key), names["channels"]
            )
        yield from _split_problems(tally)
    for estimate in parts["estimates"]:
        where = f"[[estimate]] {estimate.name}"
        if isinstance(estimate, CountRate):
            yield from _unknown(f"{where} channel", estimate.channel, names["channels"])
            yield from _rate_problems(estimate, where, parts["channels"])
            continue
        yield from _unknown(f"{where} tally", estimate.tally, names["tally"])
        if isinstance(estimate, G2ZeroPulsed) and estimate.clock is not None:
            yield from _unknown(f"{where} clock", estimate.clock, names["channels"])
        if estimate.tally in tallies:
            yield from _g2_problems(estimate, where, tallies[estimate.tally])
    for number, alert in enumerate(parts["alerts"], 1):
        if alert.estimate is not None:
            yield from _unknown(f"[[alert]] {number} estimate", alert.estimate, names["estimate"])
            yield from _unknown(f"[[alert]] {number} span", alert.span, ["run", *spans])
        else:
            known = health_names(names["channels"])
            yield from _unknown(f"[[alert]] {number} health", alert.health, known)
    need = memory_bytes(parts["tallies"], rolling)
    if need > rolling.memory:
        yield (
            f"[rolling] memory: the tallies and spans need about {format_bytes(need)}, allowed are"
            f" {format_bytes(rolling.memory)}; fewer bins, spans or values (split_limit),"
            " or a larger memory"
        )


def memory_bytes(tallies: list[CrossCorrelation], rolling: Rolling) -> int:
    """What sums and parts of spans take: parts in 32 bits, sums in 64 (decided by the counts)."""
    parts = sum(rolling.parts(span)[0] for span in rolling.spans_ps)
    of_spans = SUMS_BYTES * (2 + len(rolling.spans_ps)) + 4 * parts
    return sum(
        (2 * tally.bins_each_side + 1) * (of_spans + SUMS_BYTES * _split_places(tally))
        for tally in tallies
    )


def _split_places(tally: CrossCorrelation) -> int:
    """Sums that a split takes: a value each, "unmarked" and "other"; two more in a slice."""
    return 0 if tally.split_by is None else tally.split_limit + 4


def _split_problems(tally: CrossCorrelation) -> Iterator[str]:
    where = f"[[tally]] {tally.name}"
    if tally.split_by is not None and (problem := key_problem(tally.split_by)):
        yield f"{where} split_by: {problem}"
    default = CrossCorrelation.model_fields["split_limit"].default
    if tally.split_by is None and tally.split_limit != default:
        yield f"{where} split_limit: not used without split_by; right would be both, or neither"


def _name_problems(parts: dict[str, Any], spans: list[str]) -> Iterator[str]:
    for key in ("tally", "estimate"):
        names = [section.name for section in parts["tallies" if key == "tally" else "estimates"]]
        for name in dict.fromkeys(names):
            if names.count(name) > 1:
                yield f"[[{key}]] name: {name} is given {names.count(name)} times; once is right"
            if name in RESERVED:
                yield f"[[{key}]] name: {name} is reserved; another name is right"
    tallies = [tally.name for tally in parts["tallies"]]
    for name in tallies:
        for span in spans:
            if f"{name}_{span_suffix(span)}" in tallies:
                yield (
                    f"[[tally]] name: {name}_{span_suffix(span)} is what span {span} of {name} is"
                    " called in the results; another name is right"
                )
    for name in parts["channels"]:
        if name in RESERVED:
            yield f"[channels.{name}]: {name} is reserved; another name is right"


def _channel_problems(channels: dict[str, Any]) -> Iterator[str]:
    if len(channels) > 255:
        yield f"[channels]: found {len(channels)}; at most 255 are right"
    seen: dict[int, str] = {}
    for name, channel in channels.items():
        if channel.input in seen:
            yield (
                f"[channels.{name}] input: {channel.input} is also that of {seen[channel.input]};"
                " one channel per input is right"
            )
        seen.setdefault(channel.input, name)


def _unknown(where: str, name: str, known: list[str]) -> Iterator[str]:
    if name not in known:
        yield f'{where}: there is no "{name}"; {nearest(name, known)}'


def _rate_problems(estimate: CountRate, where: str, channels: dict[str, Any]) -> Iterator[str]:
    if estimate.dead_time_model == "none":
        if estimate.dead_time_ps is not None:
            yield (
                f'{where} dead_time: not used with dead_time_model = "none"; right would be'
                ' dead_time_model = "non-paralyzable", or no dead_time'
            )
    elif estimate.channel in channels and not resolved_dead_time(estimate, channels):
        yield (
            f"{where} dead_time_model: a dead time is missing; give dead_time here or in"
            f" [channels.{estimate.channel}]"
        )


def resolved_dead_time(estimate: CountRate, channels: dict[str, Any]) -> int:
    """The dead time of an estimate in ps: its own, else that of its channel."""
    own = estimate.dead_time_ps
    return int(channels[estimate.channel].dead_time_ps if own is None else own)


def _g2_problems(
    estimate: G2Zero | G2ZeroPulsed, where: str, tally: CrossCorrelation
) -> Iterator[str]:
    reach = 2 * tally.max_lag_ps + tally.bin_ps
    window = estimate.window_ps
    if window is not None and not tally.bin_ps <= window <= reach:
        yield (
            f"{where} window: found {format_time(window)}; right would be from one bin of"
            f" {tally.name} ({format_time(tally.bin_ps)}) to its whole width ({format_time(reach)})"
        )
    if isinstance(estimate, G2ZeroPulsed) and estimate.period_ps is not None:
        _first, last = estimate.peak_range
        need = last * estimate.period_ps + Fraction(estimate.window_ps, 2)
        if need > Fraction(reach, 2):
            fitting = int(
                (Fraction(reach, 2) - Fraction(estimate.window_ps, 2)) / estimate.period_ps
            )
            yield (
                f"{where} side_peaks: peak {last} ends at {format_time(need)}, beyond max_lag ="
                f" {format_time(tally.max_lag_ps)} of {tally.name}; right would be at most"
                f" {fitting}, or a longer max_lag"
            )


def warnings(settings: Settings) -> list[str]:
    """Sentences about settings that work but may surprise."""
    found = []
    for key in ("path", "scenario"):
        path = getattr(settings.feed, key, None)
        if path is not None and not path.exists():
            found.append(f"[feed] {key}: {path} does not exist")
    tick = getattr(settings.feed, "native_tick_ps", getattr(settings.feed, "tick_ps", None))
    for tally in settings.tallies:
        if tick is not None and (text := bin_warning(tally, tick)):
            found.append(text)
        dead = settings.channels[tally.start].dead_time_ps
        if tally.start == tally.stop and dead:
            found.append(
                f"[[tally]] {tally.name}: of one channel with itself, so lags below its dead_time"
                f" ({format_time(dead)}) are empty"
            )
    listen = getattr(settings.feed, "listen", None)
    if listen is not None and not near(listen):
        found.append(
            f"[feed] listen: {listen} can be reached by others, and raw TCP asks nobody who they"
            " are: whoever reaches it can send tags; right would be a network of your own"
        )
    follows = getattr(settings.feed, "follow", False)
    if getattr(settings.feed, "begin_ps", 0) is None and not follows:
        found.append(
            "[feed] begin, end: not given, so live time is assumed to run from the first tag to"
            " the last"
        )
    return found


def bin_warning(tally: CrossCorrelation, tick: Fraction) -> str | None:
    """Why the bin of a tally does not suit the native tick (in ps), or None if it does.

    Only an odd multiple of the tick has all its edges midway between ticks.
    """
    ratio = tally.bin_ps / tick
    if ratio.denominator == 1 and ratio % 2 == 1:
        return None
    below = (int(ratio) - 1) // 2 * 2 + 1
    good = [n * tick for n in (below, below + 2) if n > 0 and (n * tick).denominator == 1]
    right = " or ".join(format_time(ps) for ps in good) or "a bin much longer than the tick"
    return (
        f"[[tally]] {tally.name} bin: {format_time(tally.bin_ps)} is no odd multiple of the native"
        f" tick ({format_time(tick)}), so bin edges fall on ticks; nearest that are: {right}"
    )
