"""A recording whose writer was killed is readable up to its last flush."""

from __future__ import annotations

import subprocess
import sys
import time
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest

from tagstream.errors import ResultsError
from tagstream.recording import RecordingReader, RecordingWriter
from tagstream.recording.layout import Mark
from tagstream.recording.recovery import recover_recordings
from tests.recording.made import piece, read, rows_of, write

KILLS = 20
WRITING = """
import sys
from fractions import Fraction
import numpy as np
from tagstream.recording import RecordingWriter
writer = RecordingWriter(sys.argv[1], tick=Fraction(1))
step, number = 1000, 0
print("ready", flush=True)
while True:
    times = np.arange(number * step, number * step + 700)
    writer.add(times, np.full(700, number % 5, np.uint8), number * step, (number + 1) * step)
    number += 1
    if number % 50 == 0:
        writer.flush()
        print(number, flush=True)
"""


def test_killed_at_random_instants(tmp_path: Path) -> None:
    """All that was flushed is there, interval by interval, and nothing that is half there."""
    rng = np.random.default_rng(4)
    for number in range(KILLS):
        path = tmp_path / f"recording-{number:04d}.h5"
        command = [sys.executable, "-c", WRITING, str(path)]
        with subprocess.Popen(command, stdout=subprocess.PIPE, text=True) as process:
            assert process.stdout is not None
            assert process.stdout.readline() == "ready\n"
            time.sleep(rng.uniform(0.01, 0.15))
            process.kill()
            told = process.stdout.read().split()
        flushed = int(told[-1]) if told else 0
        (done,) = recover_recordings(tmp_path)
        if not path.exists():
            assert flushed == 0
            assert "nothing" in done
            (tmp_path / f"{path.name}.part").unlink()
            continue
        found = rows_of(read(path))
        assert len(found) >= flushed
        for i, ((begin, end, _), _, complete, tags) in enumerate(found):
            assert (begin, end, complete) == (i * 1000, (i + 1) * 1000, True)
            assert tags == [(t, i % 5) for t in range(i * 1000, i * 1000 + 700)]


def test_marks_and_what_is_known_of_the_run_survive(tmp_path: Path) -> None:
    writer = RecordingWriter(tmp_path / "recording-0001.h5", tick=Fraction(2))
    writer.add_mark(Mark(7, "power", 2.5))
    p = piece([(1, 1), (5, 2)], (0, 10))
    writer.add(p.times_ps, p.inputs, p.begin_ps, p.end_ps)
    writer.flush()
    writer.abandon()
    recover_recordings(tmp_path)
    with RecordingReader(tmp_path / "recording-0001.h5") as reader:
        assert reader.marks() == [Mark(7, "power", 2.5)]
        assert reader.header.run_uuid == writer.header.run_uuid
        assert reader.tick == 2


def test_a_closed_recording_beside_it_is_not_replaced(tmp_path: Path) -> None:
    path = tmp_path / "recording-0001.h5"
    writer = RecordingWriter(path, tick=Fraction(1))
    p = piece([(1, 1)], (0, 10))
    writer.add(p.times_ps, p.inputs, p.begin_ps, p.end_ps)
    writer.flush()
    writer.abandon()
    part = path.with_name(f"{path.name}.part")
    kept = part.read_bytes()
    part.rename(tmp_path / "aside")
    write(path, [piece([(3, 3)], (0, 10))])
    (tmp_path / "aside").rename(part)
    with pytest.raises(ResultsError, match="exists beside"):
        recover_recordings(tmp_path)
    assert part.read_bytes() == kept
    assert read(path)[0].times_ps.tolist() == [3]


def test_garbage_keeps_its_temporary_name(tmp_path: Path) -> None:
    part = tmp_path / "recording-0001.h5.part"
    part.write_bytes(b"garbage" * 100)
    (done,) = recover_recordings(tmp_path)
    assert "cannot be read" in done
    assert part.exists()
    assert not list(tmp_path.glob("*.tmp"))
