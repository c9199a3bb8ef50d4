"""Counts that other counts cause: afterpulses of the same detector, crosstalk in another."""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from tagstream.simulation.detectors import Detectors
from tagstream.simulation.light import Arm


class _Tags(NamedTuple):
    """times_ps: int64, n. arms: uint8, n. causes: int64, n, position of the cause, -1: none."""

    times_ps: NDArray[np.int64]
    arms: NDArray[np.uint8]
    causes: NDArray[np.int64]


class Triggered:
    """Adds to the tags of a piece what they trigger, and says which of all are registered.

    Only a registered count triggers another. So for each tag it is drawn what it would trigger,
    and that again, until nothing more falls into the piece; then dead time decides in order of
    time, and with a tag goes all that it would have caused.
    """

    def __init__(self, arms: Sequence[Arm], detectors: Detectors) -> None:
        self._effects = [_Effect(i, j, arm) for i, arm in enumerate(arms) for j in range(len(arms))]
        self._effects = [effect for effect in self._effects if effect.probability > 0]
        self._detectors = detectors
        self._waiting = _none()

    def __bool__(self) -> bool:
        """Whether anything can be triggered at all."""
        return bool(self._effects)

    def registered(
        self,
        times_ps: NDArray[np.int64],
        arms: NDArray[np.uint8],
        end_ps: int,
        rng: np.random.Generator,
    ) -> tuple[NDArray[np.int64], NDArray[np.uint8]]:
        """Times and arms of the counts of a piece, in order, given those of light and dark counts.

        What they trigger after `end_ps` waits for the next piece.
        """
        inside, outside = self._with_triggered(_uncaused(times_ps, arms), end_ps, rng)
        order = np.argsort(inside.times_ps, kind="stable")
        place = np.empty(order.size, np.int64)
        place[order] = np.arange(order.size)
        causes = np.where(inside.causes >= 0, place[inside.causes], -1)[order]
        times, codes = inside.times_ps[order], inside.arms[order]
        survives = self._detectors.triggered_dead_time(times, codes, causes)
        later = outside.causes < 0
        later[~later] = survives[place[outside.causes[~later]]]
        self._waiting = _uncaused(outside.times_ps[later], outside.arms[later])
        return times[survives], codes[survives]

    def _with_triggered(
        self, tags: _Tags, end_ps: int, rng: np.random.Generator
    ) -> tuple[_Tags, _Tags]:
        """All tags before the end of the piece, and those after it."""
        new = _joined([tags, self._waiting])
        inside, outside = _none(), [_none()]
        while new.times_ps.size:
            outside.append(_chosen(new, new.times_ps >= end_ps))
            new = _chosen(new, new.times_ps < end_ps)
            at = inside.times_ps.size
            inside = _joined([inside, new])
            new = _joined([effect.of(new, at, rng) for effect in self._effects])
        return inside, _joined(outside)


class _Effect:
    """Tags of one arm that trigger tags of the same or another."""

    def __init__(self, cause: int, target: int, arm: Arm) -> None:
        self._cause, self._target = cause, target
        self._own = cause == target
        own, other = arm.afterpulse_probability, arm.crosstalk_probability
        self.probability = own if self._own else other
        self._fixed_ps = arm.dead_time_ps if self._own else arm.crosstalk_ps
        self._mean_ps = arm.afterpulse_ps

    def of(self, tags: _Tags, at: int, rng: np.random.Generator) -> _Tags:
        """What these tags, which stand from position `at` on, would trigger."""
        which = np.flatnonzero(
            (tags.arms == self._cause) & (rng.random(tags.arms.size) < self.probability)
        )
        times_ps = tags.times_ps[which] + np.int64(self._fixed_ps)
        if self._own:
            waits = self._mean_ps * rng.standard_exponential(which.size)
            times_ps += waits.astype(np.int64) + 1  # later than its cause also without dead time
        return _Tags(times_ps, np.full(which.size, self._target, np.uint8), which + at)


def _none() -> _Tags:
    return _uncaused(np.empty(0, np.int64), np.empty(0, np.uint8))


def _uncaused(times_ps: NDArray[np.int64], arms: NDArray[np.uint8]) -> _Tags:
    return _Tags(times_ps, arms, np.full(times_ps.size, -1, np.int64))


def _chosen(tags: _Tags, which: NDArray[np.bool_]) -> _Tags:
    return _Tags(tags.times_ps[which], tags.arms[which], tags.causes[which])


def _joined(parts: Sequence[_Tags]) -> _Tags:
    times, arms, causes = zip(*parts, strict=True)
    return _Tags(np.concatenate(times), np.concatenate(arms), np.concatenate(causes))
