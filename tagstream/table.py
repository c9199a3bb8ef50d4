"""The numbers of a run as text for people and as plain data for scripts."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import asdict, replace
from datetime import UTC, datetime
from math import floor, inf, isfinite, isnan, log10
from textwrap import wrap
from typing import Any

from tagstream.estimates import Estimate
from tagstream.marks import value_text
from tagstream.outputs.reader import Run

WIDTH = 100
COLUMN = 26


def format_run(run: Run) -> str:
    """A text of 100 columns: estimates by span, rates, what became of the tags, truth."""
    estimates = run.estimates
    lines = [*_head(run), ""]
    for name, spans in estimates.items():
        lines += [*_estimate_lines(name, dict(spans)), ""]
    lines += [*_split_lines(run), *_channel_lines(run), "", *_health_lines(run.health)]
    if truth := run.truth:
        width = max(map(len, truth))
        lines += ["", "known truth of the simulation"]
        lines += [f"  {name:<{width}}  {_short(value)}" for name, value in truth.items()]
    return "\n".join(lines)


def as_json(run: Run) -> dict[str, Any]:
    """The same as plain data: not-a-numbers and infinities become None."""
    return {
        "run": str(run.path),
        "live": run.is_live,
        "about": _plain(run.about),
        "estimates": {
            name: {span: _plain(asdict(found)) for span, found in spans.items()}
            for name, spans in run.estimates.items()
        },
        "channels": {
            name: {span: _plain(found) for span, found in spans.items()}
            for name, spans in run.channels.items()
        },
        "splits": {
            name: {"key": k, "values": _parts(run, name)} for name, k in run.split_keys.items()
        },
        "marks": {mark.key: mark.value for mark in run.marks},
        "health": _plain(run.health),
        "truth": _plain(run.truth),
    }


def health_as_json(run: Run) -> dict[str, Any]:
    """The health as plain data, with whether a process writes the run."""
    return {"run": str(run.path), "written_now": run.is_live, **_plain(run.health)}


def is_well(run: Run) -> bool:
    """Whether the run goes on, or ended by itself or when it was told to."""
    state = run.health["state"]
    return state in ("finished", "stopped") or (state == "running" and run.is_live)


def format_estimate(found: Estimate) -> str:
    """A value with its interval: "0.0412 +0.0006 -0.0006", "< 0.012", "-"."""
    if found.interval == "none" or isnan(found.value):
        return "-"
    unit = "" if found.unit == "1" else f" {found.unit}"
    if found.interval == "upper-limit":
        return f"< {_rounded(found.upper, found.upper)}{unit}"
    up, down = found.upper - found.value, found.value - found.lower
    sides = [side for side in (up, down) if isfinite(side) and side > 0]
    if not sides:
        return f"{found.value:.6g}{' +inf' if up == inf else ''}{unit}"
    step = max(min(sides), max(sides) / 10)  # a side that nearly vanishes asks for no digits
    value, plus, minus = (_rounded(part, step) for part in (found.value, up, down))
    return f"{value} +{plus} -{minus}{unit}"


def _head(run: Run) -> Iterator[str]:
    about, state = run.about, run.health["state"]
    yield f"{about.get('title') or run.path.name}: {state}"
    yield str(run.path)
    if "end_time" not in about:
        updated = datetime.fromisoformat(about["updated_utc"])
        age = (datetime.now(UTC) - updated).total_seconds()
        holder = "a process writes it" if run.is_live else "no process writes it any more"
        yield f"last written {_age(age)} ago; {holder}"


def _estimate_lines(name: str, spans: Mapping[str, Estimate]) -> Iterator[str]:
    yield name
    for span, found in spans.items():
        basis = found.reason or f"{found.counts} counts"
        yield f"  {span:<10} {format_estimate(found):<{COLUMN}} {basis}"
        if found.interval != "none" and isfinite(found.raw_value) and _raw(found) != found:
            yield f"  {'':<10} {format_estimate(_raw(found)):<{COLUMN}} before corrections"
        if found.note:
            yield from _wrapped(found.note, f"  {'':<10} ! ")
    if not spans:
        yield "  no slice has ended yet"
    for found in list(spans.values())[:1]:
        yield from _wrapped(f"{100 * found.level:.4g} % interval; {found.method}", "  ")


def _wrapped(text: str, start: str) -> list[str]:
    return wrap(text, WIDTH, initial_indent=start, subsequent_indent=" " * len(start))


def _raw(found: Estimate) -> Estimate:
    """The estimate before its corrections."""
    return replace(found, value=found.raw_value, lower=found.raw_lower, upper=found.raw_upper)


def _channel_lines(run: Run) -> Iterator[str]:
    channels = run.channels
    spans = list(next(iter(channels.values()), {}))
    heads = [f"{f'{span}, counts/s':>18}" for span in spans]
    width = max(14, *map(len, channels)) + 2
    yield f"{'channel':<{width}}{''.join(heads)}{'counts in the run':>20}"
    for name, found in channels.items():
        rates = [f"{_rate(found[span]['rate_hz']):>18}" for span in spans]
        total = f"{found['run']['counts']:>20}" if "run" in found else ""
        yield f"{name:<{width}}{''.join(rates)}{total}"


def _split_lines(run: Run) -> Iterator[str]:
    """Of each tally that is split: what its values hold."""
    for name, key in run.split_keys.items():
        yield f"{name}, apart for each value of {key}"
        for part in _parts(run, name):
            value, live_s = value_text(part["value"]), part["live_time_s"]
            yield f"  {value:<24} {part['pairs']:>14} pairs in {live_s:.6g} s of live time"
        yield ""


def _parts(run: Run, tally: str) -> list[dict[str, Any]]:
    return [
        {
            "value": value,
            "pairs": int(arrays["counts"].sum()),
            "live_time_s": float(arrays["live_time_s"]),
        }
        for value, arrays in run.split(tally).items()
    ]


def _rate(rate_hz: float) -> str:
    return f"{rate_hz:.7g}" if isfinite(rate_hz) else "-"


def _health_lines(health: Mapping[str, Any]) -> Iterator[str]:
    if "received" not in health:
        return
    lost = {k.removeprefix("dropped_"): v for k, v in health.items() if k.startswith("dropped_")}
    received, kept, dropped = health["received"], health["kept"], sum(lost.values())
    yield f"tags: received {received} = kept {kept} + dropped {dropped}"
    for reason, count in lost.items():
        if count:
            yield f"  dropped, {reason.replace('_', ' ')}: {count}"
    yield f"gaps: {health['gaps']}, {health['gap_time_s']:.6g} s together"


def _rounded(value: float, step: float) -> str:
    """`value` with two digits of `step`."""
    if not isfinite(value) or step <= 0 or not isfinite(step):
        return f"{value:g}"
    places = 1 - floor(log10(step))
    if places > 12:
        return f"{value:.3g}"
    return f"{value:.{places}f}" if places > 0 else f"{round(value, places):.0f}"


def _short(value: Any) -> str:
    return f"{value:.6g}" if isinstance(value, float) else str(value)


def _age(seconds: float) -> str:
    for length, unit in ((86_400, "d"), (3_600, "h"), (60, "min")):
        if seconds >= 2 * length:
            return f"{seconds / length:.0f} {unit}"
    return f"{max(seconds, 0):.0f} s"


def _plain(found: Mapping[str, Any]) -> dict[str, Any]:
    """Without arrays, and with None for what JSON cannot hold."""
    return {
        key: None if isinstance(value, float) and not isfinite(value) else value
        for key, value in found.items()
        if key != "profile"
    }
