"""Marks in the stream: tallies apart for each value, equal to a twin that knows all times."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from pathlib import Path
from typing import Any, ClassVar

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from tagstream.conditioning import conditioned
from tagstream.feeds import Arrivals, TimeBase
from tagstream.outputs import Snapshot
from tagstream.outputs.latest import latest_image
from tagstream.outputs.recent import RecentValues
from tagstream.outputs.resume import read_resume
from tagstream.pipeline import Pipeline, State
from tagstream.recording.layout import Mark
from tagstream.settings import Settings
from tests import naive
from tests.fakes_settings import make_settings
from tests.fakes_sink import MemorySink, run_in_memory
from tests.strategies import arrivals, cuts, split, tags

UNIT = 10**8  # ps; a slice is ten of them
END = 200
BINS = 15
TALLY = {
    "kind": "cross-correlation",
    "start": "arm_a",
    "stop": "arm_b",
    "max_lag": f"{BINS * UNIT} ps",
    "bin": f"{UNIT} ps",
}
Marks = list[tuple[int, Any]]


class Pieces:
    """A feed of pieces made beforehand."""

    truth: ClassVar[dict[str, Any]] = {}
    progress = None
    time_base = TimeBase(Fraction(1))

    def __init__(self, pieces: list[Arrivals]) -> None:
        self._pieces = pieces

    def pieces(self) -> Any:
        yield from self._pieces


def make(delays: tuple[int, int] = (0, 0), **more: Any) -> Settings:
    tallies = [TALLY | {"name": "whole"}, TALLY | {"name": "hbt", "split_by": "p"} | more]
    return make_settings(
        delays=[0, *(delay * UNIT for delay in delays)],
        max_disorder="20 ms",
        tally=tallies,
        estimate=[{"name": "rate", "kind": "count-rate", "channel": "arm_a"}],
        rolling={"slice": "1 ms", "spans": ["3 ms"]},
    )


def run(settings: Settings, pieces: list[Arrivals]) -> MemorySink:
    return run_in_memory(settings, Pieces(pieces))


def scaled(events: list[tuple[int, int]]) -> list[tuple[int, int]]:
    return [(t * UNIT, i) for t, i in events]


def as_marks(marks: Marks) -> tuple[Mark, ...]:
    return tuple(Mark(t * UNIT, "p", value) for t, value in marks)


def counts(snapshot: Snapshot, name: str = "counts") -> dict[Any, Any]:
    """value -> array, where there is any count."""
    parts = snapshot.splits["hbt"].parts
    return {v: a[name].tolist() for v, a in parts.items() if np.any(a[name])}


marks_and_values = st.lists(
    st.tuples(st.integers(-5, END + 5), st.sampled_from([1.0, 2.0, "1"])), max_size=8
)


def piece(
    events: list[tuple[int, int]], interval: tuple[int, int], marks: Marks, lossy: bool = False
) -> Arrivals:
    begin, end = interval
    inside = [e for e in events if begin <= e[0] < end]
    ends = {"begin_ps": begin * UNIT, "end_ps": end * UNIT, "lossy": lossy}
    return arrivals(scaled(inside), marks=as_marks(marks), **ends)


@given(
    tags(inputs=3, most=50, span_ps=END - 1),
    st.lists(st.integers(1, END - 1), max_size=6, unique=True).map(sorted),
    marks_and_values,
    st.sampled_from([(0, 0), (7, 0), (-4, 6)]),
    st.data(),
)
def test_parts_equal_the_naive_twin_for_any_intervals_gaps_and_delays(
    events: list[tuple[int, int]],
    bounds: list[int],
    marks: Marks,
    delays: tuple[int, int],
    data: Any,
) -> None:
    intervals = list(zip([0, *bounds], [*bounds, END], strict=True))
    gaps = [i > 0 and data.draw(st.booleans()) for i in range(len(intervals))]
    assume(events and stretches(intervals, gaps, delays))
    # A mark may come with any piece up to the one that reaches it; equal times in order.
    owners = [next((i for i, (_, e) in enumerate(intervals) if t < e), -1) for t, _ in marks]
    owners = [len(intervals) - 1 if owner < 0 else owner for owner in owners]
    early = data.draw(st.booleans())
    pieces = [
        piece(events, interval, [m for m, o in zip(marks, owners, strict=True) if o == i], gap)
        for i, (interval, gap) in enumerate(zip(intervals, gaps, strict=True))
    ]
    if early:
        pieces = [replace(p, marks=() if i else as_marks(marks)) for i, p in enumerate(pieces)]
    snapshot = run(make(delays), pieces).snapshots[-1]

    in_block_time = [(t + max(0, *delays), value) for t, value in marks]
    counted: dict[Any, Any] = {}
    live: dict[Any, int] = {}
    for begin, end in stretches(intervals, gaps, delays):
        late = [0, *delays]
        tags_in = [(t + late[i], i) for t, i in events if not in_gap(t, intervals, gaps)]
        starts, stops = ([t for t, i in tags_in if i == n and begin <= t < end] for n in (1, 2))
        found = naive.split_histograms(starts, stops, in_block_time, (1, BINS))
        for value, histogram in found.items():
            counted[value] = np.add(counted.get(value, 0), histogram)
        for t in range(begin, end):
            value = naive.value_at(in_block_time, t)
            live[value] = live.get(value, 0) + UNIT
    assert counts(snapshot) == {v: c.tolist() for v, c in counted.items() if c.any()}
    assert counts(snapshot, "live_time_ps") == live
    whole = snapshot.spans[0].tallies["whole"]
    for name in ("counts", "start_counts", "stop_counts", "live_time_ps", "pair_time_ps"):
        total = sum(a[name] for a in snapshot.splits["hbt"].parts.values())
        assert np.array_equal(np.broadcast_to(total, whole[name].shape), whole[name]), name


def in_gap(t: int, intervals: list[tuple[int, int]], gaps: list[bool]) -> bool:
    return any(begin <= t < end for (begin, end), gap in zip(intervals, gaps, strict=True) if gap)


def stretches(
    intervals: list[tuple[int, int]], gaps: list[bool], delays: tuple[int, int]
) -> list[tuple[int, int]]:
    """Live stretches: joined intervals, shifted where all channels are complete."""
    joined: list[list[int]] = []
    for i, ((begin, end), gap) in enumerate(zip(intervals, gaps, strict=True)):
        if not gap and joined and not gaps[i - 1]:
            joined[-1][1] = end
        elif not gap:
            joined.append([begin, end])
    found = [(b + max(0, *delays), e + min(0, *delays)) for b, e in joined]
    return [(b, e) for b, e in found if b < e]


@given(tags(inputs=3, most=50, span_ps=END), cuts(), cuts(), marks_and_values, st.booleans())
def test_pieces_and_when_a_mark_arrives_change_nothing(
    events: list[tuple[int, int]],
    fractions: list[float],
    others: list[float],
    marks: Marks,
    early: bool,
) -> None:
    assume(events)
    whole = run(make((7, 0)), [arrivals(scaled(events), marks=as_marks(marks))])
    found = []
    for bounds in (fractions, others):
        pieces = [arrivals(scaled(part)) for part in split(events, bounds)]
        pieces = marked(pieces, marks, early)
        found.append(run(make((7, 0)), pieces))
    for sink in found:
        assert counts(sink.snapshots[-1]) == counts(whole.snapshots[-1])
        a, b = sink.snapshots[-1].splits["hbt"], whole.snapshots[-1].splits["hbt"]
        assert (list(a.parts), a.now) == (list(b.parts), b.now)
        for value, arrays in a.parts.items():
            for name, array in arrays.items():
                assert np.array_equal(array, b.parts[value][name], equal_nan=True), name
        assert rows(sink) == rows(whole)


def marked(pieces: list[Arrivals], marks: Marks, early: bool) -> list[Arrivals]:
    """Each mark with the first piece whose tags have come to it, or all with the first."""
    found = list(pieces)
    newest = np.maximum.accumulate(
        [int(p.times_ps.max()) + 1 if p.times_ps.size else -(2**62) for p in pieces]
    )
    for mark in as_marks(marks):
        reached = np.flatnonzero(newest >= mark.time_ps)
        i = 0 if early else int(reached[0]) if reached.size else len(pieces) - 1
        found[i] = replace(found[i], marks=(*found[i].marks, mark))
    return found


def rows(sink: MemorySink) -> list[tuple[int, int, list[int]]]:
    return [(r.slice_index, r.live_time_ps, r.counts.tolist()) for r in sink.rows]


EVENTS = [(t, 1 + t % 2) for t in range(0, END, 3)]


def test_marks_change_neither_rows_nor_other_tallies() -> None:
    marks: Marks = [(t, float(t)) for t in range(5, END, 13)]
    plain, split_up = (run(make(), [piece(EVENTS, (0, END), m)]) for m in ([], marks))
    assert rows(plain) == rows(split_up)
    assert len(rows(plain)) == END // 10
    for a, b in zip(plain.snapshots[-1].spans, split_up.snapshots[-1].spans, strict=True):
        for name in ("whole", "hbt"):
            assert a.tallies[name]["counts"].tolist() == b.tallies[name]["counts"].tolist()
            assert a.tallies[name]["live_time_ps"] == b.tallies[name]["live_time_ps"]


def test_marks_of_keys_that_split_nothing_change_nothing_at_all() -> None:
    marks = tuple(Mark(t * UNIT, "elsewhere", float(t)) for t in range(5, END, 13))
    plain = piece(EVENTS, (0, END), [])
    a, b = (run(make(), [p]) for p in (plain, replace(plain, marks=marks)))
    expected = [s.snapshots[-1].spans[0].tallies["hbt"]["expected_pairs"] for s in (a, b)]
    assert expected[0].tolist() == expected[1].tolist()
    assert list(b.snapshots[-1].splits["hbt"].parts) == ["unmarked"]
    assert b.snapshots[-1].marks == marks


def test_every_mark_is_logged_also_one_that_is_never_reached() -> None:
    sink = run(make(), [piece(EVENTS, (0, END), [(10, 1.0), (END, "late")])])
    logged = [fields for name, fields in sink.events if name == "mark"]
    assert logged == [{"key": "p", "value": 1.0}, {"key": "p", "value": "late"}]
    assert sink.snapshots[-1].splits["hbt"].now == 1.0
    assert [m.value for m in sink.snapshots[-1].marks] == [1.0, "late"]


@pytest.mark.parametrize("at", [50, 55, 60], ids=["border", "inside", "border after the gap"])
def test_a_mark_in_a_gap_or_at_a_border_is_in_force_from_the_next_instant(at: int) -> None:
    pieces = [piece(EVENTS, (0, 50), []), piece(EVENTS, (60, END), [(at, 1.0)])]
    live = counts(run(make(), pieces).snapshots[-1], "live_time_ps")
    assert live == {"unmarked": 50 * UNIT, 1.0: (END - 60) * UNIT}


def test_a_mark_that_comes_too_late_holds_from_where_the_stream_is() -> None:
    pieces = [piece(EVENTS, (0, 50), []), piece(EVENTS, (50, END), [(20, 1.0)])]
    live = counts(run(make(), pieces).snapshots[-1], "live_time_ps")
    assert live == {"unmarked": 50 * UNIT, 1.0: (END - 50) * UNIT}


def test_marks_before_the_first_tag_are_kept() -> None:
    empty = arrivals([], marks=as_marks([(0, 1.0)]))
    sink = run(make(), [empty, arrivals(scaled(EVENTS))])
    assert list(sink.snapshots[-1].splits["hbt"].parts) == [1.0]


def test_a_run_that_goes_on_from_its_results_ends_as_one_that_never_stopped(
    tmp_path: Path,
) -> None:
    """Up to the gap of the stop, which both have here: results, to a file, read, restored."""
    marks: Marks = [(20, 1.0), (45, "H"), (130, 2.0)]
    pieces = [piece(EVENTS, (0, 100), marks), piece(EVENTS, (120, END), [])]
    whole = run(make(), pieces).snapshots[-1]
    first = run(make(), pieces[:1])
    recent = RecentValues(first.header.spans, first.header.slice_ps)
    meta: dict[str, str | int] = {"program_name": "tagstream", "version": "1"}
    image = latest_image(first.header, meta, first.snapshots[-1], recent)
    (tmp_path / "latest.h5").write_bytes(image)
    sink = MemorySink(first.header)
    feed = Pieces(pieces[1:])
    pipeline = Pipeline(make(), "", feed, conditioned(feed.pieces(), make()), lambda _: sink)
    state = read_resume(tmp_path)
    assert state is not None
    pipeline.resume(state)
    pipeline.sink.replace_snapshot(pipeline._snapshot(State.STARTING))
    assert sink.snapshots[-1].splits["hbt"].now == "H"
    while pipeline.step():
        pass
    pipeline.finish(State.FINISHED)
    resumed = sink.snapshots[-1]
    assert resumed.marks == whole.marks
    for name, array in whole.spans[0].tallies["hbt"].items():
        assert np.array_equal(resumed.spans[0].tallies["hbt"][name], array, equal_nan=True), name
    assert np.array_equal(resumed.spans[0].counts, whole.spans[0].counts)
    assert resumed.spans[0].live_time_ps == whole.spans[0].live_time_ps
    assert (resumed.spans[0].begin_ps, resumed.spans[0].end_ps) == (
        whole.spans[0].begin_ps,
        whole.spans[0].end_ps,
    )
    for name in ("received", "kept", "dropped_in_gap"):
        assert resumed.health[name] == whole.health[name], name
    assert resumed.splits["hbt"].now == 2.0
    assert list(resumed.splits["hbt"].parts) == ["unmarked", 1.0, "H", 2.0]
    for value, arrays in whole.splits["hbt"].parts.items():
        for name, array in arrays.items():
            found = np.broadcast_arrays(resumed.splits["hbt"].parts[value][name], array)
            assert np.array_equal(found[0], found[1], equal_nan=True), (value, name)


def test_more_values_than_the_limit_are_told_once() -> None:
    marks: Marks = [(t, float(t)) for t in range(0, END, 10)]
    sink = run(make(split_limit=3), [piece(EVENTS, (0, END), marks)])
    assert list(sink.snapshots[-1].splits["hbt"].parts) == [0.0, 10.0, 20.0, "other"]
    told = [fields for name, fields in sink.events if name == "split_full"]
    assert told == [{"tally": "hbt", "key": "p"}]
