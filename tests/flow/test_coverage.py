"""Intervals hold what they promise: seeded runs from tags to g2(0), against the known truth.

In n runs the 68.27 % interval should hold the truth about 0.6827 n times; three binomial standard
deviations are allowed. Mid-P intervals may hold it more often where few counts make the steps
between possible intervals coarse: below about ten counts only the lower bound is asked for.
"""

from __future__ import annotations

import tomllib
from math import sqrt
from typing import Any, ClassVar

import pytest

from tagstream.feeds import Arrivals, TimeBase
from tagstream.settings import Settings
from tagstream.simulation.pieces import simulate_pieces
from tagstream.simulation.scenario import Scenario, build_scenario
from tagstream.simulation.truth import g2_measured
from tests.fakes_settings import make_settings
from tests.fakes_sink import run_in_memory

RUNS = 300
LEVEL = 0.6827
S = 10**12


class Scene:
    """A simulated feed of a scenario that is built once."""

    truth: ClassVar[dict[str, Any]] = {}
    progress = None

    def __init__(self, scenario: Scenario, seed: int, duration_ps: int) -> None:
        self._pieces = simulate_pieces(scenario, seed, duration_ps)
        self.time_base = TimeBase(scenario.tick_ps)

    def pieces(self) -> Any:
        for piece in self._pieces:
            yield Arrivals(piece.times_ps, piece.inputs, piece.begin_ps, piece.end_ps)


def scenario(source: str) -> Scenario:
    detectors = "".join(
        f'[[detector]]\ninput = {n}\nport = "{port}"\nefficiency = 0.5\njitter_fwhm = "300 ps"\n'
        'dead_time = "20 ns"\ndark_rate = "200 Hz"\n'
        for n, port in ((1, "transmitted"), (2, "reflected"))
    )
    splitter = "[splitter]\ntransmittance = 0.55\nreflectance = 0.4"
    text = f'duration = "1 s"\n{source}\n{splitter}\n{detectors}'
    return build_scenario(tomllib.loads(text), "coverage.toml")


CONTINUOUS = '[source]\nkind = "emitter"\nrate = "{rate}"\nt0 = "8 ns"\nbackground = "{background}"'
PULSED = (
    '[source]\nkind = "pulsed-emitter"\nperiod = "25 ns"\nphotons_per_pulse = {mean}\n'
    'g2_zero = 0.08\nlifetime = "1 ns"'
)


def settings(estimate: dict[str, Any], max_lag: str, bin_: str) -> Settings:
    tally = {"name": "hbt", "kind": "cross-correlation", "start": "arm_a", "stop": "arm_b"}
    return make_settings(
        tally=[tally | {"max_lag": max_lag, "bin": bin_}],
        estimate=[{"name": "g2_zero", "tally": "hbt"} | estimate],
        rolling={"slice": "10 ms", "spans": []},
    )


def covered(scene: Scenario, truth: float, chosen: Settings, duration_ps: int) -> tuple[int, float]:
    """(runs whose interval holds the truth, mean of the counts that the number rests on)."""
    hits, counts = 0, 0
    for seed in range(RUNS):
        sink = run_in_memory(chosen, Scene(scene, seed, duration_ps))
        (found,) = sink.snapshots[-1].estimates["g2_zero"]
        assert found.interval != "none", found.reason
        hits += found.lower <= truth <= found.upper
        counts += found.counts
    return hits, counts / RUNS


@pytest.mark.parametrize(
    ("rate", "background", "duration_ps", "few"),
    [("20 MHz", "4 MHz", S // 50, False), ("1.2 MHz", "100 kHz", S // 50, True)],
    ids=["many counts", "almost no counts"],
)
def test_continuous(rate: str, background: str, duration_ps: int, few: bool) -> None:
    scene = scenario(CONTINUOUS.format(rate=rate, background=background))
    truth = g2_measured(scene, window_ps=5_000)
    chosen = settings({"kind": "g2-zero", "window": "5 ns"}, "50 ns", "1 ns")
    check(*covered(scene, truth, chosen, duration_ps), few)


@pytest.mark.parametrize(
    ("mean", "duration_ps", "few"),
    [(0.1, S // 20, False), (0.01, S // 10, True)],
    ids=["many counts", "almost no counts"],
)
def test_pulsed(mean: float, duration_ps: int, few: bool) -> None:
    scene = scenario(PULSED.format(mean=mean))
    truth = g2_measured(scene, window_ps=20_000, side_peaks=(3, 12))
    estimate = {"kind": "g2-zero-pulsed", "period": "25 ns", "window": "20 ns"}
    chosen = settings(estimate | {"side_peaks": [3, 12]}, "320 ns", "1 ns")
    check(*covered(scene, truth, chosen, duration_ps), few)


def check(hits: int, mean_counts: float, few: bool) -> None:
    allowed = 3 * sqrt(LEVEL * (1 - LEVEL) * RUNS)
    assert (mean_counts < 10) == few, mean_counts
    assert hits >= LEVEL * RUNS - allowed, hits
    if not few:
        assert hits <= LEVEL * RUNS + allowed, hits
