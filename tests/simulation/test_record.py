from __future__ import annotations

from pathlib import Path

import numpy as np

from tagstream.feeds import build_feed
from tagstream.settings import feeds as sections
from tagstream.simulation.record import record_scenario
from tagstream.simulation.truth import truth
from tests.simulation.scenes import scenario, tags

S = 10**12
SOURCE = """
kind = "two-photon-interference"
period = "40 ns"
photons_per_pulse = 0.01
g2_zero = 0.1
overlap = 0.8
alternate = "60 ms"
"""


def test_a_recording_holds_tags_marks_and_truth(tmp_path: Path) -> None:
    scene, path = scenario(SOURCE), tmp_path / "run.h5"
    known = record_scenario(scene, path, 3, S // 5)
    assert known == {**truth(scene, S // 5), "seed": 3}
    table = {"kind": "recording", "path": path}
    replayed = build_feed(sections.FEED_KINDS["recording"].model_validate(table), S)
    pieces = list(replayed.pieces())
    marks = [(mark.time_ps, mark.value) for piece in pieces for mark in piece.marks]
    names = ("parallel", "crossed", "parallel", "crossed")
    assert marks == [(n * 6 * S // 100, name) for n, name in enumerate(names)]
    times = np.concatenate([piece.times_ps for piece in pieces])
    assert np.array_equal(times, tags(scene, 3, S // 5)[0])
    assert replayed.truth == known
