"""The daemon in a process of its own: tags over sockets, requests, a crash, going on."""

from __future__ import annotations

import json
import signal
import subprocess
from collections.abc import Iterator
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest

import tagstream as package
from tagstream.control.client import ask_run
from tagstream.control.requests import PlainRequest, mark_request
from tagstream.outputs.reader import Run
from tagstream.recording import RecordingWriter
from tests.flow.conftest import Caller
from tests.flow.daemon import Daemon, play, tagstream

SLICE_PS = 100 * 10**9
RECORDING = '[recording]\nsegment = "1 MB"\nmin_free = "1 MB"\n'
Integers = dict[str, list[int]]


@pytest.fixture
def light(tmp_path: Path) -> Path:
    """Two seconds of two channels of 100 000 tags/s each, in intervals of 50 ms."""
    rng = np.random.default_rng(8)
    path = tmp_path / "light.h5"
    with RecordingWriter(path, tick=Fraction(1)) as writer:
        for begin in range(0, 20 * SLICE_PS, SLICE_PS // 2):
            end = begin + SLICE_PS // 2
            times = np.sort(rng.integers(begin, end, 10_000))
            writer.add(times, rng.integers(1, 3, times.size).astype(np.uint8), begin, end)
    return path


@pytest.fixture
def daemon(tmp_path: Path) -> Iterator[Daemon]:
    with Daemon(tmp_path / "d", RECORDING, slice_text="100 ms") as started:
        yield started


def integers(run: Run) -> Integers:
    """What must be the same whenever and however tags are counted."""
    arrays = run.tallies["hbt"]["run"]
    found = {
        name: np.atleast_1d(values).tolist()
        for name, values in arrays.items()
        if values.dtype.kind in "iu"
    }
    for name, spans in run.channels.items():
        found[name] = [spans["run"]["counts"], spans["run"]["live_time_ps"]]
    return found


def all_received(daemon: Daemon, tags: int) -> None:
    daemon.wait_for(
        lambda health: health.get("received", 0) >= tags and health.get("in_flight") == 0
    )


def test_what_was_recorded_live_replays_to_the_same_integers(
    daemon: Daemon, light: Path, tagstream: Caller
) -> None:
    told = play(light, daemon.address, "--fast")
    all_received(daemon, told["counts"]["tags"])
    ask_run(str(daemon.run), mark_request("power", 1.5))
    again = play(light, daemon.address, "--fast")  # a restarted sender: another session
    all_received(daemon, told["counts"]["tags"] + again["counts"]["tags"])
    assert daemon.stop() == 143
    live = package.open_run(daemon.run)
    assert live.health["state"] == "stopped"
    assert live.health["sessions"] == 2
    assert live.health["gaps"] == 1
    assert live.health["recording_not_recorded"] == 0
    assert [(mark.key, mark.value) for mark in live.marks] == [("power", 1.5)]
    segments = sorted(daemon.run.resolve().glob("recording-*.h5"))
    assert len(segments) > 1
    assert tagstream("replay", daemon.settings, *segments, "--name", "again").code == 0
    replayed = package.open_run(daemon.folder / "runs" / "again")
    assert integers(replayed) == integers(live)
    assert replayed.marks == live.marks
    assert replayed.health["kept"] == live.health["kept"]


def test_requests(daemon: Daemon, light: Path) -> None:
    run = str(daemon.run)
    told = play(light, daemon.address, "--fast")
    all_received(daemon, told["counts"]["tags"])
    assert ask_run(run, PlainRequest(request="status"))["state"] == "running"
    ask_run(run, PlainRequest(request="restart-spans"))
    first = daemon.run.resolve()
    reply = ask_run(run, PlainRequest(request="new-run"))
    assert reply["run"].endswith("live-0002")
    daemon.wait_for(lambda health: health.get("received") == 0)
    play(light, daemon.address, "--fast")
    all_received(daemon, told["counts"]["tags"])
    assert package.open_run(first).health["state"] == "finished"
    assert package.open_run(first).health["received"] == told["counts"]["tags"]
    ask_run(run, PlainRequest(request="stop"))
    assert daemon.process is not None
    assert daemon.process.wait(60) == 0
    assert package.open_run(daemon.run).health["state"] == "stopped"
    assert len(list(daemon.run.resolve().glob("recording-*.h5"))) >= 1


def test_sighup_takes_over_estimates_and_refuses_the_rest(daemon: Daemon, light: Path) -> None:
    assert daemon.process is not None
    play(light, daemon.address, "--fast")
    text = daemon.settings.read_text()
    more = '[[estimate]]\nname = "rate_a"\nkind = "count-rate"\nchannel = "arm_a"\n'
    daemon.settings.write_text(text.replace("[results]", more + "[results]"))
    daemon.process.send_signal(signal.SIGHUP)
    wait_for_event(daemon, "reload")
    daemon.settings.write_text(text.replace('max_lag = "50 ns"', 'max_lag = "60 ns"'))
    daemon.process.send_signal(signal.SIGHUP)
    refused = wait_for_event(daemon, "reload_refused")
    assert "[[tally]]" in refused["text"]
    daemon.stop()
    run = package.open_run(daemon.run)
    assert run.estimates["rate_a"]["run"].value > 0
    assert sorted(p.name for p in run.path.glob("history-*.h5")) == [
        "history-0001.h5",
        "history-0002.h5",
    ]
    assert np.isnan(run.history("rate_a")["value"][0])


def wait_for_event(daemon: Daemon, name: str) -> dict[str, str]:
    def events() -> list[dict[str, str]]:
        lines = (daemon.run / "log.jsonl").read_text().splitlines()
        return [event for line in lines if (event := json.loads(line))["event"] == name]

    daemon.wait_for(lambda _: bool(events()))
    return events()[-1]


def test_a_second_daemon_is_told_who_is_there(daemon: Daemon) -> None:
    second = tagstream("run", "--resume", daemon.settings, stderr=subprocess.PIPE)
    _, err = second.communicate(timeout=60)
    assert second.returncode == 4
    assert "written by" in err
    assert str(daemon.process.pid if daemon.process else "") in err


@pytest.mark.parametrize("number", range(6))
def test_after_kill_9_the_run_goes_on(
    tmp_path: Path, light: Path, number: int, tagstream: Caller
) -> None:
    """Killed at some instant while tags come; all it had shown is still there."""
    rng = np.random.default_rng(number)
    daemon = Daemon(tmp_path / "d", RECORDING, slice_text="100 ms")
    daemon.start()
    told = play(light, daemon.address, "--fast")
    least = int(rng.integers(1, 300_000))
    daemon.wait_for(lambda health: health.get("received", 0) >= least and "latency_s" in health)
    daemon.stop(signal.SIGKILL)
    before = package.open_run(daemon.run)
    shown, received = integers(before), int(before.health["received"])
    rows = before.history("g2_zero")["begin_ps"].size
    daemon.start("--resume")
    after = package.open_run(daemon.run)
    assert after.health["restarts"] == 1
    assert integers(after)["counts"] == shown["counts"]
    play(light, daemon.address, "--fast")
    tags = received + told["counts"]["tags"]
    daemon.wait_for(lambda health: health.get("received", 0) >= tags)
    assert daemon.stop() == 143
    run = package.open_run(daemon.run)
    assert run.health["gaps"] >= 1
    assert run.history("g2_zero")["begin_ps"].size > rows
    assert sum(integers(run)["counts"]) > sum(shown["counts"])
    assert (run.path / "history-0002.h5").exists()
    segments = sorted(run.path.glob("recording-*.h5"))
    assert tagstream("replay", daemon.settings, *segments, "--name", "again").code == 0
    assert not list(run.path.glob("*.part"))
