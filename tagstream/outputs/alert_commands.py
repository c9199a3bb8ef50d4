"""Programs that an alert starts when it is raised and when it is cleared.

A program is started as it stands in the settings, without a shell, with no standard input and no
standard output (its error output goes where ours goes), in / and with few variables:

    PATH, HOME, USER, LOGNAME, LANG, LC_ALL, TZ    as they are here
    TAGSTREAM_ALERT_STATE                          raised, or cleared
    TAGSTREAM_ALERT_NUMBER, _WHAT, _TEXT, _VALUE, _COMPARED, _BOUND, _STREAM_PS
    TAGSTREAM_ALERT_RUN                            the run folder

What is unknown is empty. A program may take LIMIT_S seconds; then it and what it started are
killed. Each alert runs one at a time; if it changes meanwhile, the newest change comes next.
"""

from __future__ import annotations

import contextlib
import os
import signal
import subprocess
import time
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from queue import Empty, SimpleQueue

from tagstream.outputs.alerts import AlertChange
from tagstream.settings.sections import Alert

LIMIT_S = 30.0
CLOSE_S = 2.0  # how long `close` lets programs end
KILL_S = 1.0  # how long a killed program is waited for; it ends at once unless its disk hangs
NAP_S = 0.02
FAILED = "alert_command_failed"  # the event, with `number` and `error`
KEPT_VARIABLES = ("PATH", "HOME", "USER", "LOGNAME", "LANG", "LC_ALL", "TZ")


@dataclass(slots=True)
class _Running:
    process: subprocess.Popen[bytes]
    until_s: float


class AlertCommands:
    """Starts the programs of alerts. `tell` from any thread; `look` now and then, in one thread.

    alerts: the sections, in order. run: the run folder. event: what failed, as of a sink; called
    by `look`.
    """

    def __init__(
        self,
        alerts: Sequence[Alert],
        run: str,
        event: Callable[..., None],
        clock: Callable[[], float] = time.monotonic,
    ) -> None:
        self._event, self._clock, self._run = event, clock, run
        self._changes: SimpleQueue[AlertChange] = SimpleQueue()
        self._next: dict[int, AlertChange] = {}
        self._running: dict[int, _Running] = {}
        self.replace_alerts(alerts)

    def replace_alerts(self, alerts: Sequence[Alert]) -> None:
        """Other sections from now on; what runs goes on."""
        self._commands = {n: list(a.command) for n, a in enumerate(alerts, 1) if a.command}

    def tell(self, change: AlertChange) -> None:
        """Have the program of an alert started soon."""
        self._changes.put(change)

    def look(self) -> None:
        """Start what waits, see what ended, kill what takes too long. Never waits."""
        with contextlib.suppress(Empty):
            while True:
                change = self._changes.get_nowait()
                self._next[change.number] = change
        for number in list(self._running):
            self._see(number)
        for number in [n for n in self._next if n not in self._running]:
            change = self._next.pop(number)
            if command := self._commands.get(number):
                self._start(command, change)

    def close(self) -> None:
        """Start what waits, let all end for CLOSE_S seconds at most, and kill the rest."""
        self.look()
        last_s = time.monotonic() + CLOSE_S
        while self._running and time.monotonic() < last_s:
            time.sleep(NAP_S)
            self.look()
        for number in list(self._running):
            self._kill(number, "the run ended")

    def _start(self, command: list[str], change: AlertChange) -> None:
        try:
            process = subprocess.Popen(
                command,
                stdin=subprocess.DEVNULL,
                stdout=subprocess.DEVNULL,
                cwd="/",
                env=variables(change, self._run, os.environ),
                start_new_session=True,  # so that what it starts is killed with it
            )
        except (OSError, ValueError) as error:
            self._fail(change.number, f"{command[0]}: cannot be started: {error}")
        else:
            self._running[change.number] = _Running(process, self._clock() + LIMIT_S)

    def _see(self, number: int) -> None:
        running = self._running[number]
        code = running.process.poll()
        if code is not None:
            del self._running[number]
            if code != 0:
                how = f"exit code {code}" if code > 0 else f"ended by signal {-code}"
                self._fail(number, how)
        elif self._clock() >= running.until_s:
            self._kill(number, f"took longer than {LIMIT_S:g} s")

    def _kill(self, number: int, why: str) -> None:
        process = self._running.pop(number).process
        with contextlib.suppress(ProcessLookupError):
            os.killpg(process.pid, signal.SIGKILL)
        with contextlib.suppress(subprocess.TimeoutExpired):
            process.wait(KILL_S)
        self._fail(number, f"{why}; it was killed")

    def _fail(self, number: int, error: str) -> None:
        self._event(FAILED, None, number=number, error=error)


def variables(change: AlertChange, run: str, environment: Mapping[str, str]) -> dict[str, str]:
    """The variables that a program gets."""
    told = {
        "STATE": "raised" if change.raised else "cleared",
        "RUN": run,
        "STREAM_PS": change.stream_ps,
        **change.fields,
    }
    own = {key.upper(): "" if value is None else str(value) for key, value in told.items()}
    kept = {key: environment[key] for key in KEPT_VARIABLES if key in environment}
    return {**kept, **{f"TAGSTREAM_ALERT_{key}": value for key, value in own.items()}}
