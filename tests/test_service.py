"""Requests between steps, refreshing while nothing happens, and looking after a run."""

from __future__ import annotations

import signal
from concurrent.futures import Future
from typing import Any

import pytest

from tagstream.counters import Counters
from tagstream.errors import ControlError, InputError
from tagstream.pipeline import State
from tagstream.service import REFRESH_S, Requests, RunLoop, StopRequest, supervise
from tests.fakes_outputs import FakeClock


def test_calls_are_made_in_order_and_their_results_come_back() -> None:
    requests, done = Requests(), []
    first = requests.ask(lambda: done.append(1))
    second = requests.ask(lambda: 1 // 0)
    assert not first.done()
    requests.answer()
    assert done == [1]
    assert first.result() is None
    assert isinstance(second.exception(), ZeroDivisionError)


def test_after_the_end_requests_are_refused() -> None:
    requests = Requests()
    future = requests.ask(lambda: 1)
    requests.refuse(RuntimeError("the run has ended"))
    with pytest.raises(RuntimeError, match="has ended"):
        future.result()


class Steps:
    """What of a pipeline the loop sees: some steps, then the end."""

    def __init__(self, steps: int = 0, fails: BaseException | None = None) -> None:
        self.left, self.fails, self.shown, self.due = steps, fails, 0, True
        self.sink = self
        self.ended: list[State] = []
        self.counters, self.elsewhere = Counters(arrived=10, kept=10), Counters(arrived=3, kept=3)

    def step(self) -> bool:
        if self.left == 0 and self.fails is not None:
            raise self.fails
        self.left -= 1
        return self.left >= 0

    def snapshot_due(self) -> bool:
        return self.due

    def show(self) -> None:
        self.shown += 1

    def finish(self, state: State, **fields: Any) -> None:
        self.ended.append(state)

    def count_besides(self, elsewhere: Counters) -> None:
        self.elsewhere = elsewhere


def loop_of(pipeline: Steps, clock: FakeClock | None = None, more: Steps | None = None) -> RunLoop:
    make: Any = lambda: more  # noqa: E731
    first: Any = pipeline
    return RunLoop(first, make, Requests(), clock=clock or FakeClock())


def test_results_are_shown_again_only_while_nothing_else_shows_them() -> None:
    clock, pipeline = FakeClock(0.0), Steps()
    loop = loop_of(pipeline, clock)
    clock.now = REFRESH_S - 0.1
    loop._between()
    assert pipeline.shown == 0
    pipeline.show()  # a slice has ended
    loop._between()
    clock.now += REFRESH_S - 0.1
    loop._between()
    assert pipeline.shown == 1
    clock.now += 0.2
    loop._between()
    assert pipeline.shown == 2
    pipeline.due = False  # the last one is still being written
    clock.now += 2 * REFRESH_S
    loop._between()
    assert pipeline.shown == 2
    assert loop.progress == 5


@pytest.mark.parametrize(("asked", "state"), [(False, State.FINISHED), (True, State.STOPPED)])
def test_the_end_of_the_feed_closes_the_run(asked: bool, state: State) -> None:
    pipeline, stop = Steps(3), StopRequest()
    if asked:
        stop.ask()
    assert loop_of(pipeline).run_to_end(stop) is state
    assert pipeline.ended == [state]


@pytest.mark.parametrize(
    ("error", "state"),
    [(InputError("cut off"), State.INPUT_BROKEN), (MemoryError(), State.FAILED)],
)
def test_a_failure_closes_the_run_too(error: BaseException, state: State) -> None:
    pipeline = Steps(1, error)
    with pytest.raises(type(error)):
        loop_of(pipeline).run_to_end(StopRequest())
    assert pipeline.ended == [state]


def test_a_new_run_begins_with_counters_at_zero() -> None:
    first, second = Steps(), Steps(2)
    loop = loop_of(first, more=second)
    loop.new_run()
    assert first.ended == [State.FINISHED]
    assert loop.pipeline is second  # type: ignore[comparison-overlap]
    assert second.elsewhere.arrived == -7  # of the ten, three were of an earlier process
    assert loop.run_to_end(StopRequest()) is State.FINISHED


def test_after_the_end_nothing_waits_for_ever() -> None:
    loop = loop_of(Steps(0))
    future = loop._requests.ask(lambda: None)
    loop.run_to_end(StopRequest())
    with pytest.raises(ControlError, match="ended"):
        future.result(1)


def test_supervision_looks_until_the_counting_ends() -> None:
    counting: Future[State] = Future()
    looks = []

    def look() -> None:
        looks.append(1)
        if len(looks) == 3:
            counting.set_result(State.FINISHED)

    assert supervise(counting, [look]) is State.FINISHED
    assert len(looks) == 3


def test_supervision_raises_what_the_counting_raised() -> None:
    counting: Future[State] = Future()
    counting.set_exception(OSError("disk"))
    with pytest.raises(OSError, match="disk"):
        supervise(counting, [])


def test_a_stop_without_a_signal_has_no_exit_code_of_its_own() -> None:
    stop = StopRequest()
    assert not stop.requested
    stop.ask()
    assert stop.requested
    assert stop.exit_code == 0
    stop._ask(signal.SIGTERM, None)
    assert stop.exit_code == 143


def test_a_reload_is_told_once() -> None:
    stop = StopRequest()
    stop._ask_to_reload(signal.SIGHUP, None)
    assert stop.take_reload()
    assert not stop.take_reload()
