"""Runs a pipeline to its end: signals, what others ask for in between, and a clean close."""

from __future__ import annotations

import faulthandler
import os
import signal
import sys
import time
from collections.abc import Callable, Iterable
from concurrent.futures import Future, wait
from queue import Empty, SimpleQueue
from types import FrameType
from typing import Any, TypeVar

from tagstream.errors import ControlError, InputError
from tagstream.pipeline import Pipeline, State

T = TypeVar("T")
LONGEST_NAP_S = 0.1  # how late a stop may be noticed while waiting
LOOK_S = 0.05  # how often a run is looked after
REFRESH_S = 1.5  # while no slice ends, results are shown again this often


class StopRequest:
    """Whether somebody asked for a stop. The first signal asks; the second one ends at once.

    SIGHUP asks for the settings to be read again. Handlers only set flags: they may run anywhere.
    """

    def __init__(self) -> None:
        self.signal_number: int | None = None
        self._asked = False
        self._reload = False

    def install(self) -> None:
        """Take over SIGINT, SIGTERM and SIGHUP; SIGUSR1 shows on standard error what all threads
        do, for a run that hangs."""
        if sys.__stderr__ is not None:
            faulthandler.register(signal.SIGUSR1, sys.__stderr__)
        for number in (signal.SIGINT, signal.SIGTERM):
            signal.signal(number, self._ask)
        signal.signal(signal.SIGHUP, self._ask_to_reload)

    def _ask(self, number: int, frame: FrameType | None) -> None:
        if self.signal_number is not None:
            os._exit(1)
        self.signal_number = number

    def _ask_to_reload(self, number: int, frame: FrameType | None) -> None:
        self._reload = True

    def ask(self) -> None:
        """Ask for a stop without a signal."""
        self._asked = True

    @property
    def requested(self) -> bool:
        return self._asked or self.signal_number is not None

    def take_reload(self) -> bool:
        """Whether the settings are to be read again; asked once, told once."""
        asked, self._reload = self._reload, False
        return asked

    @property
    def exit_code(self) -> int:
        """128 + the signal, as a shell counts; 0 when no signal came."""
        return 0 if self.signal_number is None else 128 + self.signal_number

    def wait(self, seconds: float) -> bool:
        """Sleep up to `seconds`; True when a stop was asked for."""
        time.sleep(min(seconds, LONGEST_NAP_S))
        return self.requested


class Requests:
    """Calls that other threads want made between two steps of a pipeline."""

    def __init__(self) -> None:
        self._waiting: SimpleQueue[tuple[Future[Any], Callable[[], Any]]] = SimpleQueue()

    def ask(self, call: Callable[[], T]) -> Future[T]:
        """Have `call` made; its result, or what it raised, comes in the future."""
        future: Future[T] = Future()
        self._waiting.put((future, call))
        return future

    def answer(self) -> None:
        """Make the calls that wait."""
        while True:
            try:
                future, call = self._waiting.get_nowait()
            except Empty:
                return
            try:
                future.set_result(call())
            except Exception as error:
                future.set_exception(error)

    def refuse(self, error: Exception) -> None:
        """The pipeline has ended: nothing will be done any more."""
        while not self._waiting.empty():
            self._waiting.get_nowait()[0].set_exception(error)


class RunLoop:
    """Steps pipelines, one run after the other, in the thread that counts.

    make: makes the pipeline of the next run, on the same stream. requests: what others want done
    between two steps. counted: called after each step. progress: steps so far; whoever watches
    sees by it that work goes on.
    """

    def __init__(
        self,
        first: Pipeline,
        make: Callable[[], Pipeline],
        requests: Requests,
        counted: Callable[[Pipeline], None] = lambda pipeline: None,
        clock: Callable[[], float] = time.monotonic,
    ) -> None:
        self.pipeline, self.progress = first, 0
        self._make, self._requests, self._counted, self._clock = make, requests, counted, clock
        self._shown, self._shown_s = first.shown, clock()

    def run_to_end(self, stop: StopRequest) -> State:
        """Step until the feed ends, by itself or after a stop; close everything, whatever happens.

        Raises what the pipeline raised, after the results so far were closed with a state that
        says so.
        """
        try:
            while self.pipeline.step():
                self._between()
        except InputError as error:
            self.pipeline.finish(State.INPUT_BROKEN, error=str(error))
            raise
        except BaseException as error:
            _close_after(error, self.pipeline)
            raise
        finally:
            self._requests.refuse(ControlError("the run has ended"))
        state = State.STOPPED if stop.requested else State.FINISHED
        self.pipeline.finish(state)
        return state

    def new_run(self) -> None:
        """End this run and begin the next one, between two steps; the stream goes on."""
        before = self.pipeline
        before.finish(State.FINISHED)
        self.pipeline = self._make()
        self.pipeline.count_besides(before.counters.plus(before.elsewhere.negative()).negative())

    def _between(self) -> None:
        self.progress += 1
        self._counted(self.pipeline)
        self._requests.answer()
        self._refresh()

    def _refresh(self) -> None:
        """Show results again while no slice ends, so that a reader sees that the run is alive."""
        pipeline = self.pipeline
        if pipeline.shown != self._shown:
            self._shown, self._shown_s = pipeline.shown, self._clock()
        elif self._clock() - self._shown_s >= REFRESH_S and pipeline.sink.snapshot_due():
            pipeline.show()


def supervise(counting: Future[State], looks: Iterable[Callable[[], None]]) -> State:
    """Look after a run, again and again, until its counting thread has ended.

    looks: each is short. Returns, or raises, what the counting did.
    """
    looks = list(looks)
    while not wait([counting], LOOK_S).done:
        for look in looks:
            look()
    return counting.result()


def _close_after(error: BaseException, pipeline: Pipeline) -> None:
    """Close the results; a second failure must not hide the first."""
    try:
        pipeline.finish(State.FAILED, error=str(error) or type(error).__name__)
    except Exception as second:
        error.add_note(f"closing the results failed too: {second}")
