"""What a right analysis of a simulated recording finds, in closed form.

Approximate in one point: dead time changes rates, as stated, but is taken not to change g2
between two detectors. That holds while dead time is short beside the time between two counts;
the deviation is of the order of rate x dead time x the g2 deficit, and is nil for coherent light.
The tick of the clock is taken as short beside jitter, lifetime and window.
"""

from __future__ import annotations

from typing import Any

from tagstream.simulation.scenario import Scenario


def truth(scenario: Scenario) -> dict[str, Any]:
    """Plain numbers and texts by name, fit for JSON.

    source: its kind. g2_zero: of the light at the splitter. signal_fraction: of the light at
    the splitter. rate_input_<n>_hz: tags per second of each detector and of the clock.
    g2_zero_measured: between the two detectors, in a window of g2_zero_window_ps (0: a narrow
    bin); absent when there is one detector. period_ps: of pulsed light.
    """
    source = scenario.source
    known: dict[str, Any] = {
        "source": scenario.kind,
        "g2_zero": source.light_g2_zero,
        "signal_fraction": source.signal_fraction,
    }
    if source.pulse_period is not None:
        known["period_ps"] = float(source.pulse_period)
    for detector, arm in zip(scenario.detectors, scenario.arms, strict=True):
        known[f"rate_input_{detector.input}_hz"] = source.registered_rate_hz(arm)
    if scenario.clock is not None:
        known[f"rate_input_{scenario.clock.input}_hz"] = scenario.clock_rate_hz
    if len(scenario.arms) == 2:
        known["g2_zero_measured"] = g2_measured(scenario)
        known["g2_zero_window_ps"] = scenario.g2_window_ps
    return known


def g2_measured(
    scenario: Scenario, window_ps: float | None = None, side_peaks: tuple[int, int] = (1, 8)
) -> float:
    """g2(0) between the two detectors as it should be measured, dark counts and jitter included.

    window_ps: full width of the centred window; absent: the scenario's. For continuous light g2
    is averaged over it, and 0 means a narrow bin. For pulsed light its counts are compared with
    the mean of equal windows around the side peaks, numbered from first to last on each side.
    Raises ValueError when there are not two detectors, or for a window that pulsed light
    cannot have.
    """
    if len(scenario.arms) != 2:
        raise ValueError("a scenario with two detectors, one at each port")
    a, b = scenario.arms
    window_ps = scenario.g2_window_ps if window_ps is None else window_ps
    return scenario.source.g2_measured(a, b, window_ps, side_peaks)
