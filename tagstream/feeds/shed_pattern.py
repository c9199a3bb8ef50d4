"""Which slices are left out when more comes than can be processed, and who decides it.

Leaving out whatever comes while a queue is full would lose bright moments more often than dark
ones, and with them the truth about a source that blinks. So a slice is left out by its number
alone: a hash of it, known long before its tags. How many are left out follows the mean load, and
changes only every ten seconds or more: answered sooner, bright moments would be left out again.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Mapping
from dataclasses import dataclass

from tagstream.units import PS_PER_S

DECIDE_S = 10.0  # wall time between decisions, at least
FIRST_S = 2.0  # until the first one: a run that starts with too much soon leaves out evenly
TOO_MUCH = 0.9  # wall seconds of work per stream second; more cannot be kept up with
AIMED_AT = 0.85  # of wall time in which the busiest stage is to work when slices are left out
ENOUGH = 0.8  # below this, nothing needs to be left out any more
WORTH_A_CHANGE = 0.1  # of the kept fraction
REMEMBERED = 8  # decisions; a tag that is in order to within max_disorder needs two

_WORD = (1 << 64) - 1


def splitmix64(number: int) -> int:
    """A well mixed 64-bit hash of an integer: one step of the splitmix64 generator.

    Steele, Lea, Flood, Fast splittable pseudorandom number generators, OOPSLA 2014.
    """
    z = (number + 0x9E3779B97F4A7C15) & _WORD
    z = ((z ^ (z >> 30)) * 0xBF58476D1CE4E5B9) & _WORD
    z = ((z ^ (z >> 27)) * 0x94D049BB133111EB) & _WORD
    return z ^ (z >> 31)


@dataclass(frozen=True, slots=True)
class _Decision:
    first_slice: int  # the first for which it holds
    number: int
    keep: float


class ShedPattern:
    """Whether a slice is kept: splitmix64(splitmix64(decision) xor slice) < keep * 2**64.

    Drawn one by one: a pattern that spaced them evenly would meet the rhythm of light that comes
    and goes in step with it.
    """

    def __init__(self) -> None:
        self._decisions = deque([_Decision(-(1 << 63), 0, 1.0)], maxlen=REMEMBERED)

    @property
    def keep(self) -> float:
        """The fraction of slices that the newest decision keeps."""
        return self._decisions[-1].keep

    @property
    def keeps_all(self) -> bool:
        """Whether no decision that still holds leaves anything out."""
        return all(decision.keep >= 1 for decision in self._decisions)

    def decide(self, keep: float, first_slice: int) -> None:
        """Keep this fraction from `first_slice` on, of which nothing may have been seen yet."""
        self._decisions.append(_Decision(first_slice, self._decisions[-1].number + 1, keep))

    def forget_before(self, index: int) -> None:
        """Slices before this one will not come any more."""
        while len(self._decisions) > 1 and self._decision(index) is not self._decisions[0]:
            self._decisions.popleft()

    def keeps(self, index: int) -> bool:
        """Whether the slice is kept."""
        decision = self._decision(index)
        if decision.keep >= 1:
            return True
        draw = splitmix64(splitmix64(decision.number) ^ (index & _WORD))
        return draw < int(decision.keep * 2**64)

    def _decision(self, index: int) -> _Decision:
        for decision in reversed(self._decisions):
            if decision.first_slice <= index:
                return decision
        return self._decisions[0]


@dataclass(slots=True)
class StreamTime:
    """Stream time that came, by what became of it, in ps."""

    kept_ps: int = 0
    shed_ps: int = 0


def fitting(keep: float, cost: float, speed: float) -> float:
    """The fraction of slices to keep from now on.

    keep: the fraction so far. cost: wall seconds that the busiest stage works for a stream
    second that is kept. speed: stream seconds that come per second of wall time. A sender that
    plays faster than its own clock and can wait is made to wait; one that is slow leaves time.
    """
    demand = cost * speed
    if keep >= 1:
        return AIMED_AT / cost if min(cost, demand) > TOO_MUCH else 1.0
    if min(cost, demand) < ENOUGH:
        return 1.0
    wanted = min(AIMED_AT / cost, 1.0)
    return keep if abs(wanted - keep) < WORTH_A_CHANGE * keep else wanted


class LoadMean:
    """Cost and speed since the last decision.

    busy: seconds of work by stage so far, of the stages that work on what is kept.
    """

    def __init__(self, now_s: float, busy: Mapping[str, float]) -> None:
        self._since_s, self._busy = now_s, dict(busy)
        self._kept_ps = self._offered_ps = 0
        self._lasts_s = FIRST_S

    def due(self, now_s: float) -> bool:
        """Whether it is time for a decision."""
        return now_s - self._since_s >= self._lasts_s

    def kept_since(self, time: StreamTime) -> int:
        """Stream time kept since, in ps."""
        return time.kept_ps - self._kept_ps

    def take(
        self, now_s: float, busy: Mapping[str, float], time: StreamTime
    ) -> tuple[float, float]:
        """(cost, speed) since the last call; see `fitting`."""
        work = max(busy[stage] - self._busy.get(stage, 0.0) for stage in busy)
        offered = time.kept_ps + time.shed_ps
        cost = work / (self.kept_since(time) / PS_PER_S)
        speed = (offered - self._offered_ps) / PS_PER_S / (now_s - self._since_s)
        self._since_s, self._busy, self._lasts_s = now_s, dict(busy), DECIDE_S
        self._kept_ps, self._offered_ps = time.kept_ps, offered
        return cost, speed
