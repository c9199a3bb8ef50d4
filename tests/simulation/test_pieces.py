from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tagstream.simulation.pieces import STEP_TAGS, simulate_pieces, step_ps
from tests.simulation.scenes import PULSED, arms, scenario, tags

S = 10**12
ARM = 'efficiency = 0.6\njitter_fwhm = "2 ns"\ndead_time = "60 ns"\ndark_rate = "2 kHz"'
CLOCK = "[clock]\ninput = 0\ndivider = 100\n"
SLOW = PULSED.replace("0.1\ng", "0.0001\ng").replace("12.5 ns", "125 us")
SCENES = {
    "coherent": scenario('kind = "coherent"\nrate = "900 kHz"', ARM),
    "emitter": scenario('kind = "emitter"\nrate = "900 kHz"\nt0 = "30 ns"', ARM),
    "pulsed": scenario(PULSED, ARM, CLOCK),
    "fast": scenario(PULSED, ARM, "[clock]\ninput = 300\n", 'tick = "1/8192 s"'),
}
EFFECTS = (
    ARM
    + """
afterpulse_probability = 0.05
afterpulse_time = "300 ns"
crosstalk_probability = 0.02
crosstalk_delay = "3 ns"
delay = "40 us"
delay_drift_per_hour = "-1 us"
"""
)
DRIFT = '[drift]\nfading_per_hour = 0.9\nswing = 0.5\nperiod = "1 s"\n'
PULSES = 'period = "40 ns"\nphotons_per_pulse = 0.002\ng2_zero = 0.1\n'
BLINKS = 'on_time = "1 us"\noff_time = "1 us"\n'
MORE = {
    "thermal": 'rate = "50 kHz"\ncoherence_time = "1 us"',
    "blinking-emitter": 'rate = "100 kHz"\nt0 = "30 ns"\n' + BLINKS,
    "shelving-emitter": """
rate = "50 kHz"
excitation_time = "9 ns"
lifetime = "5 ns"
shelving = 0.1
shelf_time = "10 us"
""",
    "pulsed-blinking-emitter": PULSES + BLINKS,
    "pairs": 'rate = "50 kHz"\ncorrelation_fwhm = "1 us"',
    "pulsed-pairs": 'period = "1 us"\npairs_per_pulse = 0.05',
    "unbalanced-interferometer": PULSES + 'overlap = 0.9\nseparation = "3 ns"',
    "two-photon-interference": PULSES + 'overlap = 0.9\nalternate = "100 ms"',
    "dip-scan": """
rate = "50 kHz"
shape = "sinc"
overlap = 0.9
centre = 0.0
width = 1.0
from = -1.0
to = 1.0
points = 5
dwell = "70 ms"
""",
}
LASTING = {
    kind: scenario(f'kind = "{kind}"\n{keys}', EFFECTS, DRIFT) for kind, keys in MORE.items()
}
FEW = scenario(SLOW, 'efficiency = 0.9\ndark_rate = "500 Hz"\njitter_fwhm = "1 ms"')


@pytest.mark.parametrize("name", SCENES)
def test_pieces_are_contiguous_ordered_and_hold_only_their_own_tags(name: str) -> None:
    scene = SCENES[name]
    duration = 2 * step_ps(scene) + 12_345
    pieces = list(simulate_pieces(scene, 7, duration))
    assert [piece.begin_ps for piece in pieces] == [0, step_ps(scene), 2 * step_ps(scene)]
    assert pieces[-1].end_ps == duration
    assert all(a.end_ps == b.begin_ps for a, b in pairwise(pieces))
    for piece in pieces:
        assert piece.times_ps.dtype == np.int64
        assert piece.inputs.dtype == (np.uint16 if name == "fast" else np.uint8)
        assert piece.times_ps.size == piece.inputs.size
        assert np.all(np.diff(piece.times_ps) >= 0)
        assert np.all((piece.times_ps >= piece.begin_ps) & (piece.times_ps < piece.end_ps))


@pytest.mark.parametrize("name", SCENES)
def test_pieces_are_of_bounded_size(name: str) -> None:
    """Every step has about STEP_TAGS counts before dead time, whatever the rate."""
    scene = SCENES[name]
    sizes = [piece.times_ps.size for piece in simulate_pieces(scene, 1, 3 * step_ps(scene))]
    assert 0.85 * STEP_TAGS < min(sizes) <= max(sizes) < 1.01 * STEP_TAGS


@given(st.integers(1, 3 * S), st.integers(0, 3))
@settings(max_examples=25)
def test_a_longer_run_begins_with_the_shorter_one(cut: int, seed: int) -> None:
    whole_times, whole_inputs = tags(FEW, seed, 3 * S)
    times, inputs = tags(FEW, seed, cut)
    inside = whole_times < cut
    assert times.tolist() == whole_times[inside].tolist()
    assert inputs.tolist() == whole_inputs[inside].tolist()


@pytest.mark.parametrize("name", LASTING)
def test_runs_of_every_kind_of_light_are_determined(name: str) -> None:
    """A longer run begins with the shorter one, with all that detectors and drift do; in order."""
    scene = LASTING[name]
    whole_times, whole_inputs = tags(scene, 3, S // 2)
    times, inputs = tags(scene, 3, S // 5)
    inside = whole_times < S // 5
    assert times.size > 1000
    assert np.array_equal(times, whole_times[inside])
    assert np.array_equal(inputs, whole_inputs[inside])
    assert np.all(np.diff(whole_times) >= 0)
    assert not np.array_equal(tags(scene, 4, S // 5)[0], times)
    for number in (1, 2):
        assert np.diff(times[inputs == number]).min() >= 60_000


@pytest.mark.parametrize("name", SCENES)
def test_a_seed_gives_the_same_tags_and_another_seed_others(name: str) -> None:
    scene = SCENES[name]
    length = step_ps(scene) // 2
    first, again, other = (tags(scene, seed, length) for seed in (1, 1, 2))
    assert np.array_equal(first[0], again[0])
    assert np.array_equal(first[1], again[1])
    assert not np.array_equal(first[0], other[0])


@pytest.mark.parametrize("name", ["coherent", "emitter", "pulsed"])
def test_dead_time_is_kept_across_pieces(name: str) -> None:
    scene = SCENES[name]
    for times in arms(scene, 3, 3 * step_ps(scene)):
        assert times.size > 100_000
        assert np.diff(times).min() >= 60_000


def test_times_are_on_the_tick_and_dead_time_is_that_of_the_detector() -> None:
    """Two counts of one detector may share a tick that is longer than the dead time."""
    times = arms(SCENES["fast"], 1, 2 * step_ps(SCENES["fast"]))[0]
    ticks = times * 2 // 244_140_625  # 1/8192 s = 244140625/2 ps: every other one is whole
    assert np.all((times * 2 - ticks * 244_140_625) <= 1)
    assert np.unique(times).size < times.size / 10


def test_the_light_is_stationary_from_the_start() -> None:
    """With a lifetime of 1 us the first microsecond is as bright as any other."""
    source = (
        PULSED.replace("0.1\ng", "0.5\ng").replace("12.5 ns", "2 ns").replace('"1 ns"', '"1 us"')
    )
    scene = scenario(source)
    counts = [tags(scene, seed, 10**6)[0].size for seed in range(8)]
    assert sum(counts) == pytest.approx(8 * 250, abs=4 * 45)


def test_the_clock_is_exact() -> None:
    scene = SCENES["pulsed"]
    times, inputs = tags(scene, 1, 3 * step_ps(scene))
    clock = times[inputs == 0]
    assert clock.tolist() == list(range(0, 3 * step_ps(scene), 1_250_000))


def test_light_that_jitter_moves_over_the_start_is_not_lost() -> None:
    """Half of the tags within one sigma of zero come from photons on the other side."""
    scene = scenario(
        'kind = "coherent"\nrate = "100 MHz"', 'efficiency = 1.0\njitter_fwhm = "2 us"'
    )
    counts = [tags(scene, seed, 10**6)[0].size for seed in range(12)]
    assert sum(counts) == pytest.approx(1200, abs=4 * 35)


def test_a_dark_scenario_has_empty_pieces_that_still_cover_the_time() -> None:
    scene = scenario('kind = "coherent"\nrate = "0 Hz"')
    pieces = list(simulate_pieces(scene, 1, 2 * S + 5))
    assert [(p.begin_ps, p.end_ps) for p in pieces] == [(0, S), (S, 2 * S), (2 * S, 2 * S + 5)]
    assert sum(p.times_ps.size for p in pieces) == 0
