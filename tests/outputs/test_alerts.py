"""When alerts are raised and cleared, and that counting noise seldom raises one."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise
from math import nan
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream.estimates.intervals import ratio_interval
from tagstream.outputs import Row
from tagstream.outputs.alerts import AlertChange, Alerts
from tagstream.settings.sections import Alert
from tests.fakes_outputs import SLICE_PS, SPANS, make_estimate

DAY_S = 86_400


def alert(**keys: Any) -> Alert:
    """On g2_zero over 10 s, or on the health, above 0.1 unless told otherwise."""
    of = {} if "health" in keys else {"estimate": "g2_zero", "span": "10 s"}
    bound = {} if "below" in keys else {"above": 0.1}
    return Alert.model_validate({**of, **bound, **keys})


def made(*sections: Alert) -> Alerts:
    return Alerts(sections, SPANS, SLICE_PS)


def row(index: int, lower: float, value: float, upper: float) -> Row:
    """The span "10 s" has these numbers, the span "run" has none."""
    begin_ps = index * SLICE_PS
    found = make_estimate(value=value, lower=lower, upper=upper)
    none = make_estimate(value=nan, lower=nan, upper=nan, interval="none", reason="too few")
    estimates = {"g2_zero": (none, found)}
    return Row(index, begin_ps, begin_ps + SLICE_PS, SLICE_PS, np.array([1, 1]), estimates)


def turns(alerts: Alerts, lowers: Sequence[float], first: int = 0) -> list[tuple[int, bool]]:
    """(slice, raised) of each change; values lie 0.05 above the lower ends."""
    found = []
    for index, low in enumerate(lowers, first):
        changes = alerts.update(row(index, low, low + 0.05, low + 0.1))
        found += [(index, change.raised) for change in changes]
    return found


def test_above_looks_at_the_lower_end_and_below_at_the_upper_one() -> None:
    above, below = made(alert(above=0.1)), made(alert(below=0.1))
    assert not above.update(row(0, 0.1, 0.2, 0.3))
    assert not below.update(row(0, 0.0, 0.05, 0.1))
    (high,), (low,) = above.update(row(1, 0.11, 0.2, 0.3)), below.update(row(1, 0.0, 0.05, 0.09))
    assert (high.raised, high.compared, high.bound, high.value) == (True, 0.11, 0.1, 0.2)
    assert (low.raised, low.compared, low.bound) == (True, 0.09, 0.1)


def test_the_span_of_the_alert_counts() -> None:
    assert not made(alert(span="run")).update(row(0, 0.2, 0.3, 0.4))


def test_it_is_held_for_whole_slices_one_after_another() -> None:
    quiet, loud = 0.0, 0.2
    lowers = [loud, loud, quiet, loud, loud, loud, loud, quiet, quiet]
    assert turns(made(alert(hold="3 s")), lowers) == [(5, True), (7, False)]
    assert turns(made(alert(hold="2500 ms")), lowers) == [(5, True), (7, False)]
    assert turns(made(alert()), lowers) == [(0, True), (2, False), (3, True), (7, False)]


def test_slices_without_a_number_count_neither_way() -> None:
    alerts = made(alert(hold="3 s"))
    assert turns(alerts, [0.2, 0.2, nan, nan, 0.2, nan, 0.0]) == [(4, True), (6, False)]
    gone = Row(9, 0, SLICE_PS, 0, np.array([0, 0]), {})
    assert not alerts.update(gone)


def test_a_gap_of_whole_slices_is_no_time_that_was_seen() -> None:
    alerts = made(alert(hold="3 s"))
    assert turns(alerts, [0.2]) == []
    assert turns(alerts, [0.2, 0.2], first=3600) == [(3601, True)]


def test_it_is_cleared_on_the_quiet_side_of_clear() -> None:
    lowers = [0.11, 0.09, 0.081, 0.08, 0.09, 0.11]
    assert turns(made(alert(clear=0.08)), lowers) == [(0, True), (3, False), (5, True)]


def test_below_with_clear() -> None:
    alerts = made(alert(below=100.0, clear=120.0))
    uppers = [99.0, 101.0, 119.0, 120.0, 101.0, 99.0]
    found = [
        (i, change.raised)
        for i, high in enumerate(uppers)
        for change in alerts.update(row(i, high - 20, high - 10, high))
    ]
    assert found == [(0, True), (3, False), (5, True)]


def test_health_is_held_in_wall_time() -> None:
    alerts = made(alert(health="last_tag_age_s", above=5.0, hold="10 s"))
    looks = [(0, 6.0), (9, 15.0), (10.5, 1.0), (11, 6.0), (20.9, 7.0), (21, 8.0), (30, 0.0)]
    found = [
        (now, change.raised, change.stream_ps)
        for now, age in looks
        for change in alerts.update_health({"last_tag_age_s": age, "state": "running"}, now)
    ]
    assert found == [(21, True, None), (30, False, None)]


def test_health_that_is_missing_or_a_text_says_nothing() -> None:
    alerts = made(alert(health="queued_s"))
    assert not alerts.update_health({}, 0.0)
    assert not alerts.update_health({"queued_s": "long"}, 0.0)
    assert alerts.update_health({"queued_s": 1}, 0.0)
    assert not alerts.update_health({}, 1.0)
    assert alerts.raised == ["queued_s above 0.1"]


def test_what_is_raised_outlives_a_restart() -> None:
    sections = [alert(), alert(health="gaps", above=3.0, hold="1 s"), alert(above=0.3, clear=0.2)]
    alerts = made(*sections)
    turns(alerts, [0.15])
    assert alerts.raised == ["g2_zero over 10 s above 0.1"]
    again = made(*sections)
    again.restore([*alerts.raised, "an alert of other settings"])
    assert again.raised == alerts.raised
    assert turns(again, [0.15, 0.0]) == [(1, False)]


def test_other_settings_keep_what_is_the_same_and_clear_what_is_gone() -> None:
    before = made(alert(), alert(above=0.12), alert(above=0.9))
    turns(before, [0.15])
    after = made(alert(above=0.5), alert(above=0.12))
    (gone,) = after.follow(before)
    assert (gone.number, gone.raised, gone.what) == (1, False, "g2_zero over 10 s above 0.1")
    assert gone.fields["value"] is None
    assert after.raised == ["g2_zero over 10 s above 0.12"]


def test_the_time_held_so_far_passes_on_to_other_settings() -> None:
    before, after = made(alert(hold="3 s")), made(alert(above=1.0), alert(hold="3 s"))
    turns(before, [0.2, 0.2])
    assert after.follow(before) == []
    assert turns(after, [0.2]) == [(0, True)]


def test_a_change_says_what_happened() -> None:
    (change,) = made(alert(hold="1 s", clear=0.05)).update(row(4, 0.11, 0.2, 0.3))
    what = "g2_zero over 10 s above 0.1 for 1 s until 0.05"
    assert change == AlertChange(1, what, True, 5 * SLICE_PS, 0.2, 0.11, 0.1)
    assert change.event == "alert_raised"
    assert change.text == f"alert raised: {what}; it is 0.2 (compared is 0.11)"


@given(
    st.lists(st.sampled_from([0.0, 0.09, 0.11, 0.2, nan]), max_size=60),
    st.integers(0, 60),
    st.sampled_from(["0 s", "1 s", "4 s"]),
)
def test_cutting_the_stream_changes_nothing_and_turns_alternate(
    lowers: list[float], cut: int, hold: str
) -> None:
    section = alert(hold=hold, clear=0.05)
    whole = turns(made(section), lowers)
    first, second = made(section), made(section)
    parts = turns(first, lowers[:cut])
    assert second.follow(first) == []
    assert parts + turns(second, lowers[cut:], first=min(cut, len(lowers))) == whole
    assert [raised for _, raised in whole] == [n % 2 == 0 for n in range(len(whole))]


@pytest.fixture(scope="module")
def quiet_day() -> list[Row]:
    """A day of 1 s slices of an emitter with g2 = 0.08, 10 counts a second in each of 16 side
    peaks, the estimate over the last 10 s: statistics as in the alert that is tried here."""
    draw = np.random.default_rng(16)
    last_ten = np.ones(10, np.int64)
    central = np.convolve(draw.poisson(0.8, DAY_S), last_ten, "valid")
    sides = np.convolve(draw.poisson(160.0, DAY_S), last_ten, "valid")
    known: dict[tuple[int, int], tuple[float, float, float]] = {}
    rows = []
    for index, (count, side) in enumerate(zip(central.tolist(), sides.tolist(), strict=True)):
        coarse = round(side / 20) * 20  # far finer than what decides; saves a day of root finding
        if (count, coarse) not in known:
            bounds = ratio_interval(count, coarse, 16.0, 0.6827)
            known[count, coarse] = (bounds.lower, 16 * count / coarse, bounds.upper)
        rows.append(row(index, *known[count, coarse]))
    return rows


def raised_in(rows: Sequence[Row], section: Alert) -> int:
    alerts = made(section)
    return sum(change.raised for r in rows for change in alerts.update(r))


def test_noise_alone_raises_few_alerts_where_the_value_would_raise_thousands(
    quiet_day: list[Row],
) -> None:
    by_value = [r.estimates["g2_zero"][1].value > 0.1 for r in quiet_day]
    crossings = sum(now and not before for before, now in pairwise(by_value))
    assert crossings > 1000
    assert raised_in(quiet_day, alert()) < crossings / 3
    assert raised_in(quiet_day, alert(hold="30 s", clear=0.08)) <= 1


def test_a_source_that_went_bad_is_told(quiet_day: list[Row]) -> None:
    alerts = made(alert(hold="30 s"))
    bad = ratio_interval(25, 1600, 16.0, 0.6827)
    changes = [c for r in quiet_day[:60] for c in alerts.update(r)]
    assert not changes
    told = [
        index
        for index in range(60, 120)
        for change in alerts.update(row(index, bad.lower, 0.25, bad.upper))
        if change.raised
    ]
    assert told == [89]
