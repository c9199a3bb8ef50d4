"""Recordings as feeds: the origin, several segments, and the same fate for every tag."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import h5py
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream.conditioning import conditioned as stream
from tagstream.counters import Counters
from tagstream.errors import InputError, SettingsError
from tagstream.feeds import Arrivals, TimeBase
from tagstream.feeds.recorded import RecordingsFeed
from tagstream.recording import RecordedPiece, RecordingHeader, RecordingReader, RecordingWriter
from tagstream.units import BEYOND_LIMIT_PS, PS_PER_S
from tests.fakes_settings import make_settings
from tests.feeds.opened import opened, tags_of
from tests.recording import made
from tests.recording.made import piece


def feed_of(*paths: Path, slice_ps: int = PS_PER_S) -> RecordingsFeed:
    return RecordingsFeed(list(paths), slice_ps)


def segment(folder: Path, number: int, pieces: list[RecordedPiece], run: str = "run") -> Path:
    header = RecordingHeader(run_uuid=run, segment=number, truth={"segment": number})
    return made.write(folder / f"{run}-{number}.h5", pieces, header=header)


def test_times_and_intervals_are_those_recorded(tmp_path: Path) -> None:
    pieces = [
        piece([(5, 1), (3, 2)], (2, 10)),
        piece([], (10, 20), lossy=True),
        piece([(30, 1)], (25, 40), gap_before=True),
    ]
    path = made.write(tmp_path / "a.h5", pieces)
    feed = opened({"kind": "recording"}, path)
    told = [
        (p.times_ps.tolist(), p.inputs.tolist(), p.begin_ps, p.end_ps, p.complete)
        for p in feed.pieces()
    ]
    assert told == [
        ([5, 3], [1, 2], 2, 10, True),
        ([], [], 10, 20, True),
        ([30], [1], 25, 40, True),
    ]
    assert [(p.gap_before, p.lossy) for p in feed.pieces()] == [
        (False, False),
        (False, True),
        (True, False),
    ]


@pytest.mark.parametrize(
    ("pieces", "origin"),
    [
        ([piece([(2_500, 1)], (2_100, 9_000))], 2_000),
        ([piece([(900, 1)], (2_100, 9_000))], 2_000),
        ([piece([(2_500, 1), (900, 1)])], 2_000),
        ([piece([(-1, 1)])], -1_000),
        ([piece([]), piece([(1_001, 1)])], 1_000),
        ([piece([(999, 1)])], 0),
    ],
)
def test_the_first_vouched_begin_else_the_first_tag_fixes_the_origin(
    tmp_path: Path, pieces: list[RecordedPiece], origin: int
) -> None:
    """With a slice of 1 ns for once."""
    header = RecordingHeader(origin_ticks=70, origin_utc="2026-12-01T08:00:00+00:00")
    path = tmp_path / "a.h5"
    with RecordingWriter(path, tick=Fraction(100), header=header) as recording:
        for p in pieces:
            recording.add(p.times_ps, p.inputs, p.begin_ps, p.end_ps)
    feed = feed_of(path, slice_ps=1_000)
    got = tags_of(list(feed.pieces()))
    assert got == [(t - origin, i) for t, i in made.tags_of(pieces)]
    assert feed.time_base.origin_ticks == 70 + origin // 100
    assert feed.time_base.tick == 100


def test_moving_the_origin_moves_its_wall_time(tmp_path: Path) -> None:
    header = RecordingHeader(origin_utc="2026-12-01T08:00:00+00:00")
    path = made.write(tmp_path / "a.h5", [piece([(90 * PS_PER_S, 1)])], header=header)
    feed = feed_of(path)
    assert tags_of(list(feed.pieces())) == [(0, 1)]
    moved = "2026-12-01T08:01:30.000000+00:00"
    assert feed.time_base == TimeBase(Fraction(1), None, moved, header.run_uuid)


def test_a_time_past_the_limit_stays_past_it_when_the_origin_moves(tmp_path: Path) -> None:
    times = [5_000, BEYOND_LIMIT_PS, -BEYOND_LIMIT_PS, 5_007]
    path = made.write(tmp_path / "a.h5", [piece([(t, 1) for t in times])])
    got = [t for t, _ in tags_of(list(feed_of(path, slice_ps=1_000).pieces()))]
    assert got == [0, BEYOND_LIMIT_PS, -BEYOND_LIMIT_PS, 7]


def test_segments_are_joined_in_order_of_their_numbers(tmp_path: Path) -> None:
    paths = [
        segment(tmp_path, 2, [piece([(12, 1)], (10, 20), complete=False)]),
        segment(tmp_path, 3, [piece([(15, 1)], (10, 20))]),
        segment(tmp_path, 1, [piece([(2, 1)], (0, 10))]),
    ]
    feed = feed_of(*paths)
    told = [(p.times_ps.tolist(), p.begin_ps, p.complete, p.gap_before) for p in feed.pieces()]
    assert told == [
        ([2], 0, True, False),
        ([12], 10, False, False),
        ([15], 10, True, False),
    ]
    assert feed.truth == {"segment": 1}
    assert feed.progress == 1.0


def test_a_missing_segment_is_a_gap(tmp_path: Path) -> None:
    first = segment(tmp_path, 1, [piece([(2, 1)]), piece([(3, 1)])])
    third = segment(tmp_path, 3, [piece([(9, 1)]), piece([(10, 1)])])
    assert [p.gap_before for p in feed_of(third, first).pieces()] == [False, True]
    assert [p.gap_before for p in feed_of(third).pieces()] == [False]


def test_files_that_are_no_run_are_refused(tmp_path: Path) -> None:
    one, other = segment(tmp_path, 1, []), segment(tmp_path, 2, [], run="other")
    with pytest.raises(SettingsError, match=r"other-2\.h5: is of another run.*one by one"):
        feed_of(one, other)
    with pytest.raises(SettingsError, match="is segment 1 of the run, as is"):
        feed_of(one, one)
    with pytest.raises(SettingsError, match="no recording"):
        feed_of()
    foreign = tmp_path / "a.nxs"
    with h5py.File(foreign, "w") as file:
        events = file.create_group("events")
        events.attrs["NX_class"] = "NXevent_data"
        events.create_dataset("event_id", data=[4], dtype="i4")
        events.create_dataset("event_time_offset", data=[7], dtype="i8").attrs["units"] = "ns"
    with pytest.raises(SettingsError, match=r"a\.nxs: was written by another program"):
        feed_of(one, foreign)
    assert tags_of(list(feed_of(foreign).pieces())) == [(7_000, 4)]


# Every tag has the same fate live and in a replay -----------------------------------------


@st.composite
def streams(draw: st.DrawFn) -> list[Arrivals]:
    """Intervals in several pieces, some lossy or after gaps; or pieces nobody vouches for."""
    vouched = draw(st.booleans())
    now, pieces = 1_000, []
    for _ in range(draw(st.integers(1, 4))):
        now += draw(st.sampled_from([0, 0, 500]))
        begin, end = now, now + draw(st.integers(0, 3_000))
        parts = draw(st.integers(1, 3))
        gap, lossy = draw(st.booleans()), draw(st.sampled_from([False, False, True]))
        for part in range(parts):
            tags = draw(
                st.lists(
                    st.tuples(st.integers(begin - 50, end + 50), st.integers(0, 3)), max_size=9
                )
            )
            times = np.array([t for t, _ in tags], np.int64)
            inputs = np.array([i for _, i in tags], np.uint8)
            done, first = part == parts - 1, part == 0
            if vouched:
                fields = Arrivals(times, inputs, begin, end, done, gap and first, lossy)
            else:
                fields = Arrivals(times, inputs, gap_before=gap and first, lossy=lossy)
            pieces.append(fields)
        now = end
    return pieces


def conditioned(pieces: list[Arrivals]) -> tuple[list[tuple[object, ...]], Counters]:
    """Blocks, joined as long as their stretch goes on, and counters."""
    found = list(stream(pieces, make_settings((0, 70, 0), (30, 0, 0), "100 ps")))
    joined: list[tuple[object, ...]] = []
    for b in [block for part in found for block in part.blocks]:
        tags = list(zip(b.times_ps.tolist(), b.channels.tolist(), strict=True))
        if b.opens or not joined:
            joined.append((b.begin_ps, b.end_ps, tags))
        else:
            begin, _, before = joined.pop()
            joined.append((begin, b.end_ps, [*before, *tags]))  # type: ignore[misc]
    return joined, found[-1].counters


@given(streams())
def test_a_replay_conditions_as_the_stream_did(
    tmp_path_factory: pytest.TempPathFactory, pieces: list[Arrivals]
) -> None:
    path = tmp_path_factory.mktemp("replay") / "a.h5"
    with RecordingWriter(path, tick=Fraction(1)) as recording:
        for p in pieces:
            recording.add(
                p.times_ps, p.inputs, p.begin_ps, p.end_ps, p.complete, p.gap_before, p.lossy
            )
    if not any(p.begin_ps is not None or p.times_ps.size for p in pieces):
        with pytest.raises(InputError, match="holds no tags and no intervals"):
            list(feed_of(path).pieces())
        return
    replayed = list(feed_of(path).pieces())
    blocks, counters = conditioned(replayed)
    wanted, wanted_counters = conditioned(pieces)
    assert blocks == wanted
    assert counters == wanted_counters


def test_a_recording_that_is_read_twice_gives_the_same(tmp_path: Path) -> None:
    path = made.write(tmp_path / "a.h5", [piece([(5, 1)], (0, 10))])
    feed = feed_of(path)
    assert tags_of(list(feed.pieces())) == tags_of(list(feed.pieces()))
    with RecordingReader(path) as reader:
        assert reader.count == 1
