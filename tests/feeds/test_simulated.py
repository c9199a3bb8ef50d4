from __future__ import annotations

from fractions import Fraction
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest

from tagstream.errors import SettingsError
from tagstream.feeds import PIECE_TAGS, Feed, build_feed
from tagstream.feeds.simulated import SimulationFeed
from tagstream.settings import feeds as sections

SCENARIOS = Path(__file__).parents[2] / "config" / "scenarios"
S = 10**12


def feed(name: str = "coherent.toml", **keys: object) -> Feed:
    table = {"kind": "simulation", "scenario": SCENARIOS / name, **keys}
    return build_feed(sections.SimulationFeed.model_validate(table), S)


def test_pieces_cover_the_duration_without_a_hole() -> None:
    simulated = feed(duration="1.25 s", seed=3)
    assert isinstance(simulated, SimulationFeed)
    assert simulated.progress == 0
    pieces = list(simulated.pieces())
    assert pieces[0].begin_ps == 0
    assert pieces[-1].end_ps == 1_250_000_000_000
    assert all(a.end_ps == b.begin_ps for a, b in pairwise(pieces))
    assert all(piece.complete and not piece.gap_before and not piece.lossy for piece in pieces)
    assert all(0 < piece.times_ps.size < 1.02 * PIECE_TAGS for piece in pieces)
    assert simulated.progress == 1


def test_the_duration_is_the_scenarios_unless_given() -> None:
    pieces = feed("emitter-pulsed.toml").pieces()
    first = next(pieces)
    longer = next(feed("emitter-pulsed.toml", duration="90 s").pieces())
    assert np.array_equal(first.times_ps, longer.times_ps)
    simulated = feed("emitter-pulsed.toml", duration="10 ms")
    assert [piece.end_ps for piece in simulated.pieces()] == [S // 100]


def test_seeds_differ() -> None:
    one, two = (next(feed(seed=seed, duration="1 ms").pieces()) for seed in (1, 2))
    assert not np.array_equal(one.times_ps, two.times_ps)


def test_marks_come_with_their_pieces() -> None:
    simulated = feed("dip-scan.toml", duration="5 s")
    pieces = list(simulated.pieces())
    marks = [mark for piece in pieces for mark in piece.marks]
    assert [(mark.time_ps, mark.key) for mark in marks] == [
        (n * 2 * S, "position") for n in range(3)
    ]
    assert marks[0].value == -90.0
    for piece in pieces:
        assert piece.begin_ps is not None
        assert piece.end_ps is not None
        assert all(piece.begin_ps <= mark.time_ps < piece.end_ps for mark in piece.marks)


def test_time_base_and_truth() -> None:
    simulated = feed("emitter-pulsed-clock.toml", seed=5)
    assert simulated.time_base.tick == Fraction(8)
    assert simulated.time_base.origin_ticks is None
    assert simulated.truth["seed"] == 5
    assert simulated.truth["rate_input_0_hz"] == 2.5e6
    assert simulated.truth["g2_zero"] == 0.015


def test_a_wrong_scenario_is_refused_when_the_feed_is_built(tmp_path: Path) -> None:
    with pytest.raises(SettingsError, match=r"nothing\.toml: no such file"):
        feed(str(tmp_path / "nothing.toml"))
