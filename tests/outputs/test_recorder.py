"""Raw tags in segments beside a run: limits, pauses, what is counted."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from tagstream.feeds import Arrivals
from tagstream.feeds.recorded import RecordingsFeed
from tagstream.outputs.recorder import FLUSH_S, RETRY_S, Recorded, Recorder
from tagstream.recording import Mark, RecordingHeader, RecordingReader
from tagstream.recording.recovery import recover_recordings
from tagstream.settings.sections import Recording
from tests.fakes_outputs import FakeClock
from tests.strategies import int64

STEP = 10**9


def piece(number: int, tags: int = 1000, **fields: Any) -> Arrivals:
    begin = number * STEP
    times = int64(list(range(begin, begin + tags)))
    inputs = np.full(tags, fields.pop("input", 3), fields.pop("dtype", np.uint16))
    return Arrivals(times, inputs, begin, begin + STEP, **fields)


class Bench:
    """A recorder with a clock and a disk that tests set."""

    def __init__(self, folder: Path, **section: Any) -> None:
        self.folder, self.clock, self.free = folder, FakeClock(), 10**12
        self.events: list[tuple[str, dict[str, Any]]] = []
        settings = Recording.model_validate({"min_free": "1 GB", **section})
        self.recorder = Recorder(
            settings, lambda name, **f: self.events.append((name, f)), lambda _: self.free,
            self.clock,
        )  # fmt: skip
        self.recorder.open(Recorded(folder, RecordingHeader(run_uuid="u"), Fraction(1)))

    def tags(self) -> list[int]:
        return [read(path) for path in sorted(self.folder.glob("recording-*.h5"))]


def read(path: Path) -> int:
    with RecordingReader(path) as reader:
        return sum(p.times_ps.size for p in reader.pieces())


def test_segments_end_at_their_size_and_carry_the_run(tmp_path: Path) -> None:
    bench = Bench(tmp_path, segment="10 kB")
    for number in range(5):
        bench.recorder.take(piece(number))
    bench.recorder.close()
    assert bench.tags() == [2000, 2000, 1000]
    with RecordingReader(tmp_path / "recording-0002.h5") as reader:
        assert (reader.header.segment, reader.header.run_uuid) == (2, "u")
    assert [name for name, _ in bench.events] == ["segment"] * 3


def test_segments_end_at_their_length(tmp_path: Path) -> None:
    bench = Bench(tmp_path, segment_time="2 ms")
    for number in range(5):
        bench.recorder.take(piece(number))
    bench.recorder.close()
    assert bench.tags() == [2000, 2000, 1000]


def test_the_oldest_segments_go_when_all_are_too_large(tmp_path: Path) -> None:
    bench = Bench(tmp_path, segment="5 kB", keep="1 B")
    for number in range(4):
        bench.recorder.take(piece(number))
    bench.recorder.close()
    assert [path.name for path in tmp_path.iterdir()] == ["recording-0004.h5"]
    assert [name for name, _ in bench.events].count("segment_removed") == 3


def test_an_input_above_255_begins_a_wider_segment(tmp_path: Path) -> None:
    bench = Bench(tmp_path)
    bench.recorder.take(piece(0))
    bench.recorder.take(piece(1, input=300))
    bench.recorder.close()
    assert bench.tags() == [1000, 1000]
    with RecordingReader(tmp_path / "recording-0002.h5") as reader:
        (found,) = list(reader.pieces())
        assert set(found.inputs.tolist()) == {300}


def test_without_room_recording_pauses_and_the_hole_is_a_gap(tmp_path: Path) -> None:
    bench = Bench(tmp_path)
    bench.recorder.take(piece(0))
    bench.free = 0
    bench.recorder.take(piece(1))
    told = bench.recorder.numbers()
    assert told["recording"] == "paused"
    assert told["recording_not_recorded"] == 1000
    assert told["recording_hole_s"] == pytest.approx(STEP / 1e12)
    bench.free = 10**12
    bench.recorder.take(piece(2))  # too soon
    bench.clock.now += RETRY_S
    bench.recorder.take(piece(3))
    bench.recorder.close()
    assert bench.tags() == [1000, 1000]
    with RecordingReader(tmp_path / "recording-0002.h5") as reader:
        (found,) = list(reader.pieces())
        assert found.gap_before
        assert reader.header.not_recorded_s == pytest.approx(2 * STEP / 1e12)
    segments = sorted(tmp_path.glob("recording-*.h5"))
    (note,) = RecordingsFeed(segments, 10**12).notes
    assert "0.002 s" in note
    names = [name for name, _ in bench.events]
    assert names == ["segment", "recording_paused", "recording_resumed", "segment"]


def test_marks_are_recorded(tmp_path: Path) -> None:
    bench = Bench(tmp_path)
    bench.recorder.take(piece(0, marks=(Mark(5, "power", 1.5),)))
    bench.recorder.close()
    with RecordingReader(tmp_path / "recording-0001.h5") as reader:
        assert reader.marks() == [Mark(5, "power", 1.5)]


def test_an_idle_stream_is_flushed(tmp_path: Path) -> None:
    """A crash then takes nothing: the left-over becomes a whole file."""
    bench = Bench(tmp_path)
    bench.recorder.take(piece(0))
    bench.clock.now += FLUSH_S
    bench.recorder.idle()
    assert bench.recorder._writer is not None
    bench.recorder._writer.abandon()  # as a crash would
    (done,) = recover_recordings(tmp_path)
    assert "1000 tags" in done
    assert bench.tags() == [1000]
