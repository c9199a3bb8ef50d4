"""More light than can be processed: what is left out biases nothing, also when the source blinks.

Capacity is modelled: a clock that stands still is moved by what processing would take. Tags are
Poisson, from a source of constant brightness or one that is dark half of the time, with
exponential dark and bright times (a telegraph, symmetric, correlation time tc). For it, with
x = T / tc in slices of length T and u = w / tc in a window of width w:

    mean square of the mean brightness of a slice  m2 = 1 + f(x), f(x) = 2 (x - 1 + exp(-x)) / x^2
    g2 in the window, normalised slice by slice    (1 + (1 - exp(-u/2)) / (u/2)) / m2

(integrals of the autocovariance exp(-t / tc) of brightness over its mean).
"""

from __future__ import annotations

from collections.abc import Callable, Generator, Iterator
from dataclasses import dataclass, replace
from fractions import Fraction
from math import exp, sqrt
from typing import Any, ClassVar

import numpy as np
import pytest
from numpy.typing import NDArray

from tagstream.feeds import IDLE, Arrivals, TimeBase
from tagstream.feeds.shedding import Shedder, shed
from tagstream.settings import Settings
from tests.fakes_outputs import FakeClock
from tests.fakes_settings import make_settings
from tests.fakes_sink import MemorySink, run_in_memory

S = 10**12
SLICE_PS = S // 10
MESSAGE_PS = 7 * S // 100  # no divisor of a slice
WINDOW_PS = 2_000_000
RATE_HZ = 5_000.0  # of each arm, mean
SECONDS = 45
RUNS = 12
LEVEL = 0.6827
Sender = Callable[["Light", int], Iterator[Arrivals]]


@dataclass(frozen=True)
class Light:
    """switch_s: mean time in the bright and in the dark state; None: constant."""

    switch_s: float | None

    @property
    def correlation_s(self) -> float:
        return 0.0 if self.switch_s is None else self.switch_s / 2

    @property
    def slice_mean_square(self) -> float:
        """Of the mean brightness of a slice, over the mean squared."""
        if self.switch_s is None:
            return 1.0
        x = SLICE_PS / S / self.correlation_s
        return 1 + 2 * (x - 1 + exp(-x)) / x**2

    @property
    def g2_zero(self) -> float:
        if self.switch_s is None:
            return 1.0
        half = WINDOW_PS / S / self.correlation_s / 2
        return (1 + (1 - exp(-half)) / half) / self.slice_mean_square

    def tags(self, random: np.random.Generator) -> NDArray[np.int64]:
        """Times of one arm and the other, mixed, sorted; inputs are drawn apart."""
        if self.switch_s is None:
            count = random.poisson(2 * RATE_HZ * SECONDS)
            return np.sort(random.integers(0, SECONDS * S, count))
        lengths = random.exponential(self.switch_s, 2 * int(SECONDS / self.switch_s) + 100)
        ends = np.cumsum(lengths)
        first_bright = random.integers(2)
        bright = (np.arange(lengths.size) + first_bright) % 2 == 1
        counts = random.poisson(4 * RATE_HZ * lengths * bright)
        of = np.repeat(np.arange(lengths.size), counts)
        times = (ends[of] - random.random(of.size) * lengths[of]) * S
        return np.sort(times[times < SECONDS * S].astype(np.int64))


STEADY, FAST, SLOW = Light(None), Light(100e-6), Light(0.3)


def messages(light: Light, seed: int, message_ps: int = MESSAGE_PS) -> Iterator[Arrivals]:
    """What the sender has to say, in messages that vouch for their interval."""
    random = np.random.default_rng([seed, 4])
    times = light.tags(random)
    inputs = random.integers(1, 3, times.size).astype(np.uint8)
    borders = np.arange(0, SECONDS * S + message_ps, message_ps)
    at = np.searchsorted(times, borders)
    for begin, end, i, j in zip(borders, borders[1:], at, at[1:], strict=False):
        yield Arrivals(times[i:j], inputs[i:j], int(begin), int(end))


def records(light: Light, seed: int) -> Iterator[Arrivals]:
    """The same from a sender that vouches for nothing."""
    for message in messages(light, seed):
        if message.times_ps.size == 0:
            yield IDLE
        else:
            yield replace(message, begin_ps=None, end_ps=None)


class Processing:
    """The rest of the program: `cost` wall seconds for a mean stream second, in proportion to
    its tags. Speaks for the sender too, which plays in real time and can wait."""

    def __init__(self, cost: float) -> None:
        self.clock, self.busy_s = FakeClock(), 0.0
        self._per_tag = cost / (2 * RATE_HZ)
        self._began = self.clock.now

    def busy(self) -> dict[str, float]:
        return {"conditioning": self.busy_s / 2, "counting": self.busy_s}

    def sent(self, pieces: Iterator[Arrivals]) -> Generator[Arrivals]:
        for piece in pieces:
            if piece.times_ps.size:
                self.clock.now = max(self.clock.now, self._began + int(piece.times_ps[-1]) / S)
            yield piece

    def takes(self, piece: Arrivals) -> None:
        seconds = piece.times_ps.size * self._per_tag
        self.busy_s += seconds
        self.clock.now += seconds


class Overloaded:
    """A feed that offers `cost` times of what can be processed."""

    truth: ClassVar[dict[str, Any]] = {}
    progress = None
    time_base = TimeBase(Fraction(1))

    def __init__(self, offered: Iterator[Arrivals], cost: float) -> None:
        self.processing = Processing(cost)
        clock = self.processing.clock
        self.shedder = Shedder(SLICE_PS, SETTINGS.conditioning, self.processing.busy, clock)
        self._offered = offered

    def pieces(self) -> Generator[Arrivals]:
        for piece in shed(self.processing.sent(self._offered), self.shedder):
            self.processing.takes(piece)
            yield piece


def settings() -> Settings:
    tally = {"name": "hbt", "kind": "cross-correlation", "start": "arm_a", "stop": "arm_b"}
    g2 = {"name": "g2_zero", "kind": "g2-zero", "tally": "hbt", "window": "2 us"}
    rate = {"name": "rate", "kind": "count-rate", "channel": "arm_a"}
    return make_settings(
        tally=[tally | {"max_lag": "2 us", "bin": "2 us"}],
        estimate=[g2, rate],
        rolling={"slice": "100 ms", "spans": []},
    )


SETTINGS = settings()


def run(offered: Iterator[Arrivals], cost: float) -> tuple[MemorySink, Overloaded]:
    feed = Overloaded(offered, cost)
    return run_in_memory(SETTINGS, feed), feed


def rate_of(sink: MemorySink) -> float:
    """Of both arms together, over the mean that is true."""
    span = sink.snapshots[-1].spans[0]
    return float(span.counts.sum() / (span.live_time_ps / S) / (2 * RATE_HZ))


def agrees(found: list[float], truth: float, within: float) -> None:
    """The mean of the runs is the truth within 3.5 standard errors, which are small enough to
    see a bias of `within`."""
    error = float(np.std(found, ddof=1)) / sqrt(len(found))
    assert 7 * error < within, error
    assert abs(np.mean(found) - truth) < 3.5 * error, (np.mean(found), truth, error)


def of_whole_slices(sink: MemorySink) -> float:
    """Mean square of the brightness of a slice over the true mean squared, from its counts: for
    Poisson counts n, <n (n - 1)> is the square without what counting adds."""
    whole = [row.counts.sum() for row in sink.rows if row.live_time_ps == SLICE_PS]
    counts = np.array(whole, np.float64)
    return float(np.mean(counts * (counts - 1))) / (2 * RATE_HZ * SLICE_PS / S) ** 2


def covered(sink: MemorySink, name: str, truth: float) -> bool:
    (found,) = sink.snapshots[-1].estimates[name]
    return found.lower <= truth <= found.upper


def as_promised(hits: int) -> bool:
    """Whether so many intervals of all runs may hold the truth."""
    return abs(hits - LEVEL * RUNS) <= 3 * sqrt(LEVEL * (1 - LEVEL) * RUNS)


CASES = [
    pytest.param(STEADY, messages, 3.0, 0.02, id="steady, 3 times too much"),
    pytest.param(STEADY, records, 5.0, 0.02, id="steady, nothing vouched, 5 times"),
    pytest.param(FAST, messages, 5.0, 0.03, id="blinks within a slice, 5 times"),
    pytest.param(SLOW, messages, 3.0, 0.4, id="blinks over slices, 3 times"),
    pytest.param(SLOW, messages, 5.0, 0.4, id="blinks over slices, 5 times"),
    pytest.param(SLOW, records, 3.0, 0.4, id="blinks over slices, nothing vouched, 3 times"),
]


@pytest.mark.parametrize(("light", "sender", "cost", "within"), CASES)
def test_what_is_left_out_biases_nothing(
    light: Light, sender: Sender, cost: float, within: float
) -> None:
    rates, squares, g2_hits, rate_hits = [], [], 0, 0
    for seed in range(RUNS):
        sink, feed = run(sender(light, seed), cost)
        assert 0.3 < feed.shedder.numbers()["shed_fraction"] < 0.95
        rates.append(rate_of(sink))
        squares.append(of_whole_slices(sink))
        g2_hits += covered(sink, "g2_zero", light.g2_zero)
        rate_hits += covered(sink, "rate", RATE_HZ)
    agrees(rates, 1.0, within)
    agrees(squares, light.slice_mean_square, 2 * within)
    assert as_promised(g2_hits), g2_hits
    if light is STEADY:  # blinking adds to the noise of counting, of which alone intervals tell
        assert as_promised(rate_hits), rate_hits


def dropping_when_full(light: Light, cost: float, seed: int) -> float:
    """The rate over the true one, if messages were dropped while a queue of four is full."""
    per_tag, queue, free_at = cost / (2 * RATE_HZ), 4, 0.0
    waiting: list[float] = []  # when each accepted message will be done
    tags = kept_ps = 0
    for message in messages(light, seed, S // 100):
        now = (message.end_ps or 0) / S
        waiting = [done for done in waiting if done > now]
        if len(waiting) < queue:
            free_at = max(free_at, now) + message.times_ps.size * per_tag
            waiting.append(free_at)
            tags += message.times_ps.size
            kept_ps += S // 100
    return tags / (kept_ps / S) / (2 * RATE_HZ)


def test_dropping_what_comes_while_a_queue_is_full_would_read_too_dark() -> None:
    steady = [dropping_when_full(STEADY, 3.0, seed) for seed in range(RUNS)]
    agrees(steady, 1.0, 0.02)  # of constant light one could not see it
    slow = [dropping_when_full(SLOW, 3.0, seed) for seed in range(RUNS)]
    with pytest.raises(AssertionError):
        agrees(slow, 1.0, 0.4)
    assert np.mean(slow) < 0.7
