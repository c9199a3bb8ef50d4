"""What a right analysis of a simulated recording finds, in closed form.

Approximate in few points. Dead time changes rates, as stated, but is taken not to change g2
between two detectors: that holds while it is short beside the time between two counts; the
deviation is of the order of rate x dead time x the g2 deficit, and is nil for coherent light.
Afterpulses are in the rates, to first order; on g2 between two detectors they act no more than
other counts that come late. Crosstalk is in the rates and in g2 of the window that holds its lag,
to first order. The tick of the clock is taken as short beside jitter, lifetime and window.
"""

from __future__ import annotations

from collections.abc import Iterator
from functools import partial
from math import exp
from typing import Any

from tagstream.simulation.jitter import FWHM_PER_SIGMA
from tagstream.simulation.light import Arm
from tagstream.simulation.scenario import Scenario
from tagstream.units import PS_PER_S


def truth(scenario: Scenario, duration_ps: int | None = None) -> dict[str, Any]:
    """Plain numbers and texts by name, fit for JSON, of a run of that length (or the scenario's).

    source: its kind. g2_zero: of the light at the splitter. signal_fraction: of the light at
    the splitter. brightness_hz: mean photons (pairs) per second there. rate_input_<n>_hz: tags
    per second of each detector and of the clock. g2_zero_measured: between the two detectors, in
    a window of g2_zero_window_ps (0: a narrow bin); absent when there is one detector.
    period_ps, lifetime_ps: of pulsed light. Of each detector what it has of
    incoming_rate_input_<n>_hz (each photon that it would count without dead time),
    dead_time, dark_count_rate, timing_jitter (full width at half maximum),
    afterpulse_probability, delay. splitting_ratio: photons counted in the first over those in
    the second of the two detectors. What a source adds is described where it is made (`known`);
    it is that of the mean light of the run.
    """
    duration_ps = scenario.duration_ps if duration_ps is None else duration_ps
    source = scenario.source
    known: dict[str, Any] = {"source": scenario.kind}
    if source.light_g2_zero is not None:
        known["g2_zero"] = source.light_g2_zero
    known["signal_fraction"] = source.signal_fraction
    known["brightness_hz"] = source.photon_rate_hz
    if source.pulse_period is not None:
        known["period_ps"] = float(source.pulse_period)
    if source.decay_ps > 0:
        known["lifetime_ps"] = source.decay_ps
    known |= dict(_rates(scenario, duration_ps)) | dict(_of_detectors(scenario, duration_ps))
    if scenario.pair(scenario.arms) is not None:
        known |= _of_two_detectors(scenario, duration_ps)
    mean = scenario.drift.mean(lambda factor: factor, duration_ps)
    arms = [arm.dimmed(mean) for arm in scenario.arms]
    return known | source.known(arms, scenario.g2_window_ps)


def g2_measured(
    scenario: Scenario,
    window_ps: float | None = None,
    side_peaks: tuple[int, int] = (1, 8),
    duration_ps: int | None = None,
) -> float:
    """g2(0) between the two detectors as it should be measured, dark counts and jitter included.

    window_ps: full width of the centred window; absent: the scenario's. For continuous light g2
    is averaged over it, and 0 means a narrow bin. For pulsed light its counts are compared with
    the mean of equal windows around the side peaks, numbered from first to last on each side.
    Where the light drifts, instants weigh as their accidental pairs: what an analysis slice by
    slice finds. Raises ValueError when there are not two detectors, or for a window that this
    light cannot have.
    """
    if scenario.pair(scenario.arms) is None:
        raise ValueError("a scenario with two detectors, one at each port")
    window = scenario.g2_window_ps if window_ps is None else window_ps

    def of(factor: float) -> float:
        a, b = _pair(scenario, factor)
        light = scenario.source.g2_measured(a, b, window, side_peaks)
        return light + _crosstalk(scenario, a, b, window) + _crosstalk(scenario, b, a, window)

    def weight(factor: float) -> float:
        a, b = _pair(scenario, factor)
        return _incoming_hz(scenario, a) * _incoming_hz(scenario, b) + 1e-300

    duration = scenario.duration_ps if duration_ps is None else duration_ps
    return scenario.drift.mean(of, duration, weight)


def _pair(scenario: Scenario, factor: float) -> tuple[Arm, Arm]:
    found = scenario.pair([arm.dimmed(factor) for arm in scenario.arms])
    assert found is not None
    return found


def _incoming_hz(scenario: Scenario, arm: Arm) -> float:
    """Counts per second if the detector had no dead time."""
    return scenario.source.photon_rate_hz * arm.share + arm.dark_rate_hz


def _crosstalk(scenario: Scenario, of: Arm, at: Arm, window_ps: float) -> float:
    """What counts of one arm add to g2 by those they make at the other: p / (rate x time).

    time: the window, or of pulsed light the period, whose pairs are then in one peak. Delays are
    taken as corrected by the analysis.
    """
    lag_ps = of.crosstalk_ps - (at.delay_ps - of.delay_ps)
    rate_hz = _incoming_hz(scenario, at)
    if of.crosstalk_probability == 0 or rate_hz == 0 or 2 * abs(lag_ps) >= window_ps:
        return 0.0
    period = scenario.source.pulse_period
    time_s = (window_ps if period is None else float(period)) / PS_PER_S
    return of.crosstalk_probability / (rate_hz * time_s)


def _registered_hz(scenario: Scenario, number: int, factor: float) -> float:
    """Tags per second of one detector, with those that tags trigger.

    r / (1 + M) of light and dark counts becomes r / (1 + M - p A), p the probability of an
    afterpulse, A that the detector is not dead when it comes, by the mean of the renewal function
    over its exponential wait: 1 / [1 + r ta (1 - exp(-td / ta))]. First order in p. Crosstalk adds
    its share of the other rates to r.
    """
    arms = [arm.dimmed(factor) for arm in scenario.arms]
    arm = arms[number]
    alone = [scenario.source.registered_rate_hz(arm) for arm in arms]
    light_hz = _incoming_hz(scenario, arm)
    made = [rate * cause.crosstalk_probability for rate, cause in zip(alone, arms, strict=True)]
    crosstalk_hz = sum(made) - made[number]
    if light_hz + crosstalk_hz == 0:
        return 0.0
    expected = (light_hz / alone[number] - 1) if alone[number] else 0.0
    incoming_hz = light_hz + crosstalk_hz
    expected *= incoming_hz / light_hz if light_hz else 0.0
    return incoming_hz / (1 + expected - _afterpulses(arm, incoming_hz))


def _afterpulses(arm: Arm, incoming_hz: float) -> float:
    """Afterpulses registered per count: p A."""
    if arm.afterpulse_probability == 0:
        return 0.0
    others = incoming_hz * arm.afterpulse_ps / PS_PER_S
    others *= 1 - exp(-arm.dead_time_ps / arm.afterpulse_ps)
    return arm.afterpulse_probability / (1 + others)


def _rates(scenario: Scenario, duration_ps: int) -> Iterator[tuple[str, float]]:
    for number, detector in enumerate(scenario.detectors):
        of = partial(_registered_hz, scenario, number)
        yield f"rate_input_{detector.input}_hz", scenario.drift.mean(of, duration_ps)
    if scenario.clock is not None:
        yield f"rate_input_{scenario.clock.input}_hz", scenario.clock_rate_hz


def _of_detectors(scenario: Scenario, duration_ps: int) -> Iterator[tuple[str, float]]:
    mean = scenario.drift.mean(lambda factor: factor, duration_ps)
    for detector, arm in zip(scenario.detectors, scenario.arms, strict=True):
        each = {
            "incoming_rate_input_{}_hz": _incoming_hz(scenario, arm.dimmed(mean)),
            "dead_time_input_{}_ps": arm.dead_time_ps,
            "dark_count_rate_input_{}_hz": arm.dark_rate_hz,
            "timing_jitter_input_{}_ps": arm.jitter_sigma_ps * FWHM_PER_SIGMA,
            "afterpulse_probability_input_{}": arm.afterpulse_probability,
            "delay_input_{}_ps": arm.delay_ps,
        }
        yield from ((name.format(detector.input), value) for name, value in each.items() if value)


def _of_two_detectors(scenario: Scenario, duration_ps: int) -> dict[str, float]:
    known = {
        "g2_zero_measured": g2_measured(scenario, duration_ps=duration_ps),
        "g2_zero_window_ps": scenario.g2_window_ps,
    }
    a, b = _pair(scenario, 1.0)
    if b.share > 0:
        known["splitting_ratio"] = a.share / b.share
    return known
