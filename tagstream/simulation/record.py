"""A scenario to a recording that carries its own truth and marks."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

from tagstream.recording.header import RecordingHeader
from tagstream.recording.writer import RecordingWriter
from tagstream.simulation.pieces import simulate_pieces
from tagstream.simulation.scenario import Scenario
from tagstream.simulation.truth import truth


def record_scenario(
    scenario: Scenario,
    path: Path,
    seed: int,
    duration_ps: int | None = None,
    after_piece: Callable[[int], bool] = lambda end_ps: False,
) -> dict[str, Any]:
    """Write the simulated tags to a new recording at `path`; return the truth written into it.

    duration_ps: absent, the scenario's. after_piece: told how far the recording has come, in ps;
    True ends it there. Raises ResultsError when the file exists or cannot be written.
    """
    known = {**truth(scenario, duration_ps), "seed": seed}
    header = RecordingHeader(title=scenario.title, truth=known)
    wide = any(detector.input > 255 for detector in scenario.detectors)
    wide = wide or (scenario.clock is not None and scenario.clock.input > 255)
    with RecordingWriter(
        path, tick=scenario.tick_ps, inputs_above_255=wide, header=header
    ) as writer:
        for piece in simulate_pieces(scenario, seed, duration_ps):
            writer.add(piece.times_ps, piece.inputs, piece.begin_ps, piece.end_ps)
            for mark in piece.marks:
                writer.add_mark(mark)
            if after_piece(piece.end_ps):
                break
    return known
