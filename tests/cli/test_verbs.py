"""Every verb: what it prints for people and for scripts, and what it refuses."""

from __future__ import annotations

import json
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest

import tagstream as package
from tests.flow.conftest import Caller
from tests.flow.program import ROOT


@pytest.fixture
def run(settings: Path, tagstream: Caller) -> Path:
    done = tagstream("run", settings)
    assert done.code == 0, done.err
    return settings.parent / "runs/flow"


def test_help_names_every_verb_without_importing_them() -> None:
    code = (
        "import sys; sys.argv = ['tagstream', '--help']\n"
        "from tagstream.cli import main\n"
        "try: main()\n"
        "except SystemExit: pass\n"
        "heavy = {'numpy', 'numba', 'h5py', 'pydantic', 'scipy'} & set(sys.modules)\n"
        "assert not heavy, heavy"
    )
    done = subprocess.run([sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
    for verb in ("run", "replay", "check", "simulate", "show", "watch", "plot"):
        assert f"\n  {verb} " in done.stdout


@pytest.mark.parametrize("verb", ["run", "replay", "check", "simulate", "show", "watch", "plot"])
def test_each_verb_explains_itself(verb: str, tagstream: Caller) -> None:
    done = tagstream(verb, "--help")
    assert done.code == 0
    assert done.out.startswith(f"Usage: tagstream {verb} ")


def test_version(tagstream: Caller) -> None:
    assert package.__version__ in tagstream("--version").out


def test_check_prints_settings_that_can_be_read_again(settings: Path, tagstream: Caller) -> None:
    done = tagstream("check", settings)
    assert tomllib.loads(done.out)["conditioning"]["max_disorder"] == "1 us"
    assert "no errors" in done.err
    told = json.loads(tagstream("check", settings, "--json").out)
    assert told["errors"] == []
    assert told["memory_bytes"] > 0


def test_check_tells_all_errors_in_both_ways(settings: Path, tagstream: Caller) -> None:
    sets = ("--set", 'tally.hbt.bin="3 ns"', "--set", "channels.arm_b.input=1")
    done = tagstream("check", settings, *sets)
    assert done.code == 2
    assert len(done.err.splitlines()) == 2
    told = json.loads(tagstream("check", settings, *sets, "--json").out)
    assert [f"error: {text}" for text in told["errors"]] == done.err.splitlines()


def test_a_missing_input_file_is_told_by_check(settings: Path, tagstream: Caller) -> None:
    sets = ("--set", 'feed={kind = "recording", path = "none.h5"}')
    done = tagstream("check", settings, *sets)
    assert done.code == 0
    assert "none.h5 does not exist" in done.err


def test_settings_of_a_live_feed_replay(settings: Path, recording: Path, tagstream: Caller) -> None:
    text = settings.read_text()
    begin, end = text.index("[feed]"), text.index("[channels.arm_a]")
    live = '[feed]\nkind = "zmq"\naddress = "tcp://127.0.0.1:5570"\n[control]\n'
    settings.write_text(text[:begin] + live + text[end:])
    done = tagstream("replay", settings, recording)
    assert done.code == 0
    assert "warning" not in done.err


def test_run_says_where_results_are_and_how_fast_it_was(settings: Path, tagstream: Caller) -> None:
    done = tagstream("run", settings)
    assert done.out.startswith(f"results in {settings.parent}/runs/flow-0001\n")
    assert "million tags a second" in done.out
    again = tagstream("run", settings, "--json")
    assert json.loads(again.out)["run"].endswith("runs/flow-0002")


def test_show(run: Path, tagstream: Caller) -> None:
    text = tagstream("show", run).out
    for word in ("g2_zero", "rate_a", "300 ms", "arm_b", "received", "known truth"):
        assert word in text
    told = json.loads(tagstream("show", run, "--json").out)
    found = told["estimates"]["g2_zero"]["run"]
    assert found["lower"] < found["value"] < found["upper"]
    assert found["value"] == package.open_run(run).estimates["g2_zero"]["run"].value


def test_show_health_is_a_check(run: Path, tagstream: Caller) -> None:
    assert tagstream("show", run, "--health").code == 0


def test_watch_ends_with_the_run(run: Path, tagstream: Caller) -> None:
    assert "g2_zero" in tagstream("watch", run).out


def test_plot(run: Path, tmp_path: Path, tagstream: Caller) -> None:
    done = tagstream("plot", run, "--output", tmp_path / "pictures", "--format", "png")
    assert done.code == 0, done.err
    made = [Path(line) for line in done.out.splitlines()]
    assert {path.name for path in made} == {
        "hbt.png",
        "g2_zero.png",
        "g2_zero_peaks.png",
        "rate_a.png",
    }
    assert all(path.read_bytes().startswith(b"\x89PNG") for path in made)


def test_simulate_prints_the_truth_and_writes_it(tmp_path: Path, tagstream: Caller) -> None:
    out = tmp_path / "light.h5"
    scenario = ROOT / "config/scenarios/coherent.toml"
    done = tagstream("simulate", scenario, out, "--duration", "50 ms", "--seed", "4", "--json")
    truth = json.loads(done.out)["truth"]
    assert truth["g2_zero"] == 1
    assert truth["seed"] == 4
    again = tagstream("simulate", scenario, out, "--duration", "50 ms")
    assert again.code == 1
    assert "exists" in again.err


@pytest.mark.parametrize("duration", ["20", "0 s", "long"])
def test_simulate_refuses_a_wrong_duration(
    duration: str, tmp_path: Path, tagstream: Caller
) -> None:
    scenario = ROOT / "config/scenarios/coherent.toml"
    done = tagstream("simulate", scenario, tmp_path / "a.h5", "--duration", duration)
    assert done.code == 2
    assert duration in done.err


def test_output_into_a_closed_pipe_is_no_error(run: Path) -> None:
    command = f"{sys.executable} -m tagstream show {run} | true; exit ${{PIPESTATUS[0]}}"
    done = subprocess.run(["bash", "-c", command], cwd=ROOT, capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
    assert done.stderr == ""
