"""Runs a pipeline to its end: signals, and the state that its readers and supervisor see."""

from __future__ import annotations

import os
import signal
import time
from collections.abc import Callable
from types import FrameType

from tagstream.errors import InputError
from tagstream.pipeline import Pipeline, State

LONGEST_NAP_S = 0.1  # how late a stop may be noticed while waiting


class StopRequest:
    """Whether somebody asked for a stop. The first signal asks; the second one ends at once."""

    def __init__(self) -> None:
        self.signal_number: int | None = None

    def install(self) -> None:
        """Take over SIGINT and SIGTERM. The handler only sets a flag: it may run anywhere."""
        for number in (signal.SIGINT, signal.SIGTERM):
            signal.signal(number, self._ask)

    def _ask(self, number: int, frame: FrameType | None) -> None:
        if self.signal_number is not None:
            os._exit(1)
        self.signal_number = number

    @property
    def requested(self) -> bool:
        return self.signal_number is not None

    @property
    def exit_code(self) -> int:
        """128 + the signal, as a shell counts; 0 when nobody asked."""
        return 0 if self.signal_number is None else 128 + self.signal_number

    def wait(self, seconds: float) -> bool:
        """Sleep up to `seconds`; True when a stop was asked for."""
        time.sleep(min(seconds, LONGEST_NAP_S))
        return self.requested


def run_to_end(
    pipeline: Pipeline, stop: StopRequest, after_step: Callable[[], None] = lambda: None
) -> State:
    """Step until the feed ends, by itself or after a stop; close everything, whatever happens.

    Raises what the pipeline raised, after the results so far were closed with a state that says
    so.
    """
    try:
        while pipeline.step():
            after_step()
    except InputError as error:
        pipeline.finish(State.INPUT_BROKEN, error=str(error))
        raise
    except BaseException as error:
        _close_after(error, pipeline)
        raise
    state = State.STOPPED if stop.requested else State.FINISHED
    pipeline.finish(state)
    return state


def _close_after(error: BaseException, pipeline: Pipeline) -> None:
    """Close the results; a second failure must not hide the first."""
    try:
        pipeline.finish(State.FAILED, error=str(error) or type(error).__name__)
    except Exception as second:
        error.add_note(f"closing the results failed too: {second}")
