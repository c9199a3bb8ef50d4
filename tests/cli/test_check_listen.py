"""`check --listen`: what arrives, for people and for scripts; nothing is written."""

from __future__ import annotations

import json
import tomllib
from pathlib import Path

import numpy as np

from tagstream.cli import heard
from tagstream.feeds.listening import Heard, HeardInput
from tests.fakes_settings import make_settings
from tests.flow.conftest import Caller


def test_what_arrives_is_told_and_nothing_written(settings: Path, tagstream: Caller) -> None:
    before = sorted(settings.parent.rglob("*"))
    silent = ("--set", "channels.arm_b.input=9")
    done = tagstream("check", settings, "--listen", "60 s", *silent)
    assert done.code == 0, done.err
    assert "stream time: 1 s, vouched for by the source; 0 gaps" in done.out
    assert "channel arm_b (input 9): nothing arrived" in done.out
    assert "(not listed)" in done.out
    suggested = tomllib.loads(done.out[done.out.index("# for the settings") :])
    assert suggested["channels"] == {"arm_a": {"input": 1}, "input_2": {"input": 2}}
    assert suggested["conditioning"] == {"max_disorder": "1 us"}
    told = json.loads(tagstream("check", settings, "--listen", "60 s", *silent, "--json").out)
    assert [row["channel"] for row in told["inputs"]] == ["arm_a", None]
    assert told["silent_channels"] == ["arm_b"]
    assert told["suggested_max_disorder"] == "1 us"
    assert sorted(settings.parent.rglob("*")) == before


def test_a_time_that_is_none_is_refused(settings: Path, tagstream: Caller) -> None:
    done = tagstream("check", settings, "--listen", "soon")
    assert done.code == 2
    assert "a number with a unit" in done.err


def test_a_wrong_layout_does_not_fill_the_screen() -> None:
    inputs = tuple(HeardInput(n, 1 + n % 7, float("nan"), 0) for n in range(500))
    found = Heard(5.0, inputs, 0.0, False, 2, 0, far=12)
    lines = list(heard.lines(found, make_settings()))
    assert len(lines) < 110
    assert "and 468 more inputs; so many tell of another layout of the records" in lines
    assert any(line.startswith("12 tags lie further than max_jump") for line in lines)
    assert json.dumps(heard.as_json(found, make_settings()), allow_nan=False)


def test_counts_of_the_line_are_shown_and_silence_suggests_nothing() -> None:
    link: dict[str, int | float | str] = {"malformed_messages": 2, "first_malformed": "00 ff 07"}
    found = Heard(5.0, (), 0.0, False, 0, 0, 0, {"overlap": 3}, link)
    lines = list(heard.lines(found, make_settings()))
    assert lines[2:] == [
        "no tags arrived",
        "channel clock (input 0): nothing arrived",
        "channel arm_a (input 1): nothing arrived",
        "channel arm_b (input 2): nothing arrived",
        "dropped by the feed, overlap: 3",
        "malformed messages: 2",
        "first malformed: 00 ff 07",
    ]


def test_many_tags_that_wait_to_be_put_in_order_are_worth_a_line() -> None:
    found = Heard(5.0, (HeardInput(1, 5 * 10**8, 1e8, 300_000),), 5.0, True, 0, 0, 0)
    slow = make_settings(max_disorder="1 ms")
    assert "about 1e+05 tags wait" in list(heard.lines(found, slow))[-1]
    assert "wait" not in list(heard.lines(found, make_settings()))[-1]
    assert np.isclose(found.rate_hz, 1e8)
