"""Metrics as whoever collects them reads them."""

from __future__ import annotations

import sys
from collections.abc import Iterator
from concurrent.futures import Executor, ThreadPoolExecutor
from dataclasses import replace
from urllib.request import urlopen

import pytest
from prometheus_client.parser import text_string_to_metric_families

from tagstream import __version__
from tagstream.errors import ResultsError, SettingsError
from tagstream.outputs.metric_families import STATES
from tagstream.outputs.metrics import Metrics
from tagstream.pipeline import State
from tests.fakes_outputs import SLICE_PS, make_header, make_row, make_snapshot

Samples = dict[tuple[str, tuple[str, ...]], float]


@pytest.fixture(scope="module")
def aside() -> Iterator[Executor]:
    """Closes servers while tests go on: each takes half a second."""
    with ThreadPoolExecutor() as pool:
        yield pool


@pytest.fixture
def metrics(aside: Executor) -> Iterator[Metrics]:
    made = Metrics("127.0.0.1:0", make_header(), lambda: 1_800_000_000.0)
    yield made
    aside.submit(made.close, make_snapshot())


def text_of(metrics: Metrics) -> str:
    host, port = metrics.address
    with urlopen(f"http://{host}:{port}/metrics", timeout=10) as reply:
        return str(reply.read().decode())


def samples(metrics: Metrics) -> Samples:
    """(name, values of the labels) -> number."""
    return {
        (sample.name, tuple(sample.labels.values())): sample.value
        for family in text_string_to_metric_families(text_of(metrics))
        for sample in family.samples
    }


def test_before_anything_is_known(metrics: Metrics) -> None:
    found = samples(metrics)
    assert found["tagstream_state", ("starting",)] == 1
    assert found["tagstream_build_info", (__version__,)] == 1
    assert found["tagstream_last_update_timestamp_seconds", ()] == 1_800_000_000.0
    assert not any(name == "tagstream_rate_hertz" for name, _ in found)


def test_health_has_base_units_and_labels(metrics: Metrics) -> None:
    more: dict[str, int | float | str] = {
        "latency_s": 0.4,
        "silent_arm_a_s": 3.0,
        "feed_messages": 9,
        "last_error": "none",
    }
    shot = make_snapshot()
    metrics.replace_snapshot(replace(shot, health={**shot.health, **more}))
    found = samples(metrics)
    assert found["tagstream_tags_received_total", ()] == 20
    assert found["tagstream_tags_dropped_total", ("late",)] == 2
    assert found["tagstream_tags_dropped_total", ("dead_time",)] == 0
    assert found["tagstream_gap_seconds_total", ()] == 1.5
    assert found["tagstream_disorder_seconds", ()] == pytest.approx(3e-10)
    assert found["tagstream_lag_seconds", ()] == 0.25
    assert found["tagstream_latency_seconds", ()] == 0.4
    assert found["tagstream_silent_seconds", ("arm_a",)] == 3.0
    assert found["tagstream_health", ("feed_messages",)] == 9
    assert not any("last_error" in labels for _, labels in found)
    states = {labels[0]: n for (name, labels), n in found.items() if name == "tagstream_state"}
    assert states == {state: float(state == "running") for state in STATES}


def test_a_slice_gives_rates_and_estimates(metrics: Metrics) -> None:
    metrics.add_row(make_row(3))
    found = samples(metrics)
    live_s = (SLICE_PS - 3) / 1e12
    assert found["tagstream_rate_hertz", ("arm_b",)] == pytest.approx(31 / live_s, rel=1e-15)
    assert found["tagstream_estimate", ("g2_zero", "run")] == pytest.approx(1.1)
    assert found["tagstream_estimate_lower", ("g2_zero", "run")] == 1 / 11
    assert found["tagstream_estimate_upper", ("rate_a", "10 s")] == 1010.0
    assert ("tagstream_estimate", ("g2_zero", "10 s")) not in found  # there is no number
    assert found["tagstream_slice_end_seconds", ()] == 4.0


def test_rates_do_not_freeze_when_no_tags_come(metrics: Metrics) -> None:
    metrics.add_row(make_row(3))
    metrics.replace_snapshot(replace(make_snapshot(), health={"state": "starved"}))
    assert not any(name == "tagstream_rate_hertz" for name, _ in samples(metrics))


def test_no_live_time_is_no_rate(metrics: Metrics) -> None:
    metrics.add_row(replace(make_row(3), live_time_ps=0))
    assert not any(name == "tagstream_rate_hertz" for name, _ in samples(metrics))


def test_other_estimates_after_a_new_header(metrics: Metrics) -> None:
    metrics.renew(make_header(channels=("left", "right")))
    metrics.add_row(make_row(0))
    assert ("tagstream_rate_hertz", ("left",)) in samples(metrics)


def test_nothing_of_the_process_and_no_times_of_creation(metrics: Metrics) -> None:
    metrics.add_row(make_row(3))
    metrics.replace_snapshot(make_snapshot())
    lines = [line for line in text_of(metrics).splitlines() if not line.startswith("#")]
    assert all(line.startswith("tagstream_") for line in lines)
    assert not any("_created" in line for line in lines)


def test_states_are_those_of_a_run() -> None:
    assert set(STATES) == {str(state) for state in State}


def test_after_the_end_nobody_listens_and_the_address_is_free() -> None:
    first = Metrics("127.0.0.1:0", make_header())
    host, port = first.address
    with pytest.raises(ResultsError, match=f"{port} cannot be bound"):
        Metrics(f"{host}:{port}", make_header())
    first.close(make_snapshot())
    with pytest.raises(OSError, match="refused"):
        urlopen(f"http://{host}:{port}/metrics", timeout=10)
    Metrics(f"{host}:{port}", make_header()).close(make_snapshot())


def test_without_the_library_it_says_what_to_install(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "prometheus_client", None)
    with pytest.raises(SettingsError, match=r"pip install 'tagstream\[metrics\]'"):
        Metrics("127.0.0.1:0", make_header())
