"""Programs that alerts start: never waited for, never many, never for long."""

from __future__ import annotations

import os
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest

from tagstream.outputs import alert_commands
from tagstream.outputs.alert_commands import LIMIT_S, AlertCommands, variables
from tagstream.outputs.alerts import AlertChange
from tests.fakes_outputs import FakeClock
from tests.outputs.test_alerts import alert

WAIT_S = 20.0
WRITE = "import os, sys; open(sys.argv[1], 'a').write(os.environ['TAGSTREAM_ALERT_STATE'] + ' ')"
FOREVER = (
    "import subprocess, sys, time; open(sys.argv[1], 'w').close();"
    "subprocess.run([sys.executable, '-c', 'import time; time.sleep(600)'])"
)


def change(raised: bool = True, number: int = 1) -> AlertChange:
    return AlertChange(number, "g2_zero over 10 s above 0.1", raised, 7, 0.25, 0.2, 0.1)


class Bench:
    """Commands with a clock that stands still, and the events of what failed."""

    def __init__(self, *command: str) -> None:
        self.events: list[dict[str, Any]] = []
        self.clock = FakeClock()
        sections = [alert(command=list(command)), alert()]
        self.commands = AlertCommands(sections, "/runs/x-0001", self._note, self.clock)

    def _note(self, name: str, stream_ps: int | None, **fields: Any) -> None:
        assert name == "alert_command_failed"
        self.events.append(fields)

    def until(self, true: Callable[[], bool]) -> None:
        """Look again and again, as the main thread does."""
        last = time.monotonic() + WAIT_S
        while not true():
            assert time.monotonic() < last
            self.commands.look()
            time.sleep(0.005)


@pytest.fixture
def out(tmp_path: Path) -> Path:
    return tmp_path / "out"


@pytest.fixture
def bench(out: Path) -> Iterator[Bench]:
    made = Bench(sys.executable, "-c", WRITE, str(out))
    yield made
    made.commands.close()


def text(path: Path) -> str:
    return path.read_text() if path.exists() else ""


def test_it_is_started_when_raised_and_when_cleared(bench: Bench, out: Path) -> None:
    bench.commands.tell(change())
    bench.until(lambda: text(out) == "raised ")
    bench.commands.tell(change(raised=False))
    bench.until(lambda: text(out) == "raised cleared ")
    assert bench.events == []


def test_an_alert_without_a_command_starts_nothing(bench: Bench, out: Path) -> None:
    bench.commands.tell(change(number=2))
    bench.commands.look()
    bench.commands.close()
    assert not out.exists()


def test_no_shell_reads_the_arguments(out: Path) -> None:
    words = "$(touch x); `id` && *"
    code = "import sys; open(sys.argv[1], 'w').write(sys.argv[2])"
    bench = Bench(sys.executable, "-c", code, str(out), words)
    bench.commands.tell(change())
    bench.until(lambda: text(out) == words)
    bench.commands.close()


def test_what_a_program_knows(monkeypatch: pytest.MonkeyPatch) -> None:
    known = variables(change(), "/runs/x-0001", {"PATH": "/bin", "SECRET": "s", "TZ": "UTC"})
    assert known == {
        "PATH": "/bin",
        "TZ": "UTC",
        "TAGSTREAM_ALERT_STATE": "raised",
        "TAGSTREAM_ALERT_NUMBER": "1",
        "TAGSTREAM_ALERT_WHAT": "g2_zero over 10 s above 0.1",
        "TAGSTREAM_ALERT_TEXT": change().text,
        "TAGSTREAM_ALERT_VALUE": "0.25",
        "TAGSTREAM_ALERT_COMPARED": "0.2",
        "TAGSTREAM_ALERT_BOUND": "0.1",
        "TAGSTREAM_ALERT_STREAM_PS": "7",
        "TAGSTREAM_ALERT_RUN": "/runs/x-0001",
    }


def test_it_inherits_no_files(out: Path) -> None:
    code = (
        "import os, sys; n = [f for f in os.listdir('/proc/self/fd') if int(f) > 2];"
        "open(sys.argv[1], 'w').write(f'{len(n)} {sys.stdin.read()!r} ' + os.getcwd())"
    )
    bench = Bench(sys.executable, "-c", code, str(out))
    kept = os.open("/dev/null", os.O_RDONLY)
    os.set_inheritable(kept, True)
    bench.commands.tell(change())
    bench.until(lambda: text(out) != "")
    os.close(kept)
    assert text(out) == "1 '' /"  # the one is the listing of the folder itself
    bench.commands.close()


@pytest.mark.parametrize(
    ("command", "error"),
    [
        (["no-such-program-anywhere"], "no-such-program-anywhere: cannot be started: "),
        (["/etc/passwd"], "/etc/passwd: cannot be started: "),
        ([sys.executable, "-c", "raise SystemExit(7)"], "exit code 7"),
        ([sys.executable, "-c", "import os; os.kill(os.getpid(), 9)"], "ended by signal 9"),
    ],
)
def test_a_failure_is_told(command: list[str], error: str) -> None:
    bench = Bench(*command)
    bench.commands.tell(change())
    bench.until(lambda: len(bench.events) == 1)
    assert bench.events[0]["number"] == 1
    assert bench.events[0]["error"].startswith(error)
    bench.commands.close()


def test_one_at_a_time_and_the_newest_change_comes_next(out: Path) -> None:
    go = out.with_name("go")
    code = (
        f"import os, time\n{WRITE}\n"
        "last = time.monotonic() + 20\n"
        "while not os.path.exists(sys.argv[2]) and time.monotonic() < last: time.sleep(0.01)"
    )
    bench = Bench(sys.executable, "-c", code, str(out), str(go))
    bench.commands.tell(change())
    bench.until(lambda: text(out) == "raised ")
    for raised in (False, True, False):
        bench.commands.tell(change(raised))
        bench.commands.look()
    assert text(out) == "raised "
    go.touch()
    bench.until(lambda: text(out) == "raised cleared ")
    bench.commands.close()
    assert text(out) == "raised cleared "
    assert bench.events == []


def test_what_takes_too_long_is_killed_with_what_it_started(out: Path) -> None:
    bench = Bench(sys.executable, "-c", FOREVER, str(out))
    bench.commands.tell(change())
    bench.until(out.exists)
    group = bench.commands._running[1].process.pid
    bench.clock.now += LIMIT_S - 1
    bench.commands.look()
    assert bench.events == []
    bench.clock.now += 1
    bench.commands.look()
    assert bench.events == [{"number": 1, "error": "took longer than 30 s; it was killed"}]
    _wait_until_gone(group)
    bench.commands.close()


def test_the_end_of_a_run_waits_a_little_and_then_kills(
    out: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(alert_commands, "CLOSE_S", 0.05)
    bench = Bench(sys.executable, "-c", FOREVER, str(out))
    bench.commands.tell(change())
    bench.until(out.exists)
    group = bench.commands._running[1].process.pid
    bench.commands.close()
    assert bench.events == [{"number": 1, "error": "the run ended; it was killed"}]
    _wait_until_gone(group)


def test_the_last_change_is_not_lost_at_the_end(bench: Bench, out: Path) -> None:
    bench.commands.tell(change())
    bench.commands.close()
    assert text(out) == "raised "


def test_other_settings_have_other_programs(bench: Bench, out: Path) -> None:
    bench.commands.replace_alerts([alert()])
    bench.commands.tell(change())
    bench.commands.close()
    assert not out.exists()


def _wait_until_gone(group: int) -> None:
    last = time.monotonic() + WAIT_S
    while time.monotonic() < last:
        try:
            os.killpg(group, 0)
        except ProcessLookupError:
            return
        if all(_is_dead(group, entry) for entry in os.listdir("/proc") if entry.isdigit()):
            return
        time.sleep(0.01)
    raise AssertionError("a program that was killed still runs")


def _is_dead(group: int, pid: str) -> bool:
    """Of another group, or dead but not yet collected by whoever adopted it."""
    try:
        fields = Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()
    except OSError:
        return True
    return int(fields[2]) != group or fields[0] == "Z"
