"""Tags of a scenario, piece by piece, in time order and in bounded memory.

Light is drawn on a fixed grid of steps that depends on the scenario alone, a little ahead of
the piece it is for: a tag may be earlier than its photon (jitter) or in a later piece
(lifetime). The light is on before the run begins, long enough to be stationary at its start.
"""

from __future__ import annotations

from collections.abc import Iterator
from math import ceil
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from tagstream.recording.layout import Mark
from tagstream.simulation.detectors import Detectors, floor_to_tick
from tagstream.simulation.light import Arm
from tagstream.simulation.pulses import clock_times_ps
from tagstream.simulation.scenario import Scenario
from tagstream.simulation.triggered import Triggered
from tagstream.units import PS_PER_S

STEP_TAGS = 1 << 18  # tags expected in a step
_SETTLED = 40  # time constants after which the past is forgotten in double precision


class Piece(NamedTuple):
    """All tags of the interval [begin_ps, end_ps), in time order.

    times_ps: int64, n. inputs: uint8, n, or uint16 when an input of the scenario exceeds 255.
    marks: what was set in it, such as a stage position.
    """

    times_ps: NDArray[np.int64]
    inputs: NDArray[np.uint8] | NDArray[np.uint16]
    begin_ps: int
    end_ps: int
    marks: tuple[Mark, ...] = ()


def simulate_pieces(
    scenario: Scenario, seed: int, duration_ps: int | None = None
) -> Iterator[Piece]:
    """The tags of a run, in contiguous pieces from 0 to `duration_ps` (absent: the scenario's).

    The same scenario and seed give the same tags; a longer run begins with the shorter one.
    """
    duration_ps = scenario.duration_ps if duration_ps is None else duration_ps
    length_ps = step_ps(scenario)
    inputs = _input_numbers(scenario)
    run = _Run(scenario, seed)
    first = -_settling_steps(scenario, length_ps, run.reach_ps)
    for step in range(first, -(-duration_ps // length_ps)):
        begin_ps = step * length_ps
        times_ps, codes = run.advance(begin_ps, length_ps)
        if begin_ps >= 0:
            end_ps = min(begin_ps + length_ps, duration_ps)
            inside = int(np.searchsorted(times_ps, np.int64(end_ps), side="left"))
            marks = scenario.source.marks(begin_ps, end_ps)
            yield Piece(times_ps[:inside], inputs[codes[:inside]], begin_ps, end_ps, marks)


def step_ps(scenario: Scenario) -> int:
    """Length of a step: STEP_TAGS are expected in it before dead time, but at most 1 s.

    It is a whole number of ticks, so that no time moves to the piece before when it is rounded
    down to the tick.
    """
    arms = scenario.arms
    rate_hz = sum(scenario.source.photon_rate_hz * arm.share + arm.dark_rate_hz for arm in arms)
    rate_hz += scenario.clock_rate_hz
    length_ps = int(PS_PER_S * min(1.0, STEP_TAGS / rate_hz)) if rate_hz > 0 else PS_PER_S
    whole_ticks_ps = scenario.tick_ps.numerator
    return max(1, length_ps // whole_ticks_ps) * whole_ticks_ps


def _settling_steps(scenario: Scenario, length_ps: int, reach_ps: int) -> int:
    arms = scenario.arms
    longest = scenario.source.memory_ps
    longest += max(arm.dead_time_ps + arm.afterpulse_ps + arm.crosstalk_ps for arm in arms)
    farthest = reach_ps + max(arm.delay_ps for arm in arms)
    return 1 + ceil((_SETTLED * longest + farthest) / length_ps)


def _input_numbers(scenario: Scenario) -> NDArray[np.uint8] | NDArray[np.uint16]:
    """Input number of each arm, then of the clock."""
    numbers = [detector.input for detector in scenario.detectors]
    if scenario.clock is not None:
        numbers.append(scenario.clock.input)
    return np.array(numbers, np.uint8) if max(numbers) < 256 else np.array(numbers, np.uint16)


class _Run:
    """What goes on from step to step: light, detectors, and tags that belong to later pieces."""

    def __init__(self, scenario: Scenario, seed: int) -> None:
        arms, brightest = scenario.arms, scenario.drift.most
        self._scenario = scenario
        self._light = scenario.source.light([arm.dimmed(brightest) for arm in arms])
        self._clock_code = np.uint8(len(arms))
        # The clock is wired like an arm that sees no light and is never dead.
        self._detectors = Detectors((*arms, Arm("clock", 0.0)))
        self._rng = np.random.Generator(np.random.PCG64(np.random.SeedSequence(seed)))
        self._later = _Later()
        self._triggered = Triggered(arms, self._detectors)
        self.reach_ps = self._detectors.reach_ps

    def advance(self, begin_ps: int, length_ps: int) -> tuple[NDArray[np.int64], NDArray[np.uint8]]:
        """Times and codes of all tags of the piece [begin_ps, begin_ps + length_ps)."""
        drawn_from = begin_ps + self.reach_ps
        photons = self._light.draw(drawn_from, length_ps, self._rng)
        photons = self._scenario.drift.thinned(photons, drawn_from, self._rng)
        times_ps, codes = self._detectors.respond(photons, drawn_from, length_ps, self._rng)
        clock_ps = self._clock_tags(drawn_from, drawn_from + length_ps)
        times_ps, codes = self._later.in_order(
            np.concatenate((times_ps, clock_ps)),
            np.concatenate((codes, np.full(clock_ps.size, self._clock_code))),
            begin_ps + length_ps,
        )
        times_ps, codes = self._registered(times_ps, codes, begin_ps + length_ps)
        return floor_to_tick(times_ps, self._scenario.tick_ps), codes

    def _registered(
        self, times_ps: NDArray[np.int64], codes: NDArray[np.uint8], end_ps: int
    ) -> tuple[NDArray[np.int64], NDArray[np.uint8]]:
        if self._triggered:
            return self._triggered.registered(times_ps, codes, end_ps, self._rng)
        survives = self._detectors.dead_time(times_ps, codes)
        return times_ps[survives], codes[survives]

    def _clock_tags(self, begin_ps: int, end_ps: int) -> NDArray[np.int64]:
        clock, period = self._scenario.clock, self._scenario.source.pulse_period
        if clock is None or period is None:
            return np.empty(0, np.int64)
        return clock_times_ps(period, clock.divider, begin_ps, end_ps)


class _Later:
    """Tags past the end of a piece wait here. Time and code are sorted as one integer."""

    def __init__(self) -> None:
        self._keys = np.empty(0, np.int64)
        self._origin_ps = 0

    def in_order(
        self, times_ps: NDArray[np.int64], codes: NDArray[np.uint8], end_ps: int
    ) -> tuple[NDArray[np.int64], NDArray[np.uint8]]:
        """All tags before `end_ps`, in order of time and then code; the others wait.

        Keys count from the last end, so that eight bits are left for the code.
        """
        keys = ((times_ps - np.int64(self._origin_ps)) << 8) | codes
        keys = np.sort(np.concatenate((self._keys, keys)))
        ready = int(np.searchsorted(keys, np.int64(end_ps - self._origin_ps) << 8, side="left"))
        done = keys[:ready]
        ordered = (done >> 8) + np.int64(self._origin_ps), (done & 0xFF).astype(np.uint8)
        self._keys = keys[ready:] - (np.int64(end_ps - self._origin_ps) << 8)
        self._origin_ps = end_ps
        return ordered
