"""The state follows from the numbers, the worst first."""

from __future__ import annotations

import pytest

from tagstream.pipeline import State
from tagstream.supervision.state import Around, Flow, state_of
from tests.fakes_outputs import FakeClock


@pytest.mark.parametrize(
    ("numbers", "stopping", "state"),
    [
        ({}, False, State.RUNNING),
        ({"last_tag_age_s": 4.9, "queued_s": 1.9, "shed_fraction": 0.0}, False, State.RUNNING),
        ({"last_tag_age_s": 5.1}, False, State.STARVED),
        ({"last_tag_age_s": 5.1, "queued_s": 2.1}, False, State.BEHIND),
        ({"shed_fraction": 0.3}, False, State.BEHIND),
        ({"degraded": 1, "shed_fraction": 0.3, "last_tag_age_s": 9}, False, State.DEGRADED),
        ({"degraded": 1}, True, State.STOPPING),
    ],
)
def test_the_worst_comes_first(
    numbers: dict[str, int | float | str], stopping: bool, state: State
) -> None:
    assert state_of(numbers, stopping) is state


def test_age_and_waiting_of_tags() -> None:
    clock = FakeClock(10.0)
    flow = Flow(clock)
    assert flow.numbers() == {}
    flow.counted(9.5, 3)
    clock.now = 12.0
    assert flow.numbers() == {"last_tag_age_s": 2.5, "queued_s": 0.5}
    flow.counted(11.0, 0)  # a heartbeat brings no tags
    flow.counted(None, 5)
    assert flow.numbers() == {"last_tag_age_s": 2.5, "queued_s": 0.5}


def test_later_sources_prevail_and_flags_are_numbers() -> None:
    around = Around([lambda: {"a": 1, "b": 1}, lambda: {"b": 2, "last_tag_age_s": 60}], bool)
    found = around()
    assert found["a"] == 1
    assert found["b"] == 2
    assert found["state"] == "starved"
    assert found["starved"] == 1
    assert found["behind"] == 0
