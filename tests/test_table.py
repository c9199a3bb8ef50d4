"""What a person and a script are shown of a run, by example."""

from __future__ import annotations

import json
import re
from dataclasses import replace
from datetime import UTC, datetime, timedelta
from math import inf, nan
from pathlib import Path
from typing import Any

import pytest

from tagstream import table as module
from tagstream.outputs import SplitView
from tagstream.outputs.folder import RunFolder
from tagstream.outputs.reader import Run, open_run
from tagstream.outputs.run_writer import RunWriter
from tagstream.recording.layout import Mark
from tagstream.table import WIDTH, as_json, format_estimate, format_run
from tests.fakes_outputs import make_estimate, make_header, make_row, make_snapshot, make_tally

FINISHED = """\
a run made by hand: running
{folder}

g2_zero
  run        0.1000 +0.0111 -0.0091     40 counts
  10 s       -                          too few counts
  68.27 % interval; made by hand

rate_a
  run        1000 +10 -10 Hz            40 counts
             0.1000 +0.0111 -0.0091 Hz  before corrections
  10 s       1000 +10 -10 Hz            40 counts
             0.1000 +0.0111 -0.0091 Hz  before corrections
  68.27 % interval; made by hand

channel              run, counts/s    10 s, counts/s   counts in the run
arm_a                 9.007199e+15      9.007199e+15    9007199254740993
arm_b                            5                 5                   5

tags: received 20 = kept 18 + dropped 2
  dropped, late: 2
gaps: 1, 1.5 s together

known truth of the simulation
  g2_zero  0.0414667
  source   emitter"""


def write(parent: Path, **changes: Any) -> RunWriter:
    """A run of one slice that is still being written; to be closed by the test."""
    header = make_header(**{"truth": {"g2_zero": 0.041466651, "source": "emitter"}, **changes})
    writer = RunWriter(RunFolder.create(parent, "run"), header)
    writer.add_row(make_row(0))
    writer.replace_snapshot(make_snapshot())
    return writer


@pytest.fixture
def run(tmp_path: Path) -> Run:
    write(tmp_path).close(make_snapshot())
    return open_run(tmp_path / "run")


def test_a_finished_run_word_by_word(run: Run) -> None:
    assert format_run(run) == FINISHED.format(folder=run.path)


def test_a_split_tally_is_told_value_by_value(tmp_path: Path) -> None:
    tallies = {"hbt": {"kind": "cross-correlation", "split_by": "power"}}
    parts = {value: make_tally(11) for value in ("unmarked", 0.25)}
    marks = (Mark(3, "power", 0.5), Mark(5, "filter", "grey"), Mark(9, "power", 0.25))
    snapshot = replace(
        make_snapshot(), splits={"hbt": SplitView("power", 0.25, parts)}, marks=marks
    )
    write(tmp_path, tallies=tallies).close(snapshot)
    run = open_run(tmp_path / "run")
    lines = format_run(run).splitlines()
    first = lines.index("hbt, apart for each value of power")
    assert [line.split() for line in lines[first + 1 : first + 4]] == [
        ["unmarked", "90", "pairs", "in", "1", "s", "of", "live", "time"],
        ["0.25", "90", "pairs", "in", "1", "s", "of", "live", "time"],
        [],
    ]
    plain = json.loads(json.dumps(as_json(run)))
    assert plain["marks"] == {"power": 0.25, "filter": "grey"}
    assert plain["splits"]["hbt"]["key"] == "power"
    assert plain["splits"]["hbt"]["values"][1] == {"value": 0.25, "pairs": 90, "live_time_s": 1.0}


def test_a_run_without_a_title_is_called_by_its_folder(tmp_path: Path) -> None:
    write(tmp_path, title="", truth={}).close(make_snapshot())
    text = format_run(open_run(tmp_path / "run"))
    assert text.startswith("run-0001: running\n")
    assert "truth" not in text


def age(text: str) -> str:
    return next(line for line in text.splitlines() if line.startswith("last written"))


def desert(writer: RunWriter) -> None:
    """What a crash does: the lock is gone, and no last word was said."""
    writer._history.close()
    writer._log.close()
    writer.folder.close()


def test_a_live_run_says_so_and_a_deserted_one_too(tmp_path: Path) -> None:
    writer = write(tmp_path)
    run = open_run(tmp_path / "run")
    assert re.fullmatch(r"last written \d s ago; a process writes it", age(format_run(run)))
    assert as_json(run)["live"] is True
    desert(writer)
    told = age(format_run(run))
    assert re.fullmatch(r"last written \d s ago; no process writes it any more", told)
    assert as_json(run)["live"] is False


@pytest.mark.parametrize(
    ("passed", "told"),
    [
        (timedelta(seconds=119), "119 s"),
        (timedelta(minutes=119), "119 min"),
        (timedelta(hours=3), "3 h"),
        (timedelta(days=9), "9 d"),
        (timedelta(seconds=-30), "0 s"),  # a clock that was set back
    ],
)
def test_the_age_of_a_run_has_one_fitting_unit(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, passed: timedelta, told: str
) -> None:
    desert(write(tmp_path))
    run = open_run(tmp_path / "run")
    now = datetime.fromisoformat(run.about["updated_utc"]) + passed

    class Later(datetime):
        @classmethod
        def now(cls, tz: Any = None) -> Any:
            return now.astimezone(tz)

    monkeypatch.setattr(module, "datetime", Later)
    assert age(format_run(run)) == f"last written {told} ago; no process writes it any more"
    assert now.tzinfo == UTC


def test_before_the_first_slice_there_is_little_to_say(tmp_path: Path) -> None:
    writer = RunWriter(RunFolder.create(tmp_path, "run"), make_header())
    text = format_run(open_run(tmp_path / "run"))
    writer.close(make_snapshot())
    assert text.startswith("a run made by hand: starting\n")
    assert "\ng2_zero\n  no slice has ended yet\n" in text
    assert "tags:" not in text


def test_no_line_is_wider_than_a_terminal_and_no_word_is_lost(tmp_path: Path) -> None:
    words = [f"word{number}" for number in range(60)]
    long = make_estimate(method="by hand; " + " ".join(words), note=" ".join(words))
    found = make_snapshot()
    estimates = {**found.estimates, "g2_zero": (long, long)}
    write(tmp_path).close(replace(found, estimates=estimates))
    text = format_run(open_run(tmp_path / "run"))
    assert all(len(line) <= WIDTH for line in text.splitlines() if "/" not in line)
    assert [text.split().count(word) for word in words] == [3] * 60  # two notes and the method
    assert text.count("! word0 ") == 2


@pytest.mark.parametrize(
    ("value", "lower", "upper", "told"),
    [
        (0.0412, 0.0400, 0.0431, "0.0412 +0.0019 -0.0012"),
        (0.996, 0.9001, 1.0955, "0.996 +0.099 -0.096"),
        (1e6, 9.9e5, 1.02e6, "1000000 +20000 -10000"),
        (212438.1, 212338.1, 212538.2, "212440 +100 -100"),
        (12.5, 11.5, 13.5, "12.5 +1.0 -1.0"),
        (0.0, 0.0, 0.3, "0.00 +0.30 -0.00"),
        (-0.02, -0.04, 0.01, "-0.020 +0.030 -0.020"),  # background taken away, not clipped
        (0.1, 0.0999999, 0.13, "0.1000 +0.0300 -0.0000"),  # one side nearly vanishes
        (2e-15, 1e-15, 3e-15, "2e-15 +1e-15 -1e-15"),
        (3.0, 2.0, inf, "3.0 +inf -1.0"),
        (0.5, 0.5, inf, "0.5 +inf"),
        (5.0, 5.0, 5.0, "5"),
        (inf, 1.0, inf, "inf"),
        (nan, nan, nan, "-"),
    ],
)
def test_two_digits_of_the_interval(value: float, lower: float, upper: float, told: str) -> None:
    found = make_estimate(value=value, lower=lower, upper=upper)
    assert format_estimate(found) == told
    assert format_estimate(replace(found, unit="Hz")) == (told if told == "-" else f"{told} Hz")


def test_limits_and_missing_numbers() -> None:
    limit = make_estimate(value=0.0, lower=0.0, upper=0.01234, interval="upper-limit")
    assert format_estimate(limit) == "< 0.012"
    assert format_estimate(make_estimate(interval="none")) == "-"


def test_json_holds_the_same_without_rounding(run: Run) -> None:
    told = json.loads(json.dumps(as_json(run), allow_nan=False))
    measured = {"estimates", "channels", "splits", "marks", "health"}
    assert set(told) == {"run", "live", "about", "truth"} | measured
    assert told["run"] == str(run.path)
    found = told["estimates"]["g2_zero"]
    assert (found["run"]["value"], found["run"]["upper"]) == (0.1, 1 / 9)
    assert found["10 s"]["value"] is None
    assert found["10 s"]["reason"] == "too few counts"
    assert told["channels"]["arm_a"]["run"]["counts"] == 2**53 + 1
    assert told["health"]["gap_time_s"] == 1.5
    assert told["truth"] == {"g2_zero": 0.041466651, "source": "emitter"}
    assert told["about"]["title"] == "a run made by hand"
